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

from analyzer.records.comtrade.cfg import Encoding, Revision
from analyzer.records.comtrade.stamps import STAMP_MISSING, compare_with_rates
from analyzer.records.problems import Problem
from analyzer.records.timebase import TimeBase

_ANALOG_TYPE: dict[Encoding, str] = {"binary": "<i2", "binary32": "<i4", "float32": "<f4"}
# Rows converted in one go: their analog part (a few hundred kB) stays in the processor's cache while each
# column is taken out of it, which is what makes column-wise reading of row-wise files fast.
_BLOCK_BYTES = 1 << 18
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
        block_rows = max(1, _BLOCK_BYTES // self.rows.dtype.itemsize)
        analog = self.rows["analog"]
        for start in range(first, stop, block_rows):
            end = min(start + block_rows, stop)
            block = analog[start:end]
            for k, column in enumerate(columns):
                part = out[k, start - first : end - first]
                stored = block[:, column]
                np.multiply(stored, gain[k], out=part)
                if offset[k]:
                    part += offset[k]
                missing = self._missing(stored, column, start, end)
                if missing is not None:
                    part[missing] = np.nan
        return out

    def digital(self, columns: Sequence[int], first: int, stop: int) -> NDArray[np.uint8]:
        """Return states, shape (len(columns), stop - first)."""
        out = np.empty((len(columns), stop - first), dtype=np.uint8)
        words = self.rows["digital"]
        for k, column in enumerate(columns):
            out[k] = (words[first:stop, column // 16] >> (column % 16)) & 1
        return out

    def survey(self) -> tuple[Problem, ...]:
        """Return where the stamps contradict the sampling rates."""
        if self.timebase.stamps_s is not None:
            return ()
        stamps = self.rows["stamp"].astype(np.float64)
        stamps[stamps == STAMP_MISSING] = np.nan
        return compare_with_rates(stamps * self.stamp_unit_s, self.timebase, shown=self.shown)

    def _missing(self, stored: NDArray[Any], column: int, first: int, stop: int) -> NDArray[np.bool_] | None:
        if self.encoding == "float32":
            missing: NDArray[np.bool_] = (stored == _FLOAT32_MISSING) | ~np.isfinite(stored)
        elif self.encoding == "binary32":
            missing = stored == np.iinfo(np.int32).min
        elif self.revision == 1991:
            if not np.any(stored == -1):
                return None
            return missing_in_1991(self.rows["analog"][:, column])[first:stop]
        else:
            missing = stored == np.iinfo(np.int16).min
        return missing if missing.any() else None


def missing_in_1991(stored: NDArray[np.int16]) -> NDArray[np.bool_]:
    """Return which samples of a whole 1991 channel are missing.

    That revision marks a missing sample by 0xFFFF, which is also -1, a number that every wave passes through.
    A run of them counts as samples where -1 is about half-way between the samples on either side (two counts
    of noise, or a tenth of their difference, allowed), and as missing otherwise.

    Parameters
    ----------
    stored : ndarray of int16, shape (n,)

    Returns
    -------
    ndarray of bool, shape (n,)
    """
    marked = stored == -1
    missing = np.zeros(stored.shape, dtype=np.bool_)
    edges = np.flatnonzero(np.diff(np.concatenate(([False], marked, [False])).astype(np.int8)))
    for first, stop in zip(edges[::2], edges[1::2], strict=True):
        beside = [float(stored[k]) for k in (first - 1, stop) if 0 <= k < len(stored)]
        passes = bool(beside) and abs(-1.0 - sum(beside) / len(beside)) <= 2.0 + 0.1 * abs(
            beside[-1] - beside[0]
        )
        missing[first:stop] = not passes
    return missing
