"""The instant of inception to a fraction of a sample: where the models before and after meet.

The current through an inductance does not jump, so the two agree at inception; the instant is where they
agree best in view of both models' uncertainty, and its interval is where the agreement is not significantly
worse. That holds at a voltage zero too, where the two only touch.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq, minimize_scalar

from analyzer.estimate.rlfit import LoopFit
from analyzer.waveform.prefault import Prefault

_MAX_MINIMA = 6
# A load beyond the fault adds a short exponential of its own, a tenth of the load current in simulations; the
# gap between the models is uncertain by as much.
_LOAD_TRANSIENT = 0.1
_NORMAL_95 = 1.959963984540054
_BRIDGE_GAIN = 16.0  # chi-square that two more parameters must gain to be believed
_BRIDGE_RATES = 14
_BRIDGE_SAMPLES = 6
_NO_MEETING = 400.0  # chi-square, twenty standard uncertainties: the models do not meet
_CHI2_95 = 3.841458820694124  # chi-square, one degree of freedom, 0.95 quantile


@dataclass(frozen=True, slots=True, kw_only=True)
class Meeting:
    """The instant at which prefault and fault models meet.

    Attributes
    ----------
    time_s, std_s, low_s, high_s : float
        Estimate, standard uncertainty and 95 % limits by likelihood. [s]
    mismatch : float
        Chi-square of the disagreement that is left at `time_s`.
    freedom : int
        Its degrees of freedom: the currents compared, less one for the instant.
    bridged : bool
        Whether a short transient of its own stands between the models, which then need not meet.
    """

    time_s: float
    std_s: float
    low_s: float
    high_s: float
    mismatch: float
    freedom: int
    bridged: bool = False


def meeting(
    prefault: Prefault,
    rows: NDArray[np.float64],
    fit: LoopFit,
    *,
    times_s: NDArray[np.float64],
    currents: NDArray[np.float64],
    earliest_s: float,
    latest_s: float,
) -> Meeting | None:
    """Return where the prefault sinusoids and a loop's fitted currents meet.

    Parameters
    ----------
    prefault : Prefault
        Its first three channels are the phase currents.
    rows : ndarray of float64, shape (k, 3)
        Weights that take phase currents to the loop's.
    fit : LoopFit
        The loop's fit.
    times_s : ndarray of float64, shape (n,)
        Samples about the inception, from `earliest_s` to a little after. [s]
    currents : ndarray of float64, shape (k, n)
        The loop's currents there, the converter's zero taken off. [A]
    earliest_s, latest_s : float
        Where to look. [s]

    Returns
    -------
    Meeting or None
        None when the models do not come near each other there.
    """

    load_peak = np.abs(rows @ np.array([prefault.phasor(k).value for k in range(3)])) * np.sqrt(2.0)
    unmodelled = np.diag((_LOAD_TRANSIENT * load_peak) ** 2)
    nothing = np.zeros_like(unmodelled)

    def mismatch(time_s: float, allowance: NDArray[np.float64]) -> float:
        at = np.array([time_s])
        gap = fit.current(at)[:, 0] - rows @ prefault.fundamental(at)[:3, 0]
        before = rows @ np.diag(prefault.prediction_std(time_s)[:3] ** 2) @ rows.T
        gradient = fit.current_gradient(time_s)
        spread = before + gradient @ fit.covariance @ gradient.T + allowance
        return float(gap @ np.linalg.pinv(spread, hermitian=True) @ gap)

    # What each sample says: it lies on the one model before the instant, on the other after.
    noise = np.maximum(fit.noise_rms, np.sqrt(rows**2 @ prefault.noise_rms[:3] ** 2))[:, None]
    before_misfit = np.sum(((currents - rows @ prefault.fundamental(times_s)[:3]) / noise) ** 2, axis=0)
    after_misfit = np.sum(((currents - fit.current(times_s)) / noise) ** 2, axis=0)

    def samples_against(time_s: float) -> float:
        return float(np.where(times_s < time_s, before_misfit, after_misfit).sum())

    def against(time_s: float) -> float:
        return mismatch(time_s, nothing) + samples_against(time_s)

    def allowing(time_s: float) -> float:
        return mismatch(time_s, unmodelled) + samples_against(time_s)

    grid = np.linspace(earliest_s, latest_s, 121)
    values = np.array([against(float(t)) for t in grid])
    candidates = sorted(_polished(against, grid, values, k) for k in _lowest_minima(values))
    _, time_s = candidates[0]
    least = mismatch(time_s, nothing)
    freedom = len(rows) - 1
    bridged = _bridged(prefault, rows, fit, times_s, currents, grid, time_s, least)
    if bridged is not None:
        return bridged
    if least > _NO_MEETING * max(freedom, 1):
        return None
    excess = max(1.0, mismatch(time_s, unmodelled) / max(freedom, 1))
    level = allowing(time_s) + _CHI2_95 * excess
    # Near a voltage zero the models cross twice; an interval that holds spans every crossing that may be it.
    likely = [time for _, time in candidates if allowing(time) <= level]
    low_s = _limit(allowing, level, min(likely), earliest_s)
    high_s = _limit(allowing, level, max(likely), latest_s)
    return Meeting(
        time_s=time_s,
        std_s=(high_s - low_s) / (2 * _NORMAL_95),
        low_s=low_s,
        high_s=high_s,
        mismatch=least,
        freedom=freedom,
    )


def _bridged(
    prefault: Prefault,
    rows: NDArray[np.float64],
    fit: LoopFit,
    times_s: NDArray[np.float64],
    currents: NDArray[np.float64],
    grid: NDArray[np.float64],
    met_s: float,
    mismatch: float,
) -> Meeting | None:
    """Return the meeting over a short transient, where the samples between the models tell of one."""
    if len(times_s) < _BRIDGE_SAMPLES:
        return None
    sigma = np.sqrt(rows**2 @ prefault.noise_rms[:3] ** 2)
    bridge = _Bridge(prefault, rows, fit, times_s, currents, sigma)
    without = mismatch + float(bridge.misfit(np.array([met_s]), np.array([np.inf]))[0, 0])
    misfit, meeting = bridge.best(grid)
    return meeting if without - misfit > _BRIDGE_GAIN else None


@dataclass(frozen=True, slots=True, eq=False)
class _Bridge:
    """A transient of its own between the models: it begins as their gap, so that the current goes on.

    A load beside the fault adds an exponential of a millisecond or less, mostly gone before the fit begins.
    Its size is the gap at the instant, by continuity; its rate and the instant follow from the samples.
    """

    prefault: Prefault
    rows: NDArray[np.float64]
    fit: LoopFit
    times_s: NDArray[np.float64]
    currents: NDArray[np.float64]
    sigma: NDArray[np.float64]

    def misfit(self, instants_s: NDArray[np.float64], rates: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the chi-square of the samples, shape (len(instants_s), len(rates))."""
        gaps = self.fit.current(instants_s) - self.rows @ self.prefault.fundamental(instants_s)[:3]
        before = (self.currents - self.rows @ self.prefault.fundamental(self.times_s)[:3]) / self.sigma[
            :, None
        ]
        after = (self.currents - self.fit.current(self.times_s)) / self.sigma[:, None]
        since = self.times_s - instants_s[:, None]  # (instants, samples)
        is_after = since >= 0
        with np.errstate(invalid="ignore"):
            fade = np.exp(-rates[None, :, None] * np.where(is_after, since, 0.0)[:, None, :])
        fade = np.where(np.isinf(rates)[None, :, None], 0.0, fade)
        filled = gaps.T[:, None, :, None] / self.sigma[:, None] * fade[:, :, None, :]
        left = np.where(is_after[:, None, None, :], after + filled, before)
        return np.asarray(np.sum(left**2, axis=(2, 3)))

    def best(self, grid: NDArray[np.float64]) -> tuple[float, Meeting]:
        """Return the least chi-square over all rates, and the instant with where it is not much worse."""
        step_s = float(np.median(np.diff(self.times_s)))
        period_s = 2.0 * np.pi / self.fit.omega_rad_per_s
        rates = 1.0 / np.geomspace(0.3 * step_s, max(0.08 * period_s, 2.0 * step_s), _BRIDGE_RATES)
        coarse = self.misfit(grid, rates).min(axis=1)
        near = grid[int(np.argmin(coarse))]
        width_s = 2.0 * float(grid[1] - grid[0])
        fine = np.linspace(near - width_s, near + width_s, 81)
        values = self.misfit(fine, rates).min(axis=1)
        least = float(values.min())
        level = least + _CHI2_95 * max(1.0, least / max(self.currents.size - 3, 1))
        all_s, all_values = np.concatenate((grid, fine)), np.concatenate((coarse, values))
        likely = all_s[all_values <= level]
        half_step_s = float(fine[1] - fine[0]) / 2
        low_s, high_s = float(likely.min()) - half_step_s, float(likely.max()) + half_step_s
        return least, Meeting(
            time_s=float(fine[int(np.argmin(values))]),
            std_s=(high_s - low_s) / (2 * _NORMAL_95),
            low_s=low_s,
            high_s=high_s,
            mismatch=0.0,
            freedom=0,
            bridged=True,
        )


