"""An hour of 24 channels at 10 kHz: how fast it is scanned, in how much memory, and what is found in it."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

from tests.bench.measuring import note, run_apart
from tests.long_records import NAMES, Dropped, write_long_record

pytestmark = pytest.mark.bench

_DURATION_S, _SAMPLES_PER_CYCLE = 3600.0, 200
_RATE_HZ = 50.0 * _SAMPLES_PER_CYCLE
_FILE_BYTES = _DURATION_S * _RATE_HZ * (8 + 2 * len(NAMES))
_LEAST_PER_S, _MOST_BYTES = 25e6, 400e6
FAULTS = (
    Dropped(at_s=61.2345, fault_type="AG"),
    Dropped(at_s=200.0071, fault_type="BC", lasts_s=0.12),
    Dropped(at_s=222.5, fault_type="BG", resistance_ohm=8.0),
    Dropped(at_s=811.4142, fault_type="ABC", lasts_s=0.06),
    Dropped(at_s=1700.0, fault_type="CAG", lasts_s=6.0),
    Dropped(at_s=2222.2222, fault_type="CG", resistance_ohm=4.0),
    Dropped(at_s=2226.0003, fault_type="AB"),
    Dropped(at_s=3590.9, fault_type="BCG"),
)


def test_an_hour_of_24_channels(tmp_path: Path) -> None:
    if shutil.disk_usage(tmp_path).free < 1.5 * _FILE_BYTES:
        pytest.skip("not enough room on the disk for a file of 2 GB")
    path = write_long_record(
        tmp_path, FAULTS, duration_s=_DURATION_S, samples_per_cycle=_SAMPLES_PER_CYCLE, seed=20240607
    )
    try:
        shares = (1 / 16, 1 / 4, 1.0)
        run_apart("1.0", path, module="tests.bench.long_apart")  # brings the file into the page cache
        scans = [run_apart(repr(share), path, module="tests.bench.long_apart") for share in shares]
        whole = run_apart("examine", path, module="tests.bench.long_apart")
    finally:
        path.with_suffix(".dat").unlink()
    for share, scan in zip(shares, scans, strict=True):
        _note(f"scan, {share:g} of it", scan)
        assert scan["n_numbers"] / scan["seconds"] >= _LEAST_PER_S
        assert scan["peak_bytes"] < _MOST_BYTES
        inside = [fault for fault in FAULTS if fault.at_s < share * _DURATION_S]
        held = [[low < fault.at_s < high for low, high in scan["found"]] for fault in inside]
        assert all(sum(row) == 1 for row in held)
        assert all(any(column) for column in zip(*held, strict=True))  # no window without a fault
    paces = [scan["processor_seconds"] / scan["n_numbers"] for scan in scans]
    note(
        what="the same, processor time per sample of 1/16, 1/4 and all",
        here=" / ".join(f"{pace * 1e9:.1f} ns" for pace in paces),
        ratio=max(paces) / min(paces),
        limit="1.5",
    )
    assert max(paces) <= 1.5 * min(paces)
    _note("examine", whole)
    assert whole["peak_bytes"] < _MOST_BYTES
    assert [(kind, fault_type) for kind, fault_type, _ in whole["found"]] == [
        ("fault", fault.fault_type) for fault in FAULTS
    ]
    for (_, _, time_s), fault in zip(whole["found"], FAULTS, strict=True):
        assert time_s == pytest.approx(fault.at_s, abs=1 / _RATE_HZ)


def _note(what: str, figures: dict[str, float]) -> None:
    pace = figures["n_numbers"] / figures["seconds"]
    note(
        what=f"an hour of 24 channels at 10 kHz ({_FILE_BYTES / 1e9:.1f} GB): {what}, time",
        here=f"{figures['seconds']:.1f} s, {pace / 1e6:.0f} million samples/s",
        limit="" if what == "examine" else f"{_LEAST_PER_S / 1e6:.0f} million samples/s",
    )
    note(
        what=f"an hour of 24 channels at 10 kHz: {what}, memory with the mapped file",
        here=f"{figures['peak_bytes'] / 1e6:.0f} MB",
        limit=f"{_MOST_BYTES / 1e6:.0f} MB",
    )
