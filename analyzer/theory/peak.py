r"""The largest instantaneous current of a fault, exactly.

Completeness is what matters here: with load current, a reverse offset or two exponentials the largest value
need not be at the first crest, nor near any crest. The search below proves that nothing larger was left out.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.optimize import brentq

from analyzer.theory.closed_form import (
    TheoryError,
    check_omega,
    exponential_terms,
    rl_current,
    rl_current_gradient,
)

# Values closer than this (relative; some rounding errors wide) count as equal, and the earlier one is kept.
TIE = 1e-14


@dataclass(frozen=True, slots=True, kw_only=True)
class CurrentPeak:
    """The largest instantaneous current of a model within a window.

    Attributes
    ----------
    value_a : float
        The current there, with its sign. [A]
    time_s : float
        Time after inception; of equal peaks the earliest. [s]
    place : {'start', 'inside', 'end'}
        Whether it is at inception, at an extremum of the current, or cut off by the window's end.
    """

    value_a: float
    time_s: float
    place: Literal["start", "inside", "end"]

    @property
    def magnitude_a(self) -> float:
        """Magnitude of the current at the peak. [A]"""
        return abs(self.value_a)


def peak_of(
    *,
    cos_a: float,
    sin_a: float,
    offset_a: ArrayLike,
    decay_rate_per_s: ArrayLike,
    omega_rad_per_s: float,
    t_end_s: float = math.inf,
) -> CurrentPeak:
    """Return the largest magnitude of the model's current for 0 <= t <= t_end_s.

    Parameters
    ----------
    cos_a, sin_a : float
        Amplitudes of the cosine and the sine part. [A]
    offset_a, decay_rate_per_s : float or array_like of float, shape (k,)
        The exponentials. [A], [1/s]
    omega_rad_per_s : float
        Angular frequency, positive. [rad/s]
    t_end_s : float
        End of the window; infinite only where all offsets have one sign and no decay rate is negative, since
        otherwise the largest value need not be reached in finite time. [s]

    Returns
    -------
    CurrentPeak

    Raises
    ------
    TheoryError
        If a value has no meaning, or an infinite window was asked for where it is not allowed.

    Notes
    -----
    The extrema are found one cycle after another as bracketed zeros of the slope, none of which can be
    missed (see `_zeros`). Where the offset keeps its sign and only falls, as a single exponential does, the
    first cycle is enough: it holds a crest on the offset's side, and a later one stands on a smaller offset.
    Otherwise the search ends with the first cycle after which even a crest of the sinusoid on top of the
    largest offset that can remain would not exceed what was found.

    Examples
    --------
    >>> peak = peak_of(
    ...     cos_a=-1.0, sin_a=0.0, offset_a=1.0, decay_rate_per_s=0.0, omega_rad_per_s=100 * math.pi
    ... )
    >>> round(peak.value_a, 12), round(peak.time_s, 12)
    (2.0, 0.01)
    """
    terms = exponential_terms(offset_a, decay_rate_per_s)
    decays = all(rate >= 0 for _, rate in terms)
    one_sign = all(offset >= 0 for offset, _ in terms) or all(offset <= 0 for offset, _ in terms)
    first_cycle_is_enough = decays and one_sign
    check_model(
        amplitudes_a=(cos_a, sin_a),
        rates_per_s=[rate for _, rate in terms],
        omega_rad_per_s=omega_rad_per_s,
        t_end_s=t_end_s,
        may_be_endless=first_cycle_is_enough,
    )

    # Plain floats: numpy's scalars would be several times slower here.
    wave = _Wave(cos_a=float(cos_a), sin_a=float(sin_a), terms=tuple(terms), omega=float(omega_rad_per_s))
    slope = wave.differentiated_with(0.0)
    period = 2 * math.pi / wave.omega
    search_end = min(period, t_end_s) if first_cycle_is_enough else t_end_s
    best_t, best = 0.0, wave(0.0)
    start, cycle = 0.0, 0
    while start < search_end:
        cycle += 1
        end = min(cycle * period, search_end)
        extrema = _zeros(slope, start, end)
        for t in [*extrema, end] if end == t_end_s else extrema:
            value = wave(t)
            if abs(value) > abs(best) * (1 + TIE):
                best_t, best = t, value
        if _ceiling(wave, end, t_end_s) <= abs(best) * (1 + TIE):
            break
        start = end
    return CurrentPeak(value_a=best, time_s=float(best_t), place=place_in_window(best_t, t_end_s))


def peak_gradient(
    peak: CurrentPeak,
    *,
    cos_a: float,
    sin_a: float,
    offset_a: ArrayLike,
    decay_rate_per_s: ArrayLike,
    omega_rad_per_s: float,
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return how a peak's value and time move with the model's parameters.

    Parameters
    ----------
    peak : CurrentPeak
        What `peak_of` gave for the same model.
    cos_a, sin_a, offset_a, decay_rate_per_s, omega_rad_per_s
        The model, as for `peak_of`.

    Returns
    -------
    value_gradient, time_gradient : ndarray of float, shape (3 + 2 k,)
        Derivatives of the signed value and of the time, in the order of `rl_current_gradient`. The time of a
        peak at the start or the end of the window does not move.

    Raises
    ------
    TheoryError
        If offsets and decay rates do not pair up.

    Notes
    -----
    At an extremum the value moves only as the current at a fixed instant does; the instant moves so that the
    slope stays zero.
    """
    by_value = rl_current_gradient(
        peak.time_s,
        cos_a=cos_a,
        sin_a=sin_a,
        offset_a=offset_a,
        decay_rate_per_s=decay_rate_per_s,
        omega_rad_per_s=omega_rad_per_s,
    )
    if peak.place != "inside":
        return by_value, np.zeros_like(by_value)
    by_slope = rl_current_gradient(
        peak.time_s,
        cos_a=cos_a,
        sin_a=sin_a,
        offset_a=offset_a,
        decay_rate_per_s=decay_rate_per_s,
        omega_rad_per_s=omega_rad_per_s,
        time_derivative=1,
    )
    curvature = rl_current(
        peak.time_s,
        cos_a=cos_a,
        sin_a=sin_a,
        offset_a=offset_a,
        decay_rate_per_s=decay_rate_per_s,
        omega_rad_per_s=omega_rad_per_s,
        time_derivative=2,
    )
    return by_value, -by_slope / curvature


