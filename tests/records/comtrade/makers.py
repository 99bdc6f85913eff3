"""Small COMTRADE files, each as odd as a test wants it."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np

from analyzer.records import ReadOptions, Record, read

NUMBER_TYPES = {"BINARY": "<i2", "BINARY32": "<i4", "FLOAT32": "<f4"}


def analog_line(
    number: int = 1,
    name: str = "IA",
    unit: str = "A",
    *,
    phase: str = "A",
    a: str = "0.5",
    b: str = "0",
    skew: str = "0",
    low: str = "-32767",
    high: str = "32767",
    primary: str = "1",
    secondary: str = "1",
    side: str = "P",
    fields: int = 13,
) -> str:
    row = [str(number), name, phase, "BAY", unit, a, b, skew, low, high, primary, secondary, side]
    return ",".join(row[:fields])


def cfg(
    *,
    station: str = "Testburg",
    device: str = "R1",
    revision: str | None = "1999",
    analog: Sequence[str] = (analog_line(),),
    digital: Sequence[str] = ("1,TRIP,,,0",),
    counts: str | None = None,
    frequency: str = "50",
    rates: Sequence[str] = ("1000,4",),
    n_rates: str | None = None,
    start: str = "01/02/2023,10:00:00.000000",
    trigger: str = "01/02/2023,10:00:00.001000",
    kind: str = "ASCII",
    tail: Sequence[str] = ("1",),
    newline: str = "\r\n",
) -> str:
    """The text of a configuration; `tail` is what follows the file type."""
    total = len(analog) + len(digital)
    lines = [
        f"{station},{device}" + (f",{revision}" if revision is not None else ""),
        counts if counts is not None else f"{total},{len(analog)}A,{len(digital)}D",
        *analog,
        *digital,
        frequency,
        str(len(rates)) if n_rates is None else n_rates,
        *rates,
        start,
        trigger,
        kind,
        *tail,
    ]
    return newline.join(lines) + newline


def ascii_rows(
    analog: Sequence[Sequence[object]],
    digital: Sequence[Sequence[int]] = (),
    *,
    stamps: Sequence[object] | None = None,
    first: int = 1,
    newline: str = "\r\n",
) -> bytes:
    """ASCII data; one sequence per channel."""
    n = len((*analog, *digital)[0])
    stamps = [1000 * k for k in range(n)] if stamps is None else stamps
    columns = [range(first, first + n), stamps, *analog, *digital]
    return "".join(
        ",".join(str(cell) for cell in row) + newline for row in zip(*columns, strict=True)
    ).encode()


def binary_rows(
    analog: Sequence[Sequence[float]],
    digital: Sequence[Sequence[int]] = (),
    *,
    kind: str = "BINARY",
    stamps: Sequence[int] | None = None,
    first: int = 1,
) -> bytes:
    """Binary data; one sequence per channel."""
    n = len((*analog, *digital)[0])
    n_words = (len(digital) + 15) // 16
    row = np.dtype(
        [
            ("number", "<u4"),
            ("stamp", "<u4"),
            ("analog", NUMBER_TYPES[kind], (len(analog),)),
            ("digital", "<u2", (n_words,)),
        ]
    )
    rows = np.zeros(n, dtype=row)
    rows["number"] = np.arange(first, first + n)
    rows["stamp"] = 1000 * np.arange(n) if stamps is None else stamps
    for k, values in enumerate(analog):
        rows["analog"][:, k] = values
    for k, states in enumerate(digital):
        rows["digital"][:, k // 16] |= np.asarray(states, dtype=np.uint16) << (k % 16)
    return rows.tobytes()


def put(
    folder: Path,
    configuration: str | bytes,
    data: bytes,
    *,
    stem: str = "rec",
    suffixes: tuple[str, str] = (".cfg", ".dat"),
    encoding: str = "utf-8",
) -> Path:
    """Write both files; return the configuration's path."""
    text = configuration.encode(encoding) if isinstance(configuration, str) else configuration
    path = folder / f"{stem}{suffixes[0]}"
    path.write_bytes(text)
    (folder / f"{stem}{suffixes[1]}").write_bytes(data)
    return path


def record_of(
    folder: Path, configuration: str | bytes, data: bytes, *, options: ReadOptions | None = None
) -> Record:
    """Write both files and read them."""
    return read(put(folder, configuration, data), options=options)


def combined(
    configuration: str | bytes, data: bytes, *, mark: str = "ASCII", inf: str = "", hdr: str = ""
) -> bytes:
    """A combined file with the standard's section marks."""
    text = configuration.encode() if isinstance(configuration, str) else configuration
    return b"".join(
        (
            b"--- file type: CFG ---\r\n",
            text,
            b"--- file type: INF ---\r\n",
            inf.encode(),
            b"--- file type: HDR ---\r\n",
            hdr.encode(),
            f"--- file type: DAT {mark} ---\r\n".encode(),
            data,
        )
    )


def codes(record: Record) -> set[str]:
    """Codes of the problems of a record."""
    return {problem.code for problem in record.problems}


FOUR = [100, 101, 102, 103]
TRIPS = [0, 0, 1, 1]


def four_samples(**data: object) -> bytes:
    """ASCII data of one analog and one digital channel."""
    return ascii_rows([FOUR], [TRIPS], **data)  # type: ignore[arg-type]
