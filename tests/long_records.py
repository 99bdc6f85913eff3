"""Long records of several feeders on one bus: quiet load, and faults of a simulated network now and then."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from analyzer.forge.schedule import Fault, FaultEnd, FaultStart
from tests.records.comtrade.makers import analog_line, cfg
from tests.simulated import Case, simulate

FREQUENCY_HZ = 50.0
FEEDERS = ("F1", "F2", "F3", "F4", "F5")
NAMES = (*(f"{feeder} I{p}" for feeder in FEEDERS for p in "ABCN"), *(f"Bus V{p}" for p in "ABCN"))
_STEP_A, _STEP_V = 0.5, 1.0
_NOISE_A, _NOISE_V = 1.0, 5.0  # RMS; the load is 180 A, the voltage 11.5 kV
_LEAD_S, _DIES_OUT_S = 0.2, 1.0
_LOAD_DRIFT, _DRIFT_S = 0.2, 1800.0
_OTHER_LOADS_A_PER_V = (0.004, 0.009, 0.015, 0.0)  # the last feeder is idle
_BLOCK_CYCLES = 200


@dataclass(frozen=True, slots=True, kw_only=True)
class Dropped:
    """A fault on the first feeder that ends by itself, so that its load comes back."""

    at_s: float
    fault_type: str
    lasts_s: float = 0.08
    resistance_ohm: float = 0.0


def write_long_record(
    folder: Path, faults: Sequence[Dropped], *, duration_s: float, samples_per_cycle: int, seed: int
) -> Path:
    """Write a BINARY record of 24 channels block by block; return the configuration's path."""
    rate_hz = FREQUENCY_HZ * samples_per_cycle
    block = _BLOCK_CYCLES * samples_per_cycle
    n_samples = round(duration_s * rate_hz)
    pieces = [_piece(fault, samples_per_cycle) for fault in faults]
    quiet = np.tile(_case(samples_per_cycle, duration_s=0.2)[:, :samples_per_cycle], _BLOCK_CYCLES)
    row = np.dtype([("number", "<u4"), ("stamp", "<u4"), ("analog", "<i2", (len(NAMES),))])
    rng = np.random.default_rng(seed)
    steps = np.array([_STEP_V if name.startswith("Bus") else _STEP_A for name in NAMES], dtype=np.float32)
    noise = np.array([_NOISE_V if name.startswith("Bus") else _NOISE_A for name in NAMES], dtype=np.float32)
    path = folder / "long.dat"
    with path.open("wb") as file:
        for first in range(0, n_samples, block):
            index = np.arange(first, min(first + block, n_samples))
            waves = quiet[:, : index.size].copy()
            for start, piece in pieces:
                begin, end = max(start, first), min(start + piece.shape[1], first + index.size)
                if begin < end:
                    waves[:, begin - first : end - first] = piece[:, begin - start : end - start]
            counts = _channels(waves, index / rate_hz)
            counts += noise * rng.standard_normal(counts.shape, dtype=np.float32)
            rows = np.empty(index.size, dtype=row)
            rows["number"] = index + 1
            rows["stamp"] = np.rint(index * (1e6 / rate_hz)).astype(np.int64) % 2**32
            rows["analog"] = np.rint(counts / steps)
            file.write(rows.tobytes())
    text = cfg(
        analog=[
            analog_line(k + 1, name, "V" if name.startswith("Bus") else "A", phase="", a=f"{steps[k]:g}")
            for k, name in enumerate(NAMES)
        ],
        digital=(),
        rates=[f"{rate_hz:g},{n_samples}"],
        kind="BINARY",
    )
    configuration = path.with_suffix(".cfg")
    configuration.write_text(text.replace(",BAY,", ",,"), encoding="utf-8", newline="")
    return configuration


def _channels(waves: np.ndarray, times_s: np.ndarray) -> np.ndarray:
    """From the first feeder's currents and the bus voltages, shape (6, n), to all channels, shape (n, 24)."""
    drift = 1.0 + _LOAD_DRIFT * np.sin(2 * np.pi * times_s / _DRIFT_S)
    currents, volts = drift * waves[:3], waves[3:]
    sets = [currents, *(share * drift * volts for share in _OTHER_LOADS_A_PER_V), volts]
    return np.vstack([np.vstack([three, three.sum(axis=0)]) for three in sets]).T.astype(np.float32)


def _piece(fault: Dropped, samples_per_cycle: int) -> tuple[int, np.ndarray]:
    """The sample at which it begins, in phase with the quiet wave, and the waves until the load is back."""
    rate_hz = FREQUENCY_HZ * samples_per_cycle
    start = int((fault.at_s - _LEAD_S) * FREQUENCY_HZ) * samples_per_cycle
    at_s = fault.at_s - start / rate_hz
    events = (
        FaultStart(
            time_s=at_s,
            fault=Fault(
                type=fault.fault_type,  # type: ignore[arg-type]
                fraction=0.4,
                phase_resistance_ohm=fault.resistance_ohm,
            ),
        ),
        FaultEnd(time_s=at_s + fault.lasts_s),
    )
    duration_s = np.ceil((at_s + fault.lasts_s + _DIES_OUT_S) * FREQUENCY_HZ) / FREQUENCY_HZ
    return start, _case(samples_per_cycle, *events, duration_s=duration_s)


def _case(samples_per_cycle: int, *events: FaultStart | FaultEnd, duration_s: float) -> np.ndarray:
    case = Case(
        samples_per_cycle=samples_per_cycle,
        snr_db=300.0,
        load_ohm=60 + 20j,
        load_place="end",
        duration_s=duration_s,
    )
    never = (FaultStart(time_s=duration_s / 2, fault=Fault(type="AG", fraction=0.4)),)
    record, _ = simulate(case, *(events or never))
    waves = record.signals()
    return waves[:, : round(duration_s * FREQUENCY_HZ) * samples_per_cycle]
