r"""The inception angle that gives the largest peak, for the same impedances and prefault load."""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analyzer.theory.closed_form import exponential_terms
from analyzer.theory.peak import TIE, CurrentPeak, bracketed_zero, check_model, place_in_window

# Relative excess in the squared current that the search may leave to its last, polishing step.
_SQUARE_TOLERANCE = 1e-12


@dataclass(frozen=True, slots=True, kw_only=True)
class WorstInception:
    """The inception angle that gives the largest peak, and that peak.

    Attributes
    ----------
    inception_angle_deg : float
        In (-180, 180]; the one with a positive peak. Half a turn on, the peak is the same and negative. [deg]
    peak : CurrentPeak
        The peak for inception at this angle.
    """

    inception_angle_deg: float
    peak: CurrentPeak


def worst_inception(
    *,
    fault_a: complex,
    offset_a: ArrayLike,
    decay_rate_per_s: ArrayLike,
    omega_rad_per_s: float,
    t_end_s: float = math.inf,
) -> WorstInception:
    r"""Return the inception angle that gives the largest peak, all impedances kept.

    Parameters
    ----------
    fault_a : complex
        Phasor of the fault current's sinusoid, RMS, the driving voltage being the reference. [A]
    offset_a : complex or array_like of complex, shape (k,)
        Phasors, RMS, whose instantaneous values at inception the offsets are. In one loop that is the
        prefault current's phasor minus `fault_a`; without load, minus `fault_a`. [A]
    decay_rate_per_s : float or array_like of float, shape (k,)
        Their decay rates. [1/s]
    omega_rad_per_s : float
        Angular frequency, positive. [rad/s]
    t_end_s : float
        End of the window; infinite only with a single exponential that does not grow. [s]

    Returns
    -------
    WorstInception

    Raises
    ------
    TheoryError
        If a value has no meaning, or an infinite window was asked for where it is not allowed.

    Notes
    -----
    For inception at the angle :math:`\alpha`,

    .. math:: i(t) = \sqrt2\,\mathrm{Im}\{e^{j\alpha} G(t)\},\quad
              G(t) = I e^{j\omega t} + \sum_k D_k e^{-\lambda_k t},

    so the largest current that any angle gives at the instant t is :math:`\sqrt2|G(t)|`, and only the instant
    is to be searched for. Derived here. Without load and with one exponential it follows that
    :math:`\alpha = 0`, inception at a voltage zero, whatever X/R. The angle of the largest *offset*,
    :math:`\varphi - 90°`, often named in its place, gives a lower peak at every finite X/R.
    Where the best angle gains less than 1e-12 of the peak over others (no offset to speak of, or one that is
    gone before the first crest), the peak is right and the angle is one of those that reach it.
    """
    offsets = np.atleast_1d(np.asarray(offset_a, dtype=np.complex128))
    rates = np.atleast_1d(np.asarray(decay_rate_per_s, dtype=np.float64))
    exponential_terms(np.abs(offsets), rates)
    first_cycle_is_enough = rates.size <= 1 and bool((rates >= 0).all())
    check_model(
        amplitudes_a=(fault_a.real, fault_a.imag),
        rates_per_s=rates.tolist(),
        omega_rad_per_s=omega_rad_per_s,
        t_end_s=t_end_s,
        may_be_endless=first_cycle_is_enough,
    )
    # One exponential: somewhere in a cycle |G| reaches |I| + |D| exp(-rate t), more than it can later.
    search_end = min(2 * math.pi / omega_rad_per_s, t_end_s) if first_cycle_is_enough else t_end_s

    square = _SquaredEnvelope(fault=complex(fault_a), offsets=offsets, rates=rates, omega=omega_rad_per_s)
    t = square.largest_at(search_end)
    value = complex(square.phasor(np.array([t]))[0])
    angle = math.remainder(90.0 - math.degrees(cmath.phase(value)), 360.0)
    peak = CurrentPeak(value_a=math.sqrt(2) * abs(value), time_s=t, place=place_in_window(t, t_end_s))
    return WorstInception(inception_angle_deg=180.0 if angle == -180.0 else angle, peak=peak)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _SquaredEnvelope:
    """|G(t)|² of `worst_inception`, its slope and a bound on its curvature."""

    fault: complex
    offsets: NDArray[np.complex128]
    rates: NDArray[np.float64]
    omega: float

    def phasor(self, t: NDArray[np.float64]) -> NDArray[np.complex128]:
        decays = np.exp(-self.rates * t[:, np.newaxis])
        return np.asarray(self.fault * np.exp(1j * self.omega * t) + decays @ self.offsets)

    def value(self, t: NDArray[np.float64]) -> NDArray[np.float64]:
        phasor = self.phasor(t)
        return np.asarray(phasor.real**2 + phasor.imag**2)

    def slope(self, t: NDArray[np.float64]) -> NDArray[np.float64]:
        decays = np.exp(-self.rates * t[:, np.newaxis])
        change = 1j * self.omega * self.fault * np.exp(1j * self.omega * t) - decays @ (
            self.rates * self.offsets
        )
        return np.asarray(2 * (self.phasor(t).conj() * change).real)

    def curvature_bound(self, left: NDArray[np.float64], width: float) -> NDArray[np.float64]:
        """Bound the second derivative's magnitude on [left, left + width].

        That is the triangle inequality on |G|² multiplied out. The sinusoid's own square is constant and
        drops out, so the bound shrinks with the offsets.
        """
        worst = np.exp(
            -self.rates * np.where(self.rates >= 0, left[:, np.newaxis], left[:, np.newaxis] + width)
        )
        sizes = worst * np.abs(self.offsets)
        pairs = (self.rates[:, np.newaxis] + self.rates) ** 2
        among_offsets = np.einsum("nj,nk,jk->n", sizes, sizes, pairs)
        with_sinusoid = 2 * abs(self.fault) * (sizes @ (self.omega**2 + self.rates**2))
        return np.asarray(among_offsets + with_sinusoid)

    def largest_at(self, end: float) -> float:
        """Return the instant in [0, end] of the largest value.

        The window is halved again and again. A piece is dropped when its value and slope in the middle and
        the bound on its curvature show that it cannot hold a value above the best one known.
        """
        pieces = max(8, math.ceil(16 * end * self.omega / (2 * math.pi)))
        width = end / pieces
        left = np.linspace(0.0, end - width, pieces)
        edges = np.append(left, end)
        at_edges = self.value(edges)
        best = float(at_edges.max())
        best_t = float(edges[np.argmax(at_edges >= best * (1 - TIE))])
        while left.size:
            middle = left + width / 2
            at_middle, slope = self.value(middle), self.slope(middle)
            if at_middle.max() > best:
                best_t, best = float(middle[at_middle.argmax()]), float(at_middle.max())
            reach = np.abs(slope) * width / 2 + self.curvature_bound(left, width) * width**2 / 8
            kept = at_middle + reach > best * (1 + _SQUARE_TOLERANCE)
            left = np.concatenate([left[kept], middle[kept]])
            width /= 2
        return self._polished(best_t, end)

    def _polished(self, t: float, end: float) -> float:
        """Move a maximum known to the search's tolerance to the zero of the slope beside it."""
        reach = 1e-4 / self.omega
        low, high = max(0.0, t - reach), min(end, t + reach)

        def slope(at: float) -> float:
            return float(self.slope(np.array([at]))[0])

        if not slope(low) > 0 > slope(high):
            return t
        found = bracketed_zero(slope, low, high)
        before, after = self.value(np.array([t, found]))
        return found if after >= before * (1 - TIE) else t
