"""A terminal's signals on common sample times: skew taken off, missing samples bridged, channels summed."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from analyzer.records import Record
from analyzer.terminals import Terminal
from analyzer.waveform.stretches import Stretch, part_of

_NEGLIGIBLE_SKEW = 1e-3  # of a sampling interval


def aligned_signals(
    record: Record, terminal: Terminal, stretch: Stretch
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64] | None]:
    """Return sample times, phase currents and phase voltages of a stretch.

    Returns
    -------
    times_s : ndarray of float64, shape (n,)
        [s]
    currents : ndarray of float64, shape (3, n)
        [A]
    voltages : ndarray of float64, shape (3, n), or None
        [V]; None where the terminal has none.

    Notes
    -----
    A channel with skew is moved to the common times by a cubic spline. Missing samples are bridged by a
    straight line; where more than a tenth of a channel is missing it reads as zero.
    """
    part = part_of(record, stretch)
    times_s = part.times()
    signals = terminal.signals
    keys = list(dict.fromkeys(key for parts in signals for key, _ in parts))
    values = np.array(part.signals(keys))
    for k, key in enumerate(keys):
        _bridge(values[k])
        skew_s = record.channel(key).skew_s
        if abs(skew_s) * stretch.rate_hz > _NEGLIGIBLE_SKEW:
            values[k] = CubicSpline(times_s + skew_s, values[k])(times_s)
    by_key = dict(zip(keys, values, strict=True))
    formed = np.array([sum(factor * by_key[key] for key, factor in parts) for parts in signals])
    return times_s, formed[:3], formed[3:] if len(formed) > 3 else None


def _bridge(values: NDArray[np.float64]) -> None:
    present = np.isfinite(values)
    if present.all():
        return
    if present.sum() < 0.9 * values.size:
        values[:] = 0.0
        return
    every = np.arange(values.size)
    values[~present] = np.interp(every[~present], every[present], values[present])
