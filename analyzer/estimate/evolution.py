"""Whether a fault becomes another one while it lasts: a second jump inside the fit's window.

One decaying offset and a steady sinusoid that fit the first cycles foretell the rest. Where the currents
leave that all at once, and settle at another such state, the fault has changed; where they drift away (a
machine's decrement) or were none such before or after (a saturated transformer, inrush), it has not.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from analyzer.estimate.rlfit import LoopFit, fit_loop
from analyzer.theory.modes import CLARKE, FaultType, loops_of
from analyzer.waveform.events import Event

# Clarke components with the zero one brought to the length, and so to the noise, of the others.
_COMPONENTS = CLARKE * np.array([[1.0], [1.0], [np.sqrt(2.0)]])
_FIRST_CYCLES = 1.75  # enough for a fit to foretell from, a decaying sinusoid included
_STEP_CYCLES = 0.5
_STRUCTURE_SHARE = 0.02  # of the symmetrical peak: what one sound RL fit leaves is less
_STRUCTURE_CHI = 3.0
_JUMP_SHARE = 0.08
_JUMP_SIGMAS = 8.0
_SIZE_SHARE = 0.2  # of the amplitude, within half a cycle of the jump: a smaller one is no other fault
_JUMP_RATIO = 2.0  # of the change from cycle to cycle, half a cycle after over half a cycle before
_SOUND_SHARE = 0.03  # of the amplitude: what an RL state leaves of a fit of its own, before and after


def change_within(
    event: Event, fault_type: FaultType, window: slice, fits: tuple[LoopFit, ...]
) -> int | None:
    """Return the first sample of another fault within the window, None where there is none.

    Parameters
    ----------
    event : Event
    fault_type : str
    window : slice
        Samples of the fit.
    fits : tuple of LoopFit
        The loops' fits of the whole window: where they leave nothing to speak of there is no need to look.

    Notes
    -----
    Looked for in all three phases, since the change may bring in another one. Only a change at least one and
    three quarter cycles after inception, and three quarters of a cycle before the window's end, can be told.
    """
    cycle = 1.0 / (event.prefault.frequency_hz * event.sample_interval_s)
    length = window.stop - window.start
    first = round(_FIRST_CYCLES * cycle)
    if length < first + round(0.75 * cycle):
        return None
    currents = _COMPONENTS @ event.currents_a
    begun = slice(window.start, window.start + first)
    states = (_fit(event, currents[k : k + 1], begun) for k in range(3))
    amplitude = max(float(np.hypot(*state.coefficients[:2, 0])) for state in states)
    if not any(_has_structure(fit) for fit in fits) and _idle_is_steady(event, fault_type, window, amplitude):
        return None
    noise = np.sqrt(_COMPONENTS**2 @ event.prefault.noise_rms[:3] ** 2)
    limit = np.maximum(_JUMP_SIGMAS * noise, _JUMP_SHARE * amplitude)
    stop = window.start + first
    while stop < window.stop - round(0.5 * cycle):
        ahead = slice(stop, min(stop + round(_STEP_CYCLES * cycle), window.stop))
        deviation = np.abs(currents[:, ahead] - _foretold(event, currents, slice(window.start, stop), ahead))
        leaves = np.any(deviation > limit[:, None], axis=0)
        if leaves.sum() >= 0.25 * leaves.size:
            return _abrupt_change(event, currents, window, stop, limit, _SIZE_SHARE * amplitude, cycle)
        stop = ahead.stop
    return None


def _has_structure(fit: LoopFit) -> bool:
    amplitude = np.hypot(fit.coefficients[0], fit.coefficients[1])
    share = np.sqrt(np.sum(fit.residual_rms**2) / np.sum(amplitude**2))
    return bool(share > _STRUCTURE_SHARE and fit.reduced_chi_square > _STRUCTURE_CHI**2)


def _idle_is_steady(event: Event, fault_type: FaultType, window: slice, amplitude: float) -> bool:
    """Whether what the loops do not see stays small: a phase, or ground, that joins later shows there."""
    weights = np.array([row for loop in loops_of(fault_type) for row in loop.weights])
    _, sizes, directions = np.linalg.svd(weights)
    idle = directions[int(np.sum(sizes > 1e-9)) :]
    change = event.currents_a[:, window] - event.prefault.fundamental(event.times_s[window])[:3]
    unseen = idle @ change
    if not unseen.size:
        return True
    half = unseen.shape[1] // 2
    early, late = (float(np.sqrt(np.mean(part**2))) for part in (unseen[:, :half], unseen[:, half:]))
    return late < early + 0.05 * amplitude


def _foretold(event: Event, currents: NDArray[np.float64], known: slice, ahead: slice) -> NDArray[np.float64]:
    """The three components, each foretold by its own fit of the samples before."""
    fits = (_fit(event, currents[k : k + 1], known) for k in range(3))
    return np.vstack([fit.current(event.times_s[ahead]) for fit in fits])


def _abrupt_change(
    event: Event,
    currents: NDArray[np.float64],
    window: slice,
    known_stop: int,
    limit: NDArray[np.float64],
    least_jump_a: float,
    cycle: float,
) -> int | None:
    # The change may lie just before the end of what was taken as known: foretell from half a cycle earlier.
    known_stop = max(known_stop - round(0.5 * cycle), window.start + round(0.9 * cycle))
    ahead = slice(known_stop, min(known_stop + round(2.25 * cycle), window.stop))
    deviation = np.abs(
        currents[:, ahead] - _foretold(event, currents, slice(window.start, known_stop), ahead)
    )
    over = np.any(deviation > limit[:, None], axis=0)
    quarter = max(2, round(0.25 * cycle))
    found = _lasting(over, cycle)
    if not found.size or found[0] + round(0.75 * cycle) > over.size:
        return None
    start = int(found[0])
    largest = deviation[:, start : start + 2 * quarter].max(axis=1)
    if largest.max() < least_jump_a:
        return None
    changed = known_stop + start
    if not _jumps(event, currents[int(np.argmax(largest))], changed, cycle):
        return None
    changed = _sharpened(event, currents, window, changed, 0.2 * limit, cycle)
    edge = max(3, round(cycle / 32))
    end = min(changed + round(1.5 * cycle), window.stop)
    sound = _is_sound(event, currents, slice(window.start, changed - edge)) and _is_sound(
        event, currents, slice(changed + edge, end)
    )
    return changed if sound else None


def _sharpened(
    event: Event,
    currents: NDArray[np.float64],
    window: slice,
    changed: int,
    limit: NDArray[np.float64],
    cycle: float,
) -> int:
    """Return where the currents begin to leave what all samples up to shortly before foretell."""
    known = slice(window.start, changed - round(0.6 * cycle))
    ahead = slice(known.stop, min(changed + round(0.25 * cycle), window.stop))
    deviation = np.abs(currents[:, ahead] - _foretold(event, currents, known, ahead))
    over = np.any(deviation > limit[:, None], axis=0)
    found = _lasting(over, cycle)
    return known.stop + int(found[0]) if found.size else changed


def _lasting(over: NDArray[np.bool_], cycle: float) -> NDArray[np.intp]:
    """Samples that are over a limit and stay so for half of the following quarter cycle."""
    quarter = max(2, round(0.25 * cycle))
    counts = np.convolve(over, np.ones(quarter), mode="full")[quarter - 1 :]
    return np.flatnonzero(over & (counts >= 0.5 * quarter))


def _jumps(event: Event, current: NDArray[np.float64], changed: int, cycle: float) -> bool:
    """Whether the change from one cycle to the next jumps there: a drift makes much the same in every one."""
    half = round(0.5 * cycle)
    part = slice(changed - half, changed + half)
    period_s = 1.0 / event.prefault.frequency_hz
    context = slice(max(part.start - round(1.1 * cycle) - 4, 0), part.stop + 4)
    times_s = event.times_s[context]
    change = current[part] - CubicSpline(times_s, current[context])(event.times_s[part] - period_s)
    before, after = (float(np.sqrt(np.mean(side**2))) for side in (change[:half], change[half:]))
    return after > _JUMP_RATIO * before


def _is_sound(event: Event, currents: NDArray[np.float64], part: slice) -> bool:
    """Whether a sinusoid and an exponential for each of the three components leave little."""
    left, amplitude = 0.0, 0.0
    for k in range(3):
        fit = _fit(event, currents[k : k + 1], part)
        left += float(fit.residual_rms[0] ** 2)
        amplitude += float(fit.coefficients[0, 0] ** 2 + fit.coefficients[1, 0] ** 2)
    return left < _SOUND_SHARE**2 * amplitude


def _fit(event: Event, current: NDArray[np.float64], part: slice) -> LoopFit:
    return fit_loop(
        event.times_s[part],
        current[:, part],
        omega_rad_per_s=event.prefault.omega_rad_per_s,
        omega_std_rad_per_s=0.0,
        noise_rms=np.ones(1),
        t_ref_s=float(event.times_s[part.start]),
    )
