"""When an event begins, to a sample: the currents leave the continuation of the sinusoids before."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline
from scipy.stats import chi2

from analyzer.waveform.prefault import Prefault

_QUIET_QUANTILE = 0.2  # of half-cycle blocks: what a quiet stretch of the record looks like
_NOISE_FACTOR = 8.0
_SHARE_OF_LARGEST = 0.04


def first_change(
    times_s: NDArray[np.float64], currents: NDArray[np.float64], *, frequency_hz: float, after: int = 0
) -> int | None:
    """Return the first sample from `after` on at which the currents differ from one cycle before.

    Parameters
    ----------
    times_s : ndarray of float64, shape (n,)
        [s]
    currents : ndarray of float64, shape (k, n)
        [A]
    frequency_hz : float
        [Hz]
    after : int
        Sample to look from; at least one cycle before it is needed.

    Returns
    -------
    int or None
        To a few samples; None when nothing changes.

    Notes
    -----
    A change counts when it exceeds eight times what quiet half-cycles show, and 4 % of the largest change in
    the stretch, in half of the samples of the following quarter cycle.
    """
    period_s = 1.0 / frequency_hz
    begin = int(np.searchsorted(times_s, times_s[0] + period_s))
    if begin >= len(times_s) - 2:
        return None
    earlier = CubicSpline(times_s, currents, axis=1)(times_s[begin:] - period_s)
    change = np.abs(currents[:, begin:] - earlier)
    half = max(3, round(0.5 * (len(times_s) - 1) / (times_s[-1] - times_s[0]) / frequency_hz))
    n_blocks = change.shape[1] // half
    if n_blocks < 1:
        return None
    blocks = change[:, : n_blocks * half].reshape(len(change), n_blocks, half)
    quiet = np.quantile(np.sqrt(np.mean(blocks**2, axis=2)), _QUIET_QUANTILE, axis=1)
    threshold = np.maximum(_NOISE_FACTOR * quiet, _SHARE_OF_LARGEST * change.max())
    exceeds = np.any(change > np.maximum(threshold, 1e-300)[:, None], axis=0)
    quarter = max(2, half // 2)
    counts = np.convolve(exceeds, np.ones(quarter), mode="full")[quarter - 1 :]  # of the quarter ahead
    candidates = np.flatnonzero(exceeds & (counts >= 0.5 * quarter))
    candidates = candidates[candidates + begin >= after]
    return int(candidates[0]) + begin if candidates.size else None


def departure(
    times_s: NDArray[np.float64],
    currents: NDArray[np.float64],
    prefault: Prefault,
    *,
    first: int,
    stop: int,
    false_alarm: float = 1e-6,
) -> int | None:
    """Return the first sample at which the currents leave their continuation for good.

    Parameters
    ----------
    times_s : ndarray of float64, shape (n,)
        [s]
    currents : ndarray of float64, shape (k, n)
        The first k channels of the prefault fit. [A]
    prefault : Prefault
    first, stop : int
        Where to look.
    false_alarm : float
        Probability that one sample of white noise counts as departed.

    Returns
    -------
    int or None
        A sample counts when it and the next two exceed the limit.
    """
    k = len(currents)
    part = slice(first, stop)
    deviation = currents[:, part] - prefault.predict(times_s[part])[:k]
    spread = prefault.noise_rms[:k] ** 2 + prefault.prediction_std(float(times_s[stop - 1]))[:k] ** 2
    statistic = np.sum(deviation**2 / spread[:, None], axis=0)
    beyond = statistic > chi2.isf(false_alarm, k)
    lasting = beyond[:-2] & beyond[1:-1] & beyond[2:]
    found = np.flatnonzero(lasting)
    return int(found[0]) + first if found.size else None
