"""Large records for the benchmarks: written by numpy and pyarrow alone, the same each time."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Literal

import numpy as np
import pyarrow as pa
from pyarrow import csv

from tests.records.comtrade.makers import analog_line, cfg

SEED = 20240607
N_ANALOG, N_DIGITAL = 24, 16
RATE_HZ = 4800.0
ROW = np.dtype(
    [("number", "<u4"), ("stamp", "<u4"), ("analog", "<i2", (N_ANALOG,)), ("digital", "<u2", (1,))]
)
MULTIPLIERS = np.linspace(0.01, 3.0, N_ANALOG)
ADDENDS = np.linspace(-5.0, 5.0, N_ANALOG)
_BLOCK = 19_200  # samples: whole cycles of 50 Hz, so that blocks join without a jump


@dataclass(frozen=True, slots=True, kw_only=True)
class BigFile:
    """A record on disk: configuration, data file, number of samples."""

    configuration: Path
    data: Path
    n_samples: int

    @property
    def n_bytes(self) -> int:
        return self.data.stat().st_size


def binary_file(folder: Path, *, n_bytes: int) -> BigFile:
    """A BINARY record of 24 analog channels and 16 digital ones."""
    path = folder / "big.dat"
    n_samples = n_bytes // ROW.itemsize
    rows = np.zeros(_BLOCK, dtype=ROW)
    rows["analog"] = _counts().T
    rows["digital"][:, 0] = np.arange(_BLOCK) // 100
    with path.open("wb") as file:
        for first in range(0, n_samples, _BLOCK):
            index = np.arange(first, min(first + _BLOCK, n_samples))
            rows["number"][: index.size] = index + 1
            rows["stamp"][: index.size] = _stamps_us(index)
            file.write(rows[: index.size].tobytes())
    return _with_configuration(path, n_samples, kind="BINARY")


def ascii_file(
    folder: Path, *, n_bytes: int, numbers: Literal["whole", "real"], stem: str = "big"
) -> BigFile:
    """An ASCII record of the same channels, at least `n_bytes` long: counts, or four decimals."""
    path = folder / f"{stem}.dat"
    counts = _counts().astype(np.int64)
    channels = list(counts) if numbers == "whole" else list(np.round(counts * 0.0123, 4))
    states = list((np.arange(_BLOCK) // 100 >> np.arange(N_DIGITAL)[:, None] & 1).astype(np.int64))
    options = csv.WriteOptions(include_header=False, quoting_style="none")
    first = 0
    with path.open("wb") as file:
        while file.tell() < n_bytes:
            index = np.arange(first, first + _BLOCK)
            columns = [index + 1, _stamps_us(index), *channels, *states]
            lines = pa.BufferOutputStream()
            csv.write_csv(pa.table({str(k): column for k, column in enumerate(columns)}), lines, options)
            file.write(bytes(lines.getvalue()).replace(b"\n", b"\r\n"))
            first += _BLOCK
    return _with_configuration(path, first, kind="ASCII")


def sparse_file(folder: Path, *, n_bytes: int) -> BigFile:
    """A BINARY record whose file is empty but for its beginning and two seconds in the middle."""
    path = folder / "long.dat"
    n_samples = n_bytes // ROW.itemsize
    rows = np.zeros(int(2 * RATE_HZ), dtype=ROW)
    rows["analog"] = _counts().T[: rows.size]
    with path.open("wb") as file:
        file.truncate(n_samples * ROW.itemsize)
        for first in (0, n_samples // 2 - int(RATE_HZ)):
            index = np.arange(first, first + rows.size)
            rows["number"] = index + 1
            rows["stamp"] = _stamps_us(index) % 2**32
            file.seek(first * ROW.itemsize)
            file.write(rows.tobytes())
    return _with_configuration(path, n_samples, kind="BINARY")


def stamped_file(folder: Path, *, n_bytes: int) -> BigFile:
    """A BINARY record without a sampling rate, a stamp in every row (80 us apart), all else zero."""
    path = folder / "stamped.dat"
    n_samples = n_bytes // ROW.itemsize
    block = 1 << 18
    with path.open("wb") as file:
        for first in range(0, n_samples, block):
            index = np.arange(first, min(first + block, n_samples))
            rows = np.zeros(index.size, dtype=ROW)
            rows["number"] = index + 1
            rows["stamp"] = 80 * index
            file.write(rows.tobytes())
    return _with_configuration(path, n_samples, kind="BINARY", rates="stamps")


def _counts() -> np.ndarray:
    """Counts of int16 with noise, shape (N_ANALOG, _BLOCK)."""
    rng = np.random.default_rng(SEED)
    angle = 2 * np.pi * 50.0 * np.arange(_BLOCK) / RATE_HZ
    peaks, phases = rng.uniform(2000, 30_000, (N_ANALOG, 1)), rng.uniform(0, 2 * np.pi, (N_ANALOG, 1))
    return np.rint(peaks * np.sin(angle + phases) + rng.normal(0.0, 20.0, (N_ANALOG, _BLOCK)))


def _stamps_us(index: np.ndarray) -> np.ndarray:
    return np.rint(index * (1e6 / RATE_HZ)).astype(np.int64)


def _with_configuration(
    data: Path, n_samples: int, *, kind: str, rates: Literal["stated", "stamps"] = "stated"
) -> BigFile:
    path = data.with_suffix(".cfg")
    text = cfg(
        analog=[
            analog_line(k + 1, f"I{k + 1}", a=repr(float(MULTIPLIERS[k])), b=repr(float(ADDENDS[k])))
            for k in range(N_ANALOG)
        ],
        digital=[f"{k + 1},D{k + 1},,,0" for k in range(N_DIGITAL)],
        rates=[f"{RATE_HZ:g},{n_samples}" if rates == "stated" else f"0,{n_samples}"],
        n_rates=None if rates == "stated" else "0",
        kind=kind,
    )
    path.write_text(text, encoding="utf-8", newline="")
    return BigFile(configuration=path, data=data, n_samples=n_samples)
