"""Each channel's sinusoid and offsets during the fault, given the loops' decay rates."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from analyzer.estimate.rlfit import LoopFit
from analyzer.theory.peak import CurrentPeak, peak_gradient, peak_of
from analyzer.waveform.phasors import Phasor


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ChannelFit:
    """One channel during the fault: ``c cos(omega tau) + s sin(omega tau) + sum of A_m exp(-lambda_m tau)``.

    Attributes
    ----------
    t_ref_s : float
        Origin of tau. [s]
    omega_rad_per_s : float
        [rad/s]
    rates_per_s : ndarray of float64, shape (m,)
        Decay rates, from the loops. [1/s]
    coefficients : ndarray of float64, shape (2 + m,)
        c, s, then the offsets.
    covariance : ndarray of float64, shape (2 + 2 m, 2 + 2 m)
        Of the coefficients, then the decay rates; their uncertainty is carried into both.
    drift : ndarray of float64, shape (2 + m,)
        How the coefficients move with one standard uncertainty of the frequency.
    noise_rms : float
        That the covariance is based on.
    """

    t_ref_s: float
    omega_rad_per_s: float
    rates_per_s: NDArray[np.float64]
    coefficients: NDArray[np.float64]
    covariance: NDArray[np.float64]
    drift: NDArray[np.float64]
    noise_rms: float

    @property
    def phasor(self) -> Phasor:
        """The fundamental, at the origin."""
        cos, sin = float(self.coefficients[0]), float(self.coefficients[1])
        moved = (float(self.drift[0]), float(self.drift[1]))
        return Phasor.from_parts(cos, sin, self.covariance[:2, :2], moved)

    @property
    def offset(self) -> tuple[float, float]:
        """The offset at the origin, all exponentials together, and its standard uncertainty."""
        m = len(self.rates_per_s)
        variance = float(self.covariance[2 : 2 + m, 2 : 2 + m].sum()) + float(self.drift[2:].sum()) ** 2
        return float(self.coefficients[2:].sum()), math.sqrt(variance)

    def value(self, time_s: float) -> float:
        """Return the fitted value at one instant."""
        return float(
            _basis(np.array([time_s - self.t_ref_s]), self.omega_rad_per_s, self.rates_per_s)[0]
            @ self.coefficients
        )

    def peak(self, *, end_s: float) -> tuple[CurrentPeak, float]:
        """Return the largest magnitude up to `end_s`, exactly, and its standard uncertainty."""
        model = {
            "cos_a": float(self.coefficients[0]),
            "sin_a": float(self.coefficients[1]),
            "omega_rad_per_s": self.omega_rad_per_s,
        }
        offsets, rates = self.coefficients[2:], self.rates_per_s
        peak = peak_of(
            **model, offset_a=offsets, decay_rate_per_s=rates, t_end_s=max(end_s - self.t_ref_s, 1e-9)
        )
        gradient, _ = peak_gradient(peak, **model, offset_a=offsets, decay_rate_per_s=rates)
        m = len(rates)
        # peak_gradient's order is cos, sin, offsets, rates, omega; the frequency is taken as known.
        along = gradient[: 2 + 2 * m]
        variance = float(along @ self.covariance @ along) + float(along[: 2 + m] @ self.drift) ** 2
        return peak, math.sqrt(max(variance, 0.0))


def fit_channel(
    times_s: NDArray[np.float64],
    values: NDArray[np.float64],
    *,
    t_ref_s: float,
    omega_rad_per_s: float,
    omega_std_rad_per_s: float,
    rates_per_s: NDArray[np.float64],
    rate_stds_per_s: NDArray[np.float64],
    noise_rms: float,
    in_band_rms: float,
    zero_std: float = 0.0,
) -> ChannelFit:
    """Fit one channel by linear least squares with given decay rates.

    Parameters
    ----------
    times_s, values : ndarray of float64, shape (n,)
        Within the fault, the converter's zero taken off.
    t_ref_s : float
        Origin of tau. [s]
    omega_rad_per_s, omega_std_rad_per_s : float
        Angular frequency before the fault, and its standard uncertainty. [rad/s]
    rates_per_s, rate_stds_per_s : ndarray of float64, shape (m,)
        The loops' decay rates and their standard uncertainty. [1/s]
    noise_rms, in_band_rms : float
        Noise before the fault, and white noise of its density at the power frequency; what is left of the
        fit counts where it exceeds that.
    zero_std : float
        Standard uncertainty of the zero that was taken off.

    Returns
    -------
    ChannelFit
    """
    tau = times_s - t_ref_s
    basis = _basis(tau, omega_rad_per_s, rates_per_s)
    coefficients: NDArray[np.float64] = np.linalg.lstsq(basis, values, rcond=None)[0].astype(np.float64)
    residual = values - basis @ coefficients
    freedom = max(len(tau) - basis.shape[1], 1)
    left = math.sqrt(float(residual @ residual) / freedom)
    noise = in_band_rms * max(1.0, left / noise_rms)
    inverse = np.linalg.pinv(basis.T @ basis, hermitian=True)
    m = len(rates_per_s)
    slopes = -coefficients[2:] * tau[:, None] * basis[:, 2:]
    follow = -inverse @ (basis.T @ slopes)  # how the coefficients follow each rate, (2 + m, m)
    of_rates = np.diag(rate_stds_per_s**2)
    covariance = np.zeros((2 + 2 * m, 2 + 2 * m))
    shifted = inverse @ basis.sum(axis=0) * zero_std
    noise_alone = noise**2 * inverse + np.outer(shifted, shifted)
    covariance[: 2 + m, : 2 + m] = noise_alone + follow @ of_rates @ follow.T
    covariance[: 2 + m, 2 + m :] = follow @ of_rates
    covariance[2 + m :, : 2 + m] = (follow @ of_rates).T
    covariance[2 + m :, 2 + m :] = of_rates
    slope = tau * (
        -np.sin(omega_rad_per_s * tau) * coefficients[0] + np.cos(omega_rad_per_s * tau) * coefficients[1]
    )
    return ChannelFit(
        t_ref_s=t_ref_s,
        omega_rad_per_s=omega_rad_per_s,
        rates_per_s=rates_per_s,
        coefficients=coefficients,
        covariance=covariance,
        drift=-inverse @ (basis.T @ slope) * omega_std_rad_per_s,
        noise_rms=noise,
    )


def half_sum(first: LoopFit, second: LoopFit, sign: float) -> ChannelFit:
    """Return the channel ``(second + sign * first) / 2`` of two loops of one current each.

    The phase currents of a double-phase-to-ground fault, from the loops of their difference and their sum:
    each loop's exponential has its own rate, and so the phase has both.
    """
    omega = first.omega_rad_per_s
    t_ref_s = first.t_ref_s
    # Rows: c, s, offset of the first, offset of the second, rate of the first, of the second; columns: the
    # loops' own order lambda, c, s, A.
    to_phase = np.zeros((6, 8))
    for row, column in ((0, 1), (1, 2), (2, 3)):
        to_phase[row, column] = sign / 2
    for row, column in ((0, 5), (1, 6), (3, 7)):
        to_phase[row, column] = 0.5
    to_phase[4, 0] = to_phase[5, 4] = 1.0
    stacked = np.concatenate(
        [np.append(fit.rate_used_per_s, fit.coefficients[:, 0]) for fit in (first, second)]
    )
    covariance = np.zeros((8, 8))
    covariance[:4, :4], covariance[4:, 4:] = first.own_covariance, second.own_covariance
    values = to_phase @ stacked
    return ChannelFit(
        t_ref_s=t_ref_s,
        omega_rad_per_s=omega,
        rates_per_s=values[4:],
        coefficients=values[:4],
        covariance=to_phase @ covariance @ to_phase.T,
        drift=(to_phase @ np.concatenate([first.drift, second.drift]))[:4],
        noise_rms=float(np.hypot(first.noise_rms[0], second.noise_rms[0]) / 2),
    )


def _basis(tau: NDArray[np.float64], omega: float, rates: NDArray[np.float64]) -> NDArray[np.float64]:
    columns = [np.cos(omega * tau), np.sin(omega * tau), *(np.exp(-rate * tau) for rate in rates)]
    return np.column_stack(columns)
