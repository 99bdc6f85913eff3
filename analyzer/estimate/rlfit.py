"""Fit of a sinusoid and a decaying exponential to the currents of one loop.

``y_k(t) = c_k cos(omega tau) + s_k sin(omega tau) + A_k exp(-lambda tau)``, tau = t - t_ref, with
lambda = R/L common to the loop's currents. Given lambda the rest is linear, so the sum of squares is a
function of lambda alone (variable projection: G. H. Golub and V. Pereyra, SIAM J. Numer. Anal. 10, 1973). It
is searched over its whole range, needs no starting value, and is the profile likelihood that gives the
interval.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq, minimize_scalar

from analyzer.waveform.noise import in_band_gain
from analyzer.waveform.phasors import Phasor

# Smallest and largest X/R that are looked at; beyond, a decay is a step or a constant. Slightly negative
# decay rates are let in, so that an estimate near zero is not pushed up by the edge of the range.
_X_OVER_R_LOW, _X_OVER_R_HIGH = 0.1, 400.0
_GRID = 96
_CHI2_95 = 3.841458820694124  # chi-square, one degree of freedom, 0.95 quantile
# Weaker offsets tell no decay: with |A| below so many standard uncertainties lambda has no normal estimate.
_OFFSET_SIGMAS = 5.0
_STRUCTURE = 1.5  # root of the reduced chi-square from which the residual is more than noise


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LoopFit:
    """A loop's fitted currents.

    Attributes
    ----------
    t_ref_s : float
        Origin of tau. [s]
    omega_rad_per_s : float
        [rad/s]
    rate_used_per_s : float
        lambda of the least sum of squares, whether the samples tell it or not. [1/s]
    decay_rate_per_s : float or None
        The same where the samples tell it, else None. [1/s]
    decay_rate_std, decay_rate_low, decay_rate_high : float or None
        Standard uncertainty and 95 % limits (profile likelihood); a limit is None where the likelihood has
        none. [1/s]
    why_unknown : str
        Why there is no decay rate; empty where there is one.
    coefficients : ndarray of float64, shape (3, k)
        c, s and A of each current. [A]
    own_covariance : ndarray of float64, shape (3 k + 1, 3 k + 1)
        Of lambda, then c, s, A current by current, at the given frequency.
    drift : ndarray of float64, shape (3 k + 1,)
        How they move with one standard uncertainty of the frequency.
    noise_rms : ndarray of float64, shape (k,)
        That the uncertainty is based on: what is left of the fit, where that exceeds the noise before.
    noise_before_rms : ndarray of float64, shape (k,)
        Noise before inception.
    residual_rms : ndarray of float64, shape (k,)
    reduced_chi_square : float
        Against the noise before inception.
    lag1_autocorrelation : float
        Of what is left.
    bound_ratio : float or None
        Standard uncertainty of lambda over its Cramér-Rao bound at the noise before inception.
    n_samples : int
    """

    t_ref_s: float
    omega_rad_per_s: float
    rate_used_per_s: float
    decay_rate_per_s: float | None
    decay_rate_std: float | None
    decay_rate_low: float | None
    decay_rate_high: float | None
    why_unknown: str
    coefficients: NDArray[np.float64]
    own_covariance: NDArray[np.float64]
    drift: NDArray[np.float64]
    noise_rms: NDArray[np.float64]
    noise_before_rms: NDArray[np.float64]
    residual_rms: NDArray[np.float64]
    reduced_chi_square: float
    lag1_autocorrelation: float
    bound_ratio: float | None
    n_samples: int

    @property
    def covariance(self) -> NDArray[np.float64]:
        """Covariance with the frequency's share, shape (3 k + 1, 3 k + 1)."""
        return np.asarray(self.own_covariance + np.outer(self.drift, self.drift))

    @property
    def free_parameters(self) -> int:
        """Number of fitted parameters."""
        return int(self.coefficients.size) + (self.decay_rate_per_s is not None)

    def phasor(self, k: int) -> Phasor:
        """Return the fundamental of the loop's current `k`, at the origin."""
        block = slice(1 + 3 * k, 3 + 3 * k)
        cos, sin = (float(x) for x in self.coefficients[:2, k])
        moved = (float(self.drift[1 + 3 * k]), float(self.drift[2 + 3 * k]))
        return Phasor.from_parts(cos, sin, self.own_covariance[block, block], moved)

    def current(self, times_s: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the fitted currents, shape (k, n). [A]"""
        basis = _basis(times_s - self.t_ref_s, self.omega_rad_per_s, self.rate_used_per_s)
        values: NDArray[np.float64] = (basis @ self.coefficients).T
        return values

    def current_gradient(self, time_s: float) -> NDArray[np.float64]:
        """Return d(current)/d(parameters) at one instant, shape (k, 3 k + 1), in the covariance's order."""
        tau = time_s - self.t_ref_s
        row = _basis(np.array([tau]), self.omega_rad_per_s, self.rate_used_per_s)[0]
        k = self.coefficients.shape[1]
        gradient = np.zeros((k, 3 * k + 1))
        for j in range(k):
            gradient[j, 0] = -self.coefficients[2, j] * tau * row[2]
            gradient[j, 1 + 3 * j : 4 + 3 * j] = row
        return gradient


def fit_loop(
    times_s: NDArray[np.float64],
    currents: NDArray[np.float64],
    *,
    omega_rad_per_s: float,
    omega_std_rad_per_s: float,
    noise_rms: NDArray[np.float64],
    in_band_rms: NDArray[np.float64] | None = None,
    zero_std: NDArray[np.float64] | None = None,
    t_ref_s: float,
) -> LoopFit:
    """Fit one loop.

    Parameters
    ----------
    times_s : ndarray of float64, shape (n,)
        Within the fault. [s]
    currents : ndarray of float64, shape (k, n)
        The loop's currents, the converter's zero taken off. [A]
    omega_rad_per_s, omega_std_rad_per_s : float
        Angular frequency before the fault, and its standard uncertainty. [rad/s]
    noise_rms : ndarray of float64, shape (k,)
        Noise before the fault. [A]
    in_band_rms : ndarray of float64, shape (k,), optional
        White noise of the density found at the power frequency; equal to `noise_rms` when left out. [A]
    zero_std : ndarray of float64, shape (k,), optional
        Standard uncertainty of the converter's zero that was taken off; none when left out. [A]
    t_ref_s : float
        Origin of tau, the inception. [s]

    Returns
    -------
    LoopFit
        With a decay rate of None, and an offset with it, where the window or the offset is too small.

    Raises
    ------
    ValueError
        If there are fewer samples than parameters.
    """
    n_currents, n = currents.shape
    if n < 5:
        raise ValueError("a fit needs at least 5 samples")
    tau = times_s - t_ref_s
    in_band = noise_rms if in_band_rms is None else in_band_rms
    profile = _Profile(tau, currents / in_band[:, None], omega_rad_per_s)
    rate = profile.minimum()
    basis = _basis(tau, omega_rad_per_s, rate)
    coefficients: NDArray[np.float64] = np.linalg.lstsq(basis, currents.T, rcond=None)[0].astype(np.float64)
    residual = currents.T - basis @ coefficients
    freedom = max(n - 3, 1)
    residual_rms = np.sqrt(np.sum(residual**2, axis=0) / freedom)
    chi_square = float(np.sum((residual / noise_rms) ** 2))
    reduced = chi_square / max(n_currents * n - 3 * n_currents - 1, 1)
    scale = _excess(
        residual.T, residual_rms, in_band, reduced, omega_rad_per_s * (tau[-1] - tau[0]) / (n - 1)
    )
    noise_alone, drift, zeros = _uncertainty(
        tau, basis, coefficients, np.asarray(in_band * scale), omega_std_rad_per_s
    )
    own = (
        noise_alone + zeros @ np.diag((np.zeros(n_currents) if zero_std is None else zero_std) ** 2) @ zeros.T
    )
    covariance = own + np.outer(drift, drift)
    bound = math.sqrt(noise_alone[0, 0]) / scale
    std = math.sqrt(covariance[0, 0])
    # The profile knows the noise alone: what frequency and zero add widens it as it widens the standard one.
    widening = covariance[0, 0] / noise_alone[0, 0] if noise_alone[0, 0] > 0 else 1.0
    low, high = profile.interval(rate, _CHI2_95 * scale**2 * widening)
    why = _why_unknown(coefficients[2], covariance, tau, omega_rad_per_s, low, high)
    left = residual / noise_rms
    lag1 = float(np.sum(left[1:] * left[:-1]) / max(float(np.sum(left**2)), 1e-300))
    return LoopFit(
        t_ref_s=t_ref_s,
        omega_rad_per_s=omega_rad_per_s,
        rate_used_per_s=rate,
        decay_rate_per_s=None if why else rate,
        decay_rate_std=None if why else std,
        decay_rate_low=None if why else low,
        decay_rate_high=None if why else high,
        why_unknown=why,
        coefficients=coefficients,
        own_covariance=own,
        drift=drift,
        noise_rms=in_band * scale,
        noise_before_rms=noise_rms,
        residual_rms=residual_rms,
        reduced_chi_square=reduced,
        lag1_autocorrelation=max(-1.0, min(1.0, lag1)),
        bound_ratio=None if why or bound == 0 else std / bound,
        n_samples=n,
    )


def fit_frequency(
    times_s: NDArray[np.float64],
    currents: NDArray[np.float64],
    *,
    omega_rad_per_s: float,
    in_band_rms: NDArray[np.float64],
) -> tuple[float, float]:
    """Return the angular frequency of a fault's own currents, and its standard uncertainty. [rad/s]

    For records that were idle before the fault: the same least squares as `fit_loop`, least over the
    frequency as well.

    Parameters
    ----------
    times_s : ndarray of float64, shape (n,)
        Within the fault. [s]
    currents : ndarray of float64, shape (k, n)
        One loop's currents. [A]
    omega_rad_per_s : float
        Where to look: within five hertz of it, less in long windows. [rad/s]
    in_band_rms : ndarray of float64, shape (k,)
        Noise. [A]
    """
    span_s = float(times_s[-1] - times_s[0])
    weighted = currents / in_band_rms[:, None]

    def least(omega: float) -> float:
        profile = _Profile(times_s - times_s[0], weighted, omega)
        return profile(profile.minimum())

    half_width = 2.0 * math.pi * min(5.0, 0.4 / span_s)
    bounds = (omega_rad_per_s - half_width, omega_rad_per_s + half_width)
    found = minimize_scalar(least, bounds=bounds, method="bounded", options={"xatol": 1e-4})
    omega, value = float(found.x), float(found.fun)
    step = 1e-3 * half_width
    curvature = (least(omega + step) + least(omega - step) - 2.0 * value) / step**2
    excess = max(1.0, value / max(currents.size - 5, 1))
    return omega, math.sqrt(2.0 * excess / curvature) if curvature > 0 else half_width


def _excess(
    residual: NDArray[np.float64],
    residual_rms: NDArray[np.float64],
    in_band: NDArray[np.float64],
    reduced_chi_square: float,
    phase_step_rad: float,
) -> float:
    """Return the factor by which what the model leaves exceeds the noise before, in the signal's band.

    One where the noise before explains it. What is left beyond is structure, which follows itself from sample
    to sample: its own density in the band counts.
    """
    if reduced_chi_square <= 1.0:
        return 1.0
    left = residual_rms * max(1.0, in_band_gain(residual, phase_step_rad=phase_step_rad))
    white_excess = math.sqrt(reduced_chi_square)
    return max(1.0, float(np.max(left / in_band))) if white_excess > _STRUCTURE else white_excess


class _Profile:
    """The least sum of squares as a function of the decay rate."""

    def __init__(self, tau: NDArray[np.float64], weighted: NDArray[np.float64], omega: float) -> None:
        self._tau = tau
        self._omega = omega
        self._sinusoids, _ = np.linalg.qr(np.column_stack([np.cos(omega * tau), np.sin(omega * tau)]))
        self._left = weighted.T - self._sinusoids @ (self._sinusoids.T @ weighted.T)
        self._total = float(np.sum(self._left**2))
        self._limits = (-omega / _X_OVER_R_HIGH * 4, omega / _X_OVER_R_LOW)

    def __call__(self, rate: float) -> float:
        return float(self._many(np.array([rate]))[0])

    def _many(self, rates: NDArray[np.float64]) -> NDArray[np.float64]:
        shift = self._tau[0]  # a common factor of the exponential changes nothing, and cannot overflow
        exponentials = np.exp(-np.outer(self._tau - shift, rates))
        exponentials -= self._sinusoids @ (self._sinusoids.T @ exponentials)
        lengths = np.sum(exponentials**2, axis=0)
        explained = np.sum((self._left.T @ exponentials) ** 2, axis=0) / np.maximum(lengths, 1e-300)
        values: NDArray[np.float64] = self._total - explained
        return values

    def minimum(self) -> float:
        low, high = self._limits
        positive = np.geomspace(self._omega / _X_OVER_R_HIGH, high, _GRID)
        grid = np.concatenate((np.linspace(low, 0.0, 6), positive))
        best = int(np.argmin(self._many(grid)))
        bounds = (grid[max(best - 1, 0)], grid[min(best + 1, len(grid) - 1)])
        found = minimize_scalar(self, bounds=bounds, method="bounded", options={"xatol": 1e-9 * self._omega})
        return float(found.x)

    def interval(self, rate: float, rise: float) -> tuple[float | None, float | None]:
        """Return where the profile has risen by `rise` on either side; None where it does not."""
        level = self(rate) + rise

        def above(x: float) -> float:
            return self(x) - level

        low, high = self._limits
        return _crossing(above, rate, low, self._omega), _crossing(above, rate, high, self._omega)


def _crossing(above: Callable[[float], float], start: float, limit: float, omega: float) -> float | None:
    step = math.copysign(1e-4 * omega, limit - start)
    inner = start
    while (outer := start + step) and abs(step) < abs(limit - start):
        if above(outer) > 0:
            return float(brentq(above, inner, outer, xtol=1e-9 * omega))
        inner, step = outer, step * 1.5
    return float(brentq(above, inner, limit, xtol=1e-9 * omega)) if above(limit) > 0 else None


def _uncertainty(
    tau: NDArray[np.float64],
    basis: NDArray[np.float64],
    coefficients: NDArray[np.float64],
    noise_rms: NDArray[np.float64],
    omega_std: float,
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Return covariance, drift and zero's pull of lambda and every current's c, s, A.

    The covariance is the inverse of the Fisher information at the given frequency; the drift is how the
    parameters move with one standard uncertainty of the frequency; the last, shape (3 k + 1, k), how they
    move with each current's zero.
    """
    k = coefficients.shape[1]
    information = np.zeros((3 * k + 1, 3 * k + 1))
    turned, shifted = np.zeros(3 * k + 1), np.zeros((3 * k + 1, k))
    gram = basis.T @ basis
    for j in range(k):
        weight = 1.0 / noise_rms[j] ** 2
        slope = -coefficients[2, j] * tau * basis[:, 2]
        turning = tau * (basis[:, 0] * coefficients[1, j] - basis[:, 1] * coefficients[0, j])
        block = slice(1 + 3 * j, 4 + 3 * j)
        information[0, 0] += slope @ slope * weight
        information[0, block] = basis.T @ slope * weight
        information[block, 0] = information[0, block]
        information[block, block] = gram * weight
        turned[0] += slope @ turning * weight
        turned[block] = basis.T @ turning * weight
        shifted[0, j] = slope.sum() * weight
        shifted[block, j] = basis.sum(axis=0) * weight
    # Scaled to a unit diagonal first: lambda and the amplitudes differ by many powers of ten.
    scale = 1.0 / np.sqrt(np.maximum(np.diag(information), 1e-300))
    inverse: NDArray[np.float64] = np.linalg.pinv(information * np.outer(scale, scale), hermitian=True)
    covariance = inverse * np.outer(scale, scale)
    return covariance, -covariance @ turned * omega_std, -covariance @ shifted


def _why_unknown(
    offsets: NDArray[np.float64],
    covariance: NDArray[np.float64],
    tau: NDArray[np.float64],
    omega: float,
    low: float | None,
    high: float | None,
) -> str:
    cycles = (tau[-1] - tau[0]) * omega / (2 * math.pi)
    if cycles < 1.0:
        return f"the window has {cycles:.2f} cycles; a decay needs at least one"
    stds = np.sqrt(np.diag(covariance)[3::3])
    if np.all(np.abs(offsets) < _OFFSET_SIGMAS * stds):
        return "the currents have no offset to speak of; they tell no decay"
    if low is None or high is None or high - low > omega:
        return "the offset is too weak for the decay to be told"
    return ""


def _basis(tau: NDArray[np.float64], omega: float, rate: float) -> NDArray[np.float64]:
    return np.column_stack([np.cos(omega * tau), np.sin(omega * tau), np.exp(-rate * tau)])
