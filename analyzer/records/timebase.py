"""When each sample was taken: from sampling rates, or from the stamps beside the samples."""

from __future__ import annotations

import math
from collections.abc import Collection, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, slots=True, kw_only=True)
class RateSegment:
    """Consecutive samples at one rate.

    Attributes
    ----------
    first, stop : int
        Sample range, counted from 0, `stop` exclusive.
    start_s : float
        Time of sample `first` after the record's first sample. [s]
    rate_hz : float
        Sampling rate. [Hz]
    """

    first: int
    stop: int
    start_s: float
    rate_hz: float


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class TimeBase:
    """Sample times of a record, computed when asked for.

    Attributes
    ----------
    n_samples : int
        Number of samples.
    segments : tuple of RateSegment
        Without gaps; for times from stamps one segment at the mean rate.
    stamps_s : ndarray of float64, shape (n_samples,), or None
        Times after the first sample where the rates do not give them. [s]
    """

    n_samples: int
    segments: tuple[RateSegment, ...]
    stamps_s: NDArray[np.float64] | None = None

    @classmethod
    def from_rates(
        cls,
        rates_hz: Sequence[float],
        stops: Sequence[int],
        *,
        n_samples: int,
        own_step_first: Collection[int] = (),
    ) -> TimeBase:
        """Return the time base of stretches at constant rates.

        The step from the last sample of a stretch to the next one's first is one period of the earlier
        rate, as the stamps of recorders that change their rate show, unless stated otherwise.

        Parameters
        ----------
        rates_hz : sequence of float
            Rate of each stretch, positive. [Hz]
        stops : sequence of int
            One past each stretch's last sample, rising; the last stretch is drawn out, or cut, to
            `n_samples`.
        n_samples : int
            Number of samples in all.
        own_step_first : collection of int
            Samples that begin a stretch one period of their own rate after the sample before.

        Raises
        ------
        ValueError
            If a rate is not positive and finite.
        """
        if not all(0.0 < rate_hz < math.inf for rate_hz in rates_hz):
            raise ValueError("sampling rates must be positive")
        segments: list[RateSegment] = []
        first, start_s = 0, 0.0
        last_kept = len(rates_hz) - 1
        for k, (rate_hz, stop) in enumerate(zip(rates_hz, stops, strict=True)):
            stop = n_samples if k == last_kept else min(stop, n_samples)
            if stop > first:
                if segments and first in own_step_first:
                    start_s += 1.0 / rate_hz - 1.0 / segments[-1].rate_hz
                segments.append(RateSegment(first=first, stop=stop, start_s=start_s, rate_hz=rate_hz))
                start_s += (stop - first) / rate_hz
                first = stop
        return cls(n_samples=n_samples, segments=tuple(segments))

    @classmethod
    def from_stamps(cls, stamps_s: NDArray[np.float64]) -> TimeBase:
        """Return the time base of explicit times, counted from the first of them.

        Parameters
        ----------
        stamps_s : ndarray of float64, shape (n,)
            Rising times. [s]

        Raises
        ------
        ValueError
            If the times do not rise.
        """
        if not np.all(stamps_s[1:] > stamps_s[:-1]):
            raise ValueError("sample times must rise")
        times = stamps_s - stamps_s[0] if stamps_s.size else stamps_s.astype(np.float64)
        times.setflags(write=False)
        n = int(times.size)
        if n < 2:
            return cls(n_samples=n, segments=(), stamps_s=times)
        mean_rate_hz = (n - 1) / float(times[-1])
        segment = RateSegment(first=0, stop=n, start_s=0.0, rate_hz=mean_rate_hz)
        return cls(n_samples=n, segments=(segment,), stamps_s=times)

    @property
    def rates_hz(self) -> tuple[float, ...]:
        """Distinct sampling rates in the order of their first use. [Hz]"""
        return tuple(dict.fromkeys(segment.rate_hz for segment in self.segments))

    @property
    def duration_s(self) -> float:
        """Time from the first sample to the last. [s]"""
        return float(self.times(self.n_samples - 1, self.n_samples)[0]) if self.n_samples else 0.0

    def times(self, first: int = 0, stop: int | None = None) -> NDArray[np.float64]:
        """Return the times of samples `first` to `stop` (exclusive) after the record's first sample. [s]

        Returns
        -------
        ndarray of float64, shape (stop - first,)
            Read-only.
        """
        stop = self.n_samples if stop is None else min(stop, self.n_samples)
        if self.stamps_s is not None:
            return self.stamps_s[first:stop]
        parts = []
        for segment in self.segments:
            a, b = max(first, segment.first), min(stop, segment.stop)
            if a < b:
                parts.append(
                    segment.start_s + np.arange(a - segment.first, b - segment.first) / segment.rate_hz
                )
        times_s = np.concatenate(parts) if parts else np.empty(0)
        times_s.setflags(write=False)
        return times_s

    def index_at(self, time_s: float) -> int:
        """Return the first sample at or after `time_s`; `n_samples` when there is none.

        A sample is taken to be at `time_s` when it is within a billionth of a second of it, so that limits
        computed from sample times select the samples they came from.
        """
        target_s = time_s - 1e-9
        if self.stamps_s is not None:
            return int(np.searchsorted(self.stamps_s, target_s, side="left"))
        for segment in self.segments:
            end_s = segment.start_s + (segment.stop - 1 - segment.first) / segment.rate_hz
            if target_s <= segment.start_s:
                return segment.first
            if target_s <= end_s:
                return segment.first + int(np.ceil((target_s - segment.start_s) * segment.rate_hz))
        return self.n_samples