@dataclass(frozen=True, slots=True, kw_only=True)
class _Wave:
    """The model for one instant at a time, without the cost of arrays."""

    cos_a: float
    sin_a: float
    terms: tuple[tuple[float, float], ...]
    omega: float

    def __call__(self, t: float) -> float:
        angle = self.omega * t
        value = self.cos_a * math.cos(angle) + self.sin_a * math.sin(angle)
        for amplitude, rate in self.terms:
            value += amplitude * math.exp(-rate * t)
        return value

    def differentiated_with(self, rate: float) -> _Wave:
        """Return wave' + rate * wave, in which an exponential of that rate is gone."""
        return _Wave(
            cos_a=rate * self.cos_a + self.omega * self.sin_a,
            sin_a=rate * self.sin_a - self.omega * self.cos_a,
            terms=tuple((amplitude * (rate - own), own) for amplitude, own in self.terms if own != rate),
            omega=self.omega,
        )


def _zeros(wave: _Wave, start: float, end: float) -> list[float]:
    """Return every instant in [start, end] at which the wave changes sign, in order.

    Without exponentials the zeros are known. Otherwise take one exponential's rate r: exp(r t) * wave has
    the derivative exp(r t) * (wave' + r * wave), so it is monotone between two neighbouring zeros of
    wave' + r * wave, which is a wave with one exponential fewer, and the wave has one zero there or none: its
    signs at the ends tell. No sampling is involved, so none can be missed, whatever the rates. A spurious or
    a double zero of the simpler wave does no harm: it only splits a monotone piece.
    """
    if not wave.terms:
        return _zeros_of_sinusoid(wave, start, end)
    simpler = wave.differentiated_with(wave.terms[-1][1])
    edges = [start, *_zeros(simpler, start, end), end]
    zeros: list[float] = []
    left, at_left = start, wave(start)
    for right in edges[1:]:
        at_right = wave(right)
        if at_left == 0.0:
            zeros.append(left)
        elif at_right != 0.0 and (at_left < 0) != (at_right < 0):
            zeros.append(bracketed_zero(wave, left, right))
        left, at_left = right, at_right
    if at_left == 0.0:
        zeros.append(left)
    return zeros


def bracketed_zero(function: Callable[[float], float], left: float, right: float) -> float:
    """Return the zero between two instants at which the function has opposite signs, to rounding."""
    epsilon = float(np.finfo(float).eps)
    return float(brentq(function, left, right, xtol=epsilon * (right - left), rtol=4 * epsilon))


def _zeros_of_sinusoid(wave: _Wave, start: float, end: float) -> list[float]:
    half = math.pi / wave.omega
    first = math.atan2(-wave.cos_a, wave.sin_a) / wave.omega
    # One more on either side, then compared: rounding must not lose a zero at the shared edge of two cycles.
    counts = range(math.floor((start - first) / half) - 1, math.ceil((end - first) / half) + 2)
    return [t for n in counts if start <= (t := first + n * half) <= end]


def _ceiling(wave: _Wave, start: float, end: float) -> float:
    """Return a value that the magnitude of the wave does not exceed between start and end."""
    sides = [0.0, 0.0]
    for amplitude, rate in wave.terms:
        largest = abs(amplitude) * math.exp(-rate * (start if rate >= 0 else end))
        sides[amplitude < 0] += largest
    # Exponentials of opposite sign do not add up; the offset lies between the two sums.
    return math.hypot(wave.cos_a, wave.sin_a) + max(sides)


def place_in_window(t_s: float, t_end_s: float) -> Literal["start", "inside", "end"]:
    """Name the place of an instant in the window [0, t_end_s]."""
    if t_s <= 0.0:
        return "start"
    return "end" if t_s >= t_end_s else "inside"


def check_model(
    *,
    amplitudes_a: tuple[float, ...],
    rates_per_s: list[float],
    omega_rad_per_s: float,
    t_end_s: float,
    may_be_endless: bool,
) -> None:
    """Raise `TheoryError` for a model or a window in which a largest current cannot be looked for."""
    if not all(math.isfinite(amplitude) for amplitude in amplitudes_a):
        raise TheoryError("not-finite", "the sinusoid's amplitude is not a finite number", where="amplitude")
    check_omega(omega_rad_per_s)
    if not t_end_s >= 0:
        raise TheoryError("negative-window", f"a window cannot end at {t_end_s} s", where="t_end_s")
    if math.isinf(t_end_s) and not may_be_endless:
        raise TheoryError(
            "window-without-end",
            "the largest current of these exponentials need not be reached in finite time",
            where="t_end_s",
            hint="give the end of the window, such as the clearing time",
        )
    # exp(700) is near the largest number there is; nothing that grows so far is a current.
    if any(rate < 0 and -rate * t_end_s > 700 for rate in rates_per_s):
        raise TheoryError(
            "growth-too-large",
            "an exponential with a negative decay rate outgrows every number within the window",
            where="decay_rate_per_s",
            hint="shorten the window or bound the decay rate",
        )
