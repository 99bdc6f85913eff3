"""Where a record's samples come from: the contract of every format, and arrays in memory."""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from analyzer.records.problems import Problem

_BLOCK_SAMPLES = 1 << 14
_THREADED_FROM = 1 << 21  # numbers: from here on several processors pay


class SampleSource(Protocol):
    """Samples of one record.

    A partial read gives exactly what the same part of a full read gives.
    """

    @property
    def n_samples(self) -> int:
        """Number of samples of each channel."""

    def analog(
        self,
        columns: Sequence[int],
        first: int,
        stop: int,
        gain: NDArray[np.float64],
        offset: NDArray[np.float64],
    ) -> NDArray[np.float64]:
        """Return ``gain * stored + offset``, NaN where a sample is missing.

        Parameters
        ----------
        columns : sequence of int
            Analog channels, counted from 0.
        first, stop : int
            Sample range, `stop` exclusive.
        gain, offset : ndarray of float64, shape (len(columns),)
            Scaling of each column.

        Returns
        -------
        ndarray of float64, shape (len(columns), stop - first)
        """

    def digital(self, columns: Sequence[int], first: int, stop: int) -> NDArray[np.uint8]:
        """Return the states 0 or 1 of digital channels, shape (len(columns), stop - first)."""

    def survey(self) -> tuple[Problem, ...]:
        """Read all there is and return what only the samples can tell."""


@dataclass(frozen=True, slots=True, eq=False)
class ArraySource:
    """Samples held in memory.

    Attributes
    ----------
    stored : ndarray, shape (n_analog, n_samples)
        Numbers as stored, NaN where missing.
    states : ndarray of uint8, shape (n_digital, n_samples)
        0 or 1.
    problems : tuple of Problem
        What the reading of the samples found.
    """

    stored: NDArray[np.float64]
    states: NDArray[np.uint8]
    problems: tuple[Problem, ...] = ()

    def __post_init__(self) -> None:
        if self.stored.ndim != 2 or self.states.ndim != 2 or self.stored.shape[1] != self.states.shape[1]:
            raise ValueError("analog and digital samples must be (channels, samples) of equal length")

    @property
    def n_samples(self) -> int:
        """Number of samples of each channel."""
        return int(self.stored.shape[1])

    def analog(
        self,
        columns: Sequence[int],
        first: int,
        stop: int,
        gain: NDArray[np.float64],
        offset: NDArray[np.float64],
    ) -> NDArray[np.float64]:
        """Return ``gain * stored + offset``, shape (len(columns), stop - first)."""
        out = np.empty((len(columns), stop - first))

        def scale(k: int) -> None:
            stored = self.stored[columns[k], first:stop]
            for start in range(0, stop - first, _BLOCK_SAMPLES):
                part = out[k, start : start + _BLOCK_SAMPLES]
                np.multiply(stored[start : start + _BLOCK_SAMPLES], gain[k], out=part)
                if offset[k]:  # added while the product is in the cache
                    part += offset[k]

        if out.size < _THREADED_FROM:
            for k in range(len(columns)):
                scale(k)
        else:
            with ThreadPoolExecutor() as pool:
                list(pool.map(scale, range(len(columns))))
        return out

    def digital(self, columns: Sequence[int], first: int, stop: int) -> NDArray[np.uint8]:
        """Return states, shape (len(columns), stop - first)."""
        return self.states[list(columns), first:stop]

    def survey(self) -> tuple[Problem, ...]:
        """Return what the reading found, and the missing samples of each channel."""
        return self.problems
