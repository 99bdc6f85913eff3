"""The reference files: values, times and states in every revision and encoding, and the missing ones."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from numpy.typing import NDArray

from analyzer.records import Record, read

NAN = float("nan")
WHOLE = [
    "t1991_ascii.cfg", "t1991_binary.cfg", "t1999_ascii.cfg", "t1999_binary.cfg", "t1999_binary32.cfg",
    "t1999_float32.cfg", "t2013_ascii.cfg", "t2013_binary.cfg", "t2013_binary32.cfg", "t2013_float32.cfg",
    "cff_ascii.cff", "cff_binary.cff", "cff_float32.cff",
]  # fmt: skip


@pytest.fixture(scope="module")
def folder(shared_folder: Path) -> Path:
    return shared_folder / "reference" / "comtrade_samples"


@pytest.fixture(scope="module")
def expected(folder: Path) -> NDArray[np.float64]:
    table: NDArray[np.float64] = np.loadtxt(folder / "expected.csv", delimiter=",", skiprows=1)
    return table.T


def test_all_files_there_are_read(folder: Path) -> None:
    names = {path.name for path in folder.iterdir() if path.suffix in (".cfg", ".cff")}
    assert names == set(WHOLE) | {f"{name}.cfg" for name in [*MISSING, *TIMES, "e_skew"]}


@pytest.mark.parametrize("name", WHOLE)
def test_values_times_and_states(folder: Path, expected: NDArray[np.float64], name: str) -> None:
    times_s, ia, va, trip = expected
    record = read(folder / name)
    assert record.n_samples == 320
    assert_allclose(record.times(), times_s, rtol=0, atol=1e-15)
    # All values of this record are whole multiples of what every encoding resolves.
    assert_array_equal(record.as_written(["IA"])[0], ia)
    assert_array_equal(record.as_written(["VA"])[0], va)
    assert_array_equal(record.signals(), [ia, va])
    assert_array_equal(record.states("TRIP"), trip)
    assert record.nominal_frequency_hz == 50.0
    assert record.trigger_s == pytest.approx(0.04, abs=1e-12)
    assert record.start is not None
    assert record.start.isoformat()[:19] == "2023-02-01T10:00:00"
    said = name.removeprefix("t").removesuffix(".cfg").split("_")
    if name.startswith("t"):
        assert (str(record.origin.revision), record.origin.encoding) == tuple(said)


# What IA holds as the standard's revision demands. The independent reader differs where a comment says so.
MISSING = {
    "e_missing_ascii99": [100, NAN, 102, 103],
    "e_missing_ascii13": [100, NAN, 102, 103],  # an empty field: that reader stops with an error
    "e_ts_ok13": [100, 99999, 102, 103],  # no code in 2013 and within the declared range: NaN in that reader
    "e_missing_bin": [100, NAN, 102, 103],
    "m_1991": [100, NAN, 102],  # 999999: a value in that reader
    "m_b32": [1, NAN, 2],
    "m_f32max": [1, NAN, 2],  # -3.4028235E38: a value in that reader
    "m_f32min": [1, 2.0**-126, 2],  # the smallest normal number, which that reader's code compares with
    "m_f32nan": [1, NAN, 2],
}


@pytest.mark.parametrize("name", MISSING)
def test_missing_samples(folder: Path, name: str) -> None:
    record = read(folder / f"{name}.cfg").survey()
    assert_array_equal(record.stored(["IA"])[0], MISSING[name])
    channel = record.channel("IA")
    assert channel.ratio is not None
    scaled = (channel.multiplier * np.array(MISSING[name]) + channel.addend) * channel.ratio
    assert_allclose(record.signal("IA"), scaled, rtol=1e-15)
    n_missing = int(np.isnan(MISSING[name]).sum())
    assert sum(p.code == "missing-samples" for p in record.problems) == n_missing


TIMES = {
    "e_timemult_nrates0": [0, 1e-3, 2.5e-3, 3e-3],
    "e_ts_missing_bin": [0, 1e-3, 2e-3, 3e-3],  # the third stamp is missing: that reader stops with an error
    "m_ctrlz": [0, 1e-3, 2e-3],
    "m_emptytime": [0, 1e-3, 2e-3],
    "m_multirate": [0, 1e-3, 2e-3, 4e-3, 6e-3, 8e-3],
    "m_ns": [0, 2e-4, 4e-4],
}


@pytest.mark.parametrize("name", TIMES)
def test_times(folder: Path, name: str) -> None:
    record = read(folder / f"{name}.cfg")
    assert_allclose(record.times(), TIMES[name], rtol=0, atol=1e-15)
    assert_array_equal(record.stored(["IA"])[0], 100 + np.arange(record.n_samples))


def test_skew(folder: Path) -> None:
    record: Record = read(folder / "e_skew.cfg")
    assert_allclose(record.channel_times("IA"), np.arange(4) / 1000 + 250e-6, rtol=0, atol=1e-15)
    assert_array_equal(record.channel_times("VA"), record.times())