def _lowest_minima(values: NDArray[np.float64]) -> list[int]:
    """Return the grid points of the lowest local minima, ends included."""
    padded = np.concatenate(([np.inf], values, [np.inf]))
    local = np.flatnonzero((values <= padded[:-2]) & (values <= padded[2:]))
    lowest = local[np.argsort(values[local])]
    return [int(k) for k in lowest[:_MAX_MINIMA]]


def _polished(
    against: Callable[[float], float], grid: NDArray[np.float64], values: NDArray[np.float64], k: int
) -> tuple[float, float]:
    """Return the least value near a grid point, and where it is."""
    bounds = (grid[max(k - 1, 0)], grid[min(k + 1, len(grid) - 1)])
    found = minimize_scalar(against, bounds=bounds, method="bounded", options={"xatol": 1e-10})
    return min((float(found.fun), float(found.x)), (float(values[k]), float(grid[k])))


def _limit(mismatch: Callable[[float], float], level: float, start: float, end: float) -> float:
    steps = np.geomspace(1e-9, abs(end - start), 40) if end != start else np.array([0.0])
    inner = start
    for step in np.copysign(steps, end - start):
        outer = start + float(step)
        if mismatch(outer) > level:
            return float(brentq(lambda t: mismatch(t) - level, inner, outer, xtol=1e-11))
        inner = outer
    return end
