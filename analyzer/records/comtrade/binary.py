"""Binary data files: rows of fixed size that stay on disk until samples are asked for.

A row is: sample number (uint32), time stamp (uint32), the analog samples (int16, int32 or float32), and the
digital ones in as many uint16 as are needed; little-endian, without delimiters.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from analyzer.records.blobs import let_go
from analyzer.records.comtrade.cfg import Encoding, Revision
from analyzer.records.comtrade.stamps import check_numbers, compare_with_rates, present_stamps
from analyzer.records.problems import Problem
from analyzer.records.timebase import TimeBase

_ANALOG_TYPE: dict[Encoding, str] = {"binary": "<i2", "binary32": "<i4", "float32": "<f4"}
# Rows converted in one go: their analog part (a few hundred kB) stays in the processor's cache while each
# column is taken out of it, which is what makes column-wise reading of row-wise files fast.
_BLOCK_BYTES = 1 << 18
_BLOCK_ROWS = 1 << 10  # fewer rows of many channels cost more in calls than the cache saves
_LONGEST_RUN = 4096
_KEPT_BYTES = 1 << 20  # of the file; when more has been read, it is let go
_NO_SAMPLES = np.full(2, np.nan)
_FLOAT32_MISSING = np.float32(-3.4028235e38)


def row_type(encoding: Encoding, n_analog: int, n_digital: int) -> np.dtype[Any]:
    """Return the layout of one row as a structured numpy type."""
    return np.dtype(
        [
            ("number", "<u4"),
            ("stamp", "<u4"),
            ("analog", _ANALOG_TYPE[encoding], (n_analog,)),
            ("digital", "<u2", ((n_digital + 15) // 16,)),
        ]
    )


@dataclass(frozen=True, slots=True, eq=False)
class BinarySource:
    """Samples of a binary data file.

    Attributes
    ----------
    rows : ndarray of the row type, shape (n_samples,)
        Usually over a memory-mapped file.
    encoding, revision
        Which number stands for a missing sample depends on both.
    timebase : TimeBase
        For the comparison with the stamps.
    stamp_unit_s : float
        Unit of the stamps. [s]
    shown : str
        Name of the data file for messages.
    """

    rows: NDArray[Any]
    encoding: Encoding
    revision: Revision
    timebase: TimeBase
    stamp_unit_s: float
    shown: str

    @property
    def n_samples(self) -> int:
        """Number of samples of each channel."""
        return len(self.rows)

    def analog(
        self,
        columns: Sequence[int],
        first: int,
        stop: int,
        gain: NDArray[np.float64],
        offset: NDArray[np.float64],
    ) -> NDArray[np.float64]:
        """Return ``gain * stored + offset``, NaN where missing, shape (len(columns), stop - first)."""
        out = np.empty((len(columns), stop - first))
        block_rows = max(_BLOCK_ROWS, _BLOCK_BYTES // self.rows.dtype.itemsize)
        kept_rows = max(1, _KEPT_BYTES // self.rows.dtype.itemsize)
        is_much, kept = stop - first > kept_rows, first
        analog = self.rows["analog"]
        for start in range(first, stop, block_rows):
            end = min(start + block_rows, stop)
            block = analog[start:end]
            for k, column in enumerate(columns):
                part = out[k, start - first : end - first]
                stored = block[:, column]
                np.multiply(stored, gain[k], out=part, dtype=np.float64)
                if offset[k]:
                    part += offset[k]
                missing = self._missing(stored)
                if missing is not None and missing.any():
                    part[missing] = np.nan
            if is_much and (end - kept > kept_rows or end == stop):
                let_go(self.rows, kept, end)
                kept = end
        if self.encoding == "binary" and self.revision == 1991:
            for k, column in enumerate(columns):
                out[k, _missing_in_1991(analog[:, column], first, stop)] = np.nan
            if is_much:
                let_go(self.rows, first, stop)
        return out

    def digital(self, columns: Sequence[int], first: int, stop: int) -> NDArray[np.uint8]:
        """Return states, shape (len(columns), stop - first)."""
        out = np.empty((len(columns), stop - first), dtype=np.uint8)
        words = self.rows["digital"]
        for k, column in enumerate(columns):
            out[k] = (words[first:stop, column // 16] >> (column % 16)) & 1
        return out

    def survey(self) -> tuple[Problem, ...]:
        """Return where the sample numbers jump and the stamps contradict the sampling rates."""
        problems = check_numbers(
            self.rows["number"], shown=self.shown, done=lambda first, stop: let_go(self.rows, first, stop)
        )
        if self.timebase.stamps_s is not None:
            return problems
        return problems + compare_with_rates(self._stamps_s, self.timebase, shown=self.shown)

    def _stamps_s(self, first: int, stop: int) -> NDArray[np.float64]:
        stamps_s = present_stamps(self.rows["stamp"][first:stop]) * self.stamp_unit_s
        let_go(self.rows, first, stop)
        return stamps_s

    def _missing(self, stored: NDArray[Any]) -> NDArray[np.bool_] | None:
        missing: NDArray[np.bool_]
        if self.encoding == "float32":
            missing = (stored == _FLOAT32_MISSING) | ~np.isfinite(stored)
            return missing
        if self.encoding == "binary32":
            missing = stored == np.iinfo(np.int32).min
            return missing
        if self.revision == 1991:
            return None
        missing = stored == np.iinfo(np.int16).min
        return missing


def _missing_in_1991(stored: NDArray[np.int16], first: int, stop: int) -> NDArray[np.bool_]:
    """Return which samples from `first` to `stop` of a whole channel are missing, shape (stop - first,)."""
    # Whole runs and two samples beside them are needed to judge what begins or ends in this range.
    begin, end = max(0, first - _LONGEST_RUN - 2), min(len(stored), stop + _LONGEST_RUN + 2)
    return missing_in_1991(stored[begin:end])[first - begin : stop - begin]


def missing_in_1991(stored: NDArray[np.int16]) -> NDArray[np.bool_]:
    """Return which samples of a 1991 channel are missing.

    That revision marks a missing sample by 0xFFFF, which is also -1, a number that every wave passes through.
    A run of -1 counts as samples where the straight line between the samples beside it stays near -1: within
    two counts, a tenth of their difference, and the change of slope there, which is how much the wave or its
    noise departs from a line. Without samples beside it, and beyond 4096, a run is missing.

    Parameters
    ----------
    stored : ndarray of int16, shape (n,)

    Returns
    -------
    ndarray of bool, shape (n,)
    """
    marked: NDArray[np.bool_] = stored == -1
    if not marked.any():
        return marked
    turns = np.flatnonzero(np.diff(marked, prepend=False, append=False))
    first, stop = turns[::2], turns[1::2]
    values = np.concatenate((_NO_SAMPLES, stored.astype(np.float64), _NO_SAMPLES))
    values[2:-2][marked] = np.nan
    # NaN where there is no sample or it is marked itself; `values` begins two places before `stored`.
    before, before_that = values[first + 1], values[first]
    after, after_that = values[stop + 2], values[stop + 3]
    slope_in, slope_out = before - before_that, after_that - after
    bend = np.abs(np.nan_to_num(slope_in) - np.nan_to_num(slope_out))
    bend[np.isfinite(before) & np.isfinite(after) & ~np.isfinite(slope_in + slope_out)] = 0.0
    # At the record's ends there is one sample beside the run, and no line.
    before, after = np.where(np.isnan(before), after, before), np.where(np.isnan(after), before, after)
    step = (after - before) / (stop - first + 1)
    off = np.maximum(np.abs(-1.0 - (before + step)), np.abs(-1.0 - (after - step)))
    passes = (off <= 2.0 + 0.1 * np.abs(after - before) + bend) & (stop - first <= _LONGEST_RUN)
    missing = np.zeros(stored.shape, dtype=np.bool_)
    lengths = (stop - first)[~passes]
    runs = np.repeat(first[~passes], lengths)
    missing[runs + np.arange(runs.size) - np.repeat(np.cumsum(lengths) - lengths, lengths)] = True
    return missing
