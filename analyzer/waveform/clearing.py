"""When each pole interrupts: the current falls to nothing, or back to load, and stays there."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

_SHARE_OF_PEAK = 0.15
_OVER_LOAD = 1.4
_LASTING_CYCLES = 0.75


def interruption(
    times_s: NDArray[np.float64],
    current: NDArray[np.float64],
    *,
    inception: int,
    frequency_hz: float,
    load_peak_a: float,
) -> int | None:
    """Return the first sample after a faulted phase's current has been interrupted.

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

    Returns
    -------
    int or None
        The first sample of at least three quarters of a cycle below 15 % of the fault's peak, or near the
        load current before; None when the current flows to the end.
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
    last = int(above[long_gaps[0]])
    return inception + last + 1 if inception + last + 1 < len(times_s) else None
