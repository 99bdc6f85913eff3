"""Numbers into the encodings of COMTRADE: scaling, codes of missing samples, time stamps, rows."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from analyzer.records.channels import AnalogChannel
from analyzer.records.comtrade.binary import row_type
from analyzer.records.comtrade.cfg import Encoding, Revision
from analyzer.records.comtrade.stamps import STAMP_MISSING
from analyzer.records.model import Record

_BLOCK_NUMBERS = 1 << 20  # samples of all channels together that are in memory at once
_FULL_SCALE: dict[Encoding, int] = {"ascii": 99_998, "binary": 32_767, "binary32": 2_147_483_647}
# The next number after the code of a missing sample, towards zero.
_FLOAT32_LIMIT = float(np.nextafter(np.finfo(np.float32).max, np.float32(0.0)))
_FLOAT32_SMALL = 1e-30  # below, single precision runs out of digits


@dataclass(frozen=True, slots=True, kw_only=True)
class StoredScale:
    """Scaling of one channel in the file: value = multiplier * stored + addend.

    Attributes
    ----------
    passes_through : bool
        Whether the record's stored numbers are written as they are.
    holds_counts : bool
        Whether the file holds whole numbers.
    """

    multiplier: float
    addend: float
    passes_through: bool
    holds_counts: bool


@dataclass(frozen=True, slots=True, kw_only=True)
class StampClock:
    """Unit of the written time stamps: `unit_s` seconds, in the file as `multiplier` times the base."""

    unit_s: float
    multiplier: float


def analog_scales(record: Record, *, revision: Revision, encoding: Encoding) -> list[StoredScale]:
    """Return the scaling of each analog channel, in one pass over the samples."""
    n = len(record.analog)
    low, high = np.full(n, np.inf), np.full(n, -np.inf)
    whole, single = np.ones(n, dtype=bool), np.ones(n, dtype=bool)
    for block in _blocks(record):
        if not n:
            break
        stored = block.stored()
        present = np.isfinite(stored)
        low = np.minimum(low, np.where(present, stored, np.inf).min(axis=1))
        high = np.maximum(high, np.where(present, stored, -np.inf).max(axis=1))
        whole &= np.all(~present | (stored == np.rint(stored)), axis=1)
        with np.errstate(over="ignore", invalid="ignore"):
            single &= np.all(~present | (stored == stored.astype(np.float32)), axis=1)
    if encoding == "float32" or (encoding == "ascii" and revision == 2013):
        fits = single if encoding == "float32" else np.ones(n, dtype=bool)
        return [_real_scale(c, low[k], high[k], bool(fits[k])) for k, c in enumerate(record.analog)]
    full_scale = _FULL_SCALE[encoding]
    return [_count_scale(c, low[k], high[k], bool(whole[k]), full_scale) for k, c in enumerate(record.analog)]


def _real_scale(channel: AnalogChannel, low: float, high: float, fits: bool) -> StoredScale:
    if low > high or (fits and -_FLOAT32_LIMIT <= low <= high <= _FLOAT32_LIMIT):  # no sample at all, or all
        return StoredScale(
            multiplier=channel.multiplier, addend=channel.addend, passes_through=True, holds_counts=False
        )
    ends = (abs(channel.multiplier * end + channel.addend) for end in (low, high))
    peak = max((float(end) for end in ends if np.isfinite(end)), default=0.0)
    multiplier = 1.0
    if peak and not _FLOAT32_SMALL < peak < _FLOAT32_LIMIT:
        multiplier = math.ldexp(1.0, math.frexp(peak)[1] - 1)  # a power of two costs no digit
    return StoredScale(multiplier=multiplier, addend=0.0, passes_through=False, holds_counts=False)


def _count_scale(
    channel: AnalogChannel, low: float, high: float, whole: bool, full_scale: int
) -> StoredScale:
    if low > high or (whole and -full_scale <= low <= high <= full_scale):  # no sample at all, or all
        return StoredScale(
            multiplier=channel.multiplier, addend=channel.addend, passes_through=True, holds_counts=True
        )
    ends = sorted(channel.multiplier * end + channel.addend for end in (low, high))
    if not np.all(np.isfinite(ends)):  # a scaling that means nothing; its values are written as missing
        ends = [0.0, 0.0]
    # Halved before they are subtracted, so that the widest range does not overflow.
    half_span, middle = ends[1] / 2 - ends[0] / 2, ends[0] / 2 + ends[1] / 2
    step = half_span / full_scale
    if step < np.finfo(np.float64).tiny:
        step = 1.0
    return StoredScale(multiplier=float(step), addend=float(middle), passes_through=False, holds_counts=True)


def stamp_clock(record: Record, *, revision: Revision) -> StampClock:
    """Return the stamps' unit: a power of ten whose count of the record's duration still fits 32 bits.

    Microseconds where the sampling rate tells the time anyway; down to nanoseconds where only stamps do. The
    oldest revision knows microseconds only.
    """
    finest = 0 if record.timebase.stamps_s is None else -3
    exponents = (0,) if revision == 1991 else range(finest, 10)
    fitting = (k for k in exponents if record.duration_s / 10.0 ** (k - 6) < STAMP_MISSING)
    exponent = next(fitting, exponents[-1])
    # Nine decimals in the configuration's dates make the nanosecond the base.
    base = -9 if revision == 2013 and _has_nanoseconds(record) else -6
    return StampClock(unit_s=10.0 ** (exponent - 6), multiplier=10.0 ** (exponent - 6 - base))


def _has_nanoseconds(record: Record) -> bool:
    return any(moment is not None and moment.digits > 6 for moment in (record.start, record.trigger))


def binary_rows(
    record: Record, scales: list[StoredScale], *, revision: Revision, encoding: Encoding
) -> Iterator[bytes]:
    """Yield the rows of a binary data file, block by block."""
    layout = row_type(encoding, len(record.analog), len(record.digital))
    first_number = 1
    for block, stamps in zip(_blocks(record), _stamps(record, revision), strict=True):
        rows = np.zeros(block.n_samples, dtype=layout)
        rows["number"] = np.arange(first_number, first_number + block.n_samples)
        rows["stamp"] = np.minimum(stamps, STAMP_MISSING - 1)
        rows["analog"] = _encoded(block, scales, revision=revision, encoding=encoding).T
        for k, channel in enumerate(block.digital):
            rows["digital"][:, k // 16] |= block.states(channel.id).astype(np.uint16) << (k % 16)
        first_number += block.n_samples
        yield rows.tobytes()


def ascii_rows(record: Record, scales: list[StoredScale], *, revision: Revision) -> Iterator[bytes]:
    """Yield the lines of an ASCII data file, block by block."""
    import pyarrow as pa
    from pyarrow import csv

    first_number = 1
    options = csv.WriteOptions(include_header=False, quoting_style="none")
    for block, stamps in zip(_blocks(record), _stamps(record, revision), strict=True):
        columns = [np.arange(first_number, first_number + block.n_samples), stamps]
        arrays = [pa.array(column) for column in columns]
        for row in _encoded(block, scales, revision=revision, encoding="ascii"):
            arrays.append(
                pa.array(row, from_pandas=True) if revision == 2013 else pa.array(row.astype(np.int64))
            )
        arrays.extend(pa.array(block.states(channel.id)) for channel in block.digital)
        sink = pa.BufferOutputStream()
        table = pa.table(dict(zip((str(k) for k in range(len(arrays))), arrays, strict=True)))
        csv.write_csv(table, sink, options)
        first_number += block.n_samples
        yield bytes(sink.getvalue()).replace(b"\n", b"\r\n")


def _encoded(
    block: Record, scales: list[StoredScale], *, revision: Revision, encoding: Encoding
) -> NDArray[np.float64]:
    """Return the numbers to store, codes of missing samples included, shape (n_analog, n)."""
    numbers = np.empty((len(scales), block.n_samples))
    stored, written = block.stored(), block.as_written()
    for k, scale in enumerate(scales):
        if scale.passes_through:
            numbers[k] = stored[k]
        elif scale.holds_counts:
            full_scale = _FULL_SCALE[encoding]
            counts = np.rint((written[k] - scale.addend) / scale.multiplier)
            numbers[k] = np.where(np.isfinite(counts), np.clip(counts, -full_scale, full_scale), np.nan)
        else:
            numbers[k] = written[k] / scale.multiplier
    missing = ~np.isfinite(numbers)
    if encoding == "ascii":
        if revision < 2013:
            numbers[missing] = 999_999 if revision == 1991 else 99_999
    elif encoding == "binary":
        if revision == 1991:  # -1 is this revision's code of a missing sample
            numbers[numbers == -1] = -2
        numbers[missing] = -1 if revision == 1991 else -32_768
    elif encoding == "binary32":
        numbers[missing] = -2_147_483_648
    else:
        numbers = np.clip(numbers, -_FLOAT32_LIMIT, _FLOAT32_LIMIT)
        numbers[missing] = np.float64(np.float32(-3.4028235e38))
    return numbers


def _blocks(record: Record) -> Iterator[Record]:
    end = record.first + record.n_samples
    block = max(1, _BLOCK_NUMBERS // max(16, len(record.analog) + len(record.digital)))
    for first in range(record.first, end, block):
        yield replace(record, first=first, stop=min(first + block, end))


def _stamps(record: Record, revision: Revision) -> Iterator[NDArray[np.int64]]:
    unit_s = stamp_clock(record, revision=revision).unit_s
    start_s: float | None = None
    for block in _blocks(record):
        times_s = block.times()
        start_s = float(times_s[0]) if start_s is None else start_s
        yield np.rint((times_s - start_s) / unit_s).astype(np.int64)
