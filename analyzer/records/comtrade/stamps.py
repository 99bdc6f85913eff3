"""Time stamps in the data: unwrapped, mended, and held against the sampling rates."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from analyzer.records.problems import Problem, RecordError
from analyzer.records.timebase import TimeBase

STAMP_MISSING = 0xFFFFFFFF
_BLOCK_SAMPLES = 1 << 20
_MOST_JUMPS = 20  # more are another rate and no gaps
_SHOWN_JUMPS = 4
_STAMP_LIMIT = 1e15
_WRAPS = (65_536.0, 4_294_967_296.0)  # recorders count in 16 or 32 bits


def times_from_stamps(
    stamps: NDArray[np.float64], *, unit_s: float, shown: str
) -> tuple[TimeBase, tuple[Problem, ...]]:
    """Return the time base of stamps that alone tell the time.

    Parameters
    ----------
    stamps : ndarray of float64, shape (n,)
        As stored, NaN where missing.
    unit_s : float
        Their unit. [s]
    shown : str
        Name of the data file for messages.

    Returns
    -------
    timebase : TimeBase
    problems : tuple of Problem
        What was mended.

    Raises
    ------
    RecordError
        If the stamps tell no time (code ``no-time``).
    """
    problems: list[Problem] = []
    present = np.isfinite(stamps)
    n_missing = int(stamps.size - present.sum())
    if stamps.size > 1 and present.sum() < 2:
        raise RecordError(
            "no-time",
            "neither a sampling rate nor time stamps are given",
            path=shown,
            hint="state the sampling rate in the configuration file",
        )
    ticks, n_wraps = _unwrap(stamps[present] if n_missing else stamps)
    ticks = ticks - ticks[:1]
    if ticks.size > 1 and not np.any(ticks[1:] > ticks[:-1]):
        raise RecordError(
            "no-time",
            "no sampling rate is given and the time stamps do not rise",
            path=shown,
            hint="state the sampling rate in the configuration file",
        )
    if n_wraps:
        problems.append(_note("stamps-wrap", f"time stamps start again {n_wraps} times; unwrapped", shown))
    ticks, n_backward = _mend_order(ticks)
    if n_backward:
        problems.append(
            Problem(
                code="stamps-backward",
                severity="warning",
                message=f"time stamps do not rise at {n_backward} samples; set to the usual interval there",
                where=shown,
            )
        )
    if n_missing:
        problems.append(
            Problem(
                code="stamps-missing",
                severity="warning",
                message=f"{n_missing} time stamps are missing; placed evenly between the others",
                where=shown,
            )
        )
        ticks = _fill(ticks, np.flatnonzero(present), stamps.size)
    ticks *= unit_s
    return TimeBase.from_stamps(ticks), tuple(problems)


def present_stamps(stored: NDArray[Any]) -> NDArray[np.float64]:
    """Return stamps as numbers, NaN for the code of a missing one and for what no clock shows."""
    stamps: NDArray[np.float64] = stored.astype(np.float64)
    for first in range(0, len(stamps), _BLOCK_SAMPLES):
        block = stamps[first : first + _BLOCK_SAMPLES]
        block[(block == STAMP_MISSING) | ~(np.abs(block) < _STAMP_LIMIT)] = np.nan
    return stamps


def check_numbers(
    numbers: NDArray[Any], *, shown: str, done: Callable[[int, int], None] | None = None
) -> tuple[Problem, ...]:
    """Return whether sample numbers do not count on by one; times follow the order anyway.

    Parameters
    ----------
    numbers : ndarray, shape (n,)
    shown : str
        Name of the data file for messages.
    done : callable, optional
        ``done(first, stop)`` is called when these have been looked at.
    """
    n_odd = 0
    for first in range(0, len(numbers), _BLOCK_SAMPLES):
        block = numbers[first : first + _BLOCK_SAMPLES + 1].astype(np.float64)
        steps = np.diff(block[np.isfinite(block)])
        n_odd += int(np.sum(steps != 1))
        if done is not None:
            done(first, min(first + _BLOCK_SAMPLES, len(numbers)))
    if not n_odd:
        return ()
    return (
        Problem(
            code="numbers-jump",
            severity="warning",
            message=f"sample numbers do not follow each other at {n_odd} samples; times follow the order",
            where=shown,
        ),
    )


def own_step_first(
    stamps: NDArray[Any], rates_hz: Sequence[float], stops: Sequence[int], *, unit_s: float
) -> frozenset[int]:
    """Return the first samples of stretches whose stamps show the step of their own rate before them.

    Parameters
    ----------
    stamps : ndarray, shape (n,)
        As stored; only those beside a change of rate are looked at.
    rates_hz, stops
        As in :meth:`analyzer.records.timebase.TimeBase.from_rates`.
    unit_s : float
        Unit of the stamps. [s]
    """
    found = set()
    for earlier_hz, own_hz, first in zip(rates_hz, rates_hz[1:], stops, strict=False):
        if 0 < first < len(stamps):
            step_s = (float(stamps[first]) - float(stamps[first - 1])) * unit_s
            is_own, is_earlier = (
                abs(step_s - 1.0 / rate_hz) <= 0.02 / rate_hz + 1.5e-6 for rate_hz in (own_hz, earlier_hz)
            )
            if is_own and not is_earlier:
                found.add(first)
    return frozenset(found)


def compare_with_rates(
    stamps_s: Callable[[int, int], NDArray[np.float64]], timebase: TimeBase, *, shown: str
) -> tuple[Problem, ...]:
    """Return where stamps contradict the sampling rates, which go before them.

    Parameters
    ----------
    stamps_s : callable
        ``stamps_s(first, stop)`` returns stamps in seconds as stored, NaN where missing.
    timebase : TimeBase
        Times by the rates.
    shown : str
        Name of the data file for messages.

    Returns
    -------
    tuple of Problem
    """
    low, high, n_present, n_back, n_jumps = np.inf, -np.inf, 0, 0, 0
    jumps: list[tuple[float, float]] = []
    usual_s = ratio = np.nan
    for first in range(0, timebase.n_samples, _BLOCK_SAMPLES):
        stop = min(first + _BLOCK_SAMPLES + 1, timebase.n_samples)  # one step into the next block
        block_s, times_s = stamps_s(first, stop), timebase.times(first, stop)
        n_present += int(np.isfinite(block_s).sum())
        low, high = np.fmin(low, np.fmin.reduce(block_s)), np.fmax(high, np.fmax.reduce(block_s))
        steps_s, rate_steps_s = np.diff(block_s), np.diff(times_s)
        forward = steps_s > 0
        n_back += int(np.sum(steps_s < 0))
        if np.isnan(usual_s) and forward.any():
            usual_s = float(np.median(rate_steps_s))
            ratio = float(np.median(steps_s[forward])) / usual_s
        # A recorder that stops between two stretches shows it in its stamps only.
        at = np.flatnonzero(forward & (steps_s - rate_steps_s > 3.0 * usual_s + 0.001))
        n_jumps += at.size
        jumps += [(float(times_s[k]), float(steps_s[k])) for k in at[: _SHOWN_JUMPS - len(jumps)]]
    if n_present < 2:
        return ()
    if low == high:
        return (_note("stamps-constant", "all time stamps are equal; the sampling rate is used", shown),)
    problems = []
    if n_back:
        problems.append(
            _note("stamps-wrap", f"time stamps run back {n_back} times; the sampling rate is used", shown)
        )
    if 0 < n_jumps <= _MOST_JUMPS:
        where = ", ".join(f"{time_s:.4f} s ({step_s:.4f} s)" for time_s, step_s in jumps)
        problems.append(
            Problem(
                code="stamps-jump",
                severity="warning",
                message="time stamps leave a gap that the sampling rates do not tell, after "
                f"{where}{' …' if n_jumps > len(jumps) else ''}; times follow the rates",
                where=shown,
            )
        )
    elif not 0.98 < ratio < 1.02 and abs(ratio - 1.0) * usual_s > 1.5e-6:
        problems.append(
            Problem(
                code="stamps-disagree",
                severity="warning",
                message=f"time stamps step {ratio:.4g} times the sampling interval; the rate is used",
                where=shown,
            )
        )
    return tuple(problems)


def _unwrap(ticks: NDArray[np.float64]) -> tuple[NDArray[np.float64], int]:
    back = ticks[1:] < ticks[:-1]
    if not back.any():  # as in nearly every record, and steps would take as much memory as times
        return ticks, 0
    steps = np.diff(ticks)
    usual = float(np.median(steps[~back])) if (~back).any() else 0.0
    for modulus in _WRAPS:
        small = 3.0 * usual < modulus  # else any step back could be called a wrap
        if small and ticks.max() < modulus and np.all(np.abs(steps[back] + modulus - usual) <= usual + 2.0):
            laps = np.concatenate(([0.0], np.cumsum(back)))
            return ticks + laps * modulus, int(back.sum())
    return ticks, 0


def _mend_order(ticks: NDArray[np.float64]) -> tuple[NDArray[np.float64], int]:
    wrong = ticks[1:] <= ticks[:-1]
    if not wrong.any():
        return ticks, 0
    steps = np.diff(ticks)
    usual = float(np.median(steps[~wrong])) if (~wrong).any() else 1.0
    mended = np.where(wrong, usual, steps)
    return np.concatenate((ticks[:1], ticks[0] + np.cumsum(mended))), int(wrong.sum())


def _fill(ticks: NDArray[np.float64], at: NDArray[np.intp], n: int) -> NDArray[np.float64]:
    every = np.arange(n)
    filled = np.interp(every, at, ticks)
    step = float(np.median(np.diff(ticks) / np.diff(at)))
    filled[: at[0]] = ticks[0] + step * (every[: at[0]] - at[0])
    filled[at[-1] + 1 :] = ticks[-1] + step * (every[at[-1] + 1 :] - at[-1])
    return filled


def _note(code: str, message: str, shown: str) -> Problem:
    return Problem(code=code, message=message, where=shown)
