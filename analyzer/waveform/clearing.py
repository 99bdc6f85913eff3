"""When each pole interrupts: the current falls to nothing, or back to load, and stays there."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

_SHARE_OF_PEAK = 0.15
_OVER_LOAD = 1.4
_LASTING_CYCLES = 0.75
_NOTHING_SIGMAS = 6.0
_NOTHING_SHARE = 0.01  # of the peak: a transformer's slow release of flux, a converter's steps


@dataclass(frozen=True, slots=True, kw_only=True)
class Interruption:
    """The end of a phase's fault current.

    Attributes
    ----------
    sample : int
        First sample after it.
    time_s, std_s : float
        The current's zero, or the middle of the interval before `sample` where the current does not go to
        nothing; standard uncertainty. [s]
    """

    sample: int
    time_s: float
    std_s: float


def interruption(
    times_s: NDArray[np.float64],
    current: NDArray[np.float64],
    *,
    inception: int,
    frequency_hz: float,
    load_peak_a: float,
    noise_rms_a: float,
) -> Interruption | None:
    """Return the interruption of a faulted phase's current.

    Parameters
    ----------
    times_s : ndarray of float64, shape (n,)
        [s]
    current : ndarray of float64, shape (n,)
        The phase's current, the converter's zero taken off. [A]
    inception : int
        Sample of inception.
    frequency_hz : float
        [Hz]
    load_peak_a : float
        Peak of the load current before the fault. [A]
    noise_rms_a : float
        Noise before the fault. [A]

    Returns
    -------
    Interruption or None
        Where at least three quarters of a cycle below 15 % of the fault's peak, or near the load current
        before, begin; None when the current flows to the end.
    """
    rate_hz = (len(times_s) - 1) / float(times_s[-1] - times_s[0])
    cycle = rate_hz / frequency_hz
    lasting = max(3, round(_LASTING_CYCLES * cycle))
    after = np.abs(current[inception:])
    if len(after) < lasting + 1:
        return None
    peak = float(after[: round(2 * cycle)].max())
    limit = max(_SHARE_OF_PEAK * peak, min(_OVER_LOAD * load_peak_a, 0.5 * peak))
    above = np.flatnonzero(after > limit)
    if not above.size:
        return None
    # Gaps between samples above the limit, the stretch after the last of them included.
    gaps = np.diff(np.append(above, len(after)))
    long_gaps = np.flatnonzero(gaps > lasting)
    if not long_gaps.size:
        return None
    coarse = inception + int(above[long_gaps[0]]) + 1
    if coarse >= len(times_s):
        return None
    nothing = max(_NOTHING_SIGMAS * noise_rms_a, _NOTHING_SHARE * peak)
    return _at_zero(times_s, current, coarse, nothing, cycle) or _between(times_s, coarse)


def _at_zero(
    times_s: NDArray[np.float64],
    current: NDArray[np.float64],
    coarse: int,
    nothing_a: float,
    cycle: float,
) -> Interruption | None:
    """The current's last way to zero, drawn out from the two samples before it stays at nothing."""
    stop = min(coarse + max(2, round(0.25 * cycle)), len(times_s))
    flowing = np.flatnonzero(np.abs(current[coarse - 1 : stop]) > nothing_a)
    sample = coarse + int(flowing[-1]) if flowing.size else coarse
    rest = np.abs(current[sample : sample + max(3, round(0.25 * cycle))])
    if sample < 2 or sample >= len(times_s) or rest.max() > nothing_a:
        return None
    before, last = float(current[sample - 2]), float(current[sample - 1])
    step_s = float(times_s[sample] - times_s[sample - 1])
    fall = before - last
    way = last / fall if fall != 0.0 and last / fall > 0 else 0.5
    return Interruption(
        sample=sample,
        time_s=float(times_s[sample - 1]) + min(way, 1.0) * step_s,
        std_s=step_s / math.sqrt(12.0),
    )


def _between(times_s: NDArray[np.float64], sample: int) -> Interruption:
    step_s = float(times_s[sample] - times_s[sample - 1])
    return Interruption(
        sample=sample, time_s=float(times_s[sample]) - step_s / 2, std_s=step_s / math.sqrt(12.0)
    )
