"""Time stamps in the data: unwrapped, mended, and held against the sampling rates."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from analyzer.records.problems import Problem, RecordError
from analyzer.records.timebase import TimeBase

STAMP_MISSING = 0xFFFFFFFF
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
    ticks, n_wraps = _unwrap(stamps[present])
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
    return TimeBase.from_stamps(ticks * unit_s), tuple(problems)


def compare_with_rates(
    stamps_s: NDArray[np.float64], timebase: TimeBase, *, shown: str
) -> tuple[Problem, ...]:
    """Return where stamps contradict the sampling rates, which go before them.

    Parameters
    ----------
    stamps_s : ndarray of float64, shape (n,)
        Stamps in seconds as stored, NaN where missing.
    timebase : TimeBase
        Times by the rates.
    shown : str
        Name of the data file for messages.

    Returns
    -------
    tuple of Problem
    """
    present = np.isfinite(stamps_s)
    if present.sum() < 2:
        return ()
    steps_s = np.diff(stamps_s)
    rate_steps_s = np.diff(timebase.times())
    usual_s = float(np.median(rate_steps_s))
    if np.nanmax(stamps_s) == np.nanmin(stamps_s):
        return (_note("stamps-constant", "all time stamps are equal; the sampling rate is used", shown),)
    forward = steps_s > 0
    n_back = int(np.sum(steps_s < 0))
    problems = []
    if n_back:
        problems.append(
            _note("stamps-wrap", f"time stamps run back {n_back} times; the sampling rate is used", shown)
        )
    # A recorder that stops between two stretches shows it in its stamps only.
    jumps = np.flatnonzero(forward & (steps_s - rate_steps_s > 3.0 * usual_s + 0.001))
    if jumps.size and jumps.size <= 20:
        where = ", ".join(f"{timebase.times(k, k + 1)[0]:.4f} s ({steps_s[k]:.4f} s)" for k in jumps[:4])
        problems.append(
            Problem(
                code="stamps-jump",
                severity="warning",
                message="time stamps leave a gap that the sampling rates do not tell, after "
                f"{where}{' …' if jumps.size > 4 else ''}; times follow the rates",
                where=shown,
            )
        )
    elif forward.any():
        ratio = float(np.median(steps_s[forward])) / usual_s
        if not 0.98 < ratio < 1.02 and abs(ratio - 1.0) * usual_s > 1.5e-6:
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
    steps = np.diff(ticks)
    back = steps < 0
    if not back.any():
        return ticks, 0
    usual = float(np.median(steps[~back])) if (~back).any() else 0.0
    for modulus in _WRAPS:
        if ticks.max() < modulus and np.all(np.abs(steps[back] + modulus - usual) <= usual + 2.0):
            laps = np.concatenate(([0.0], np.cumsum(back)))
            return ticks + laps * modulus, int(back.sum())
    return ticks, 0


def _mend_order(ticks: NDArray[np.float64]) -> tuple[NDArray[np.float64], int]:
    steps = np.diff(ticks)
    wrong = steps <= 0
    if not wrong.any():
        return ticks, 0
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
