"""The steady state before an event: frequency, phasors, noise, and its continuation.

Every channel is a constant (the converter's own zero), a sinusoid of the common frequency and, where the
window allows, its low harmonics as nuisance. Given the frequency all else is linear, so the frequency is
found by variable projection: the least sum of squares as a function of it alone.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize_scalar

from analyzer.waveform.noise import in_band_gain
from analyzer.waveform.phasors import Phasor, combine

FREQUENCY_RANGE_HZ = (40.0, 70.0)
_HARMONICS = (2, 3, 5, 7)
_HARMONICS_FROM_CYCLES = 1.9
_TELLING_SIGMAS = 10.0


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Prefault:
    """The sinusoids that fit the samples before an event.

    Attributes
    ----------
    t_ref_s : float
        Origin of the phasors. [s]
    window_s : tuple of float
        First and last sample used. [s]
    frequency_hz, frequency_std_hz : float
        [Hz]
    coefficients : ndarray of float64, shape (p, k)
        Constant, cosine, sine, then cosine and sine of each harmonic, of k channels.
    covariance : ndarray of float64, shape (k, p, p)
        Of each channel's coefficients at the fitted frequency.
    follow : ndarray of float64, shape (p, k)
        How the coefficients follow the angular frequency.
    noise_rms : ndarray of float64, shape (k,)
        Root mean square of what is left, degrees of freedom taken into account.
    in_band_rms : ndarray of float64, shape (k,)
        That of white noise of the density found at the power frequency: what uncertainty follows from.
    harmonics : tuple of int
        Orders in the model.
    n_samples : int
    """

    t_ref_s: float
    window_s: tuple[float, float]
    frequency_hz: float
    frequency_std_hz: float
    coefficients: NDArray[np.float64]
    covariance: NDArray[np.float64]
    follow: NDArray[np.float64]
    noise_rms: NDArray[np.float64]
    in_band_rms: NDArray[np.float64]
    harmonics: tuple[int, ...]
    n_samples: int

    @property
    def omega_rad_per_s(self) -> float:
        """Angular frequency. [rad/s]"""
        return float(2.0 * np.pi * self.frequency_hz)

    @property
    def cycles(self) -> float:
        """Length of the window in cycles."""
        return (self.window_s[1] - self.window_s[0]) * self.frequency_hz

    @property
    def zero(self) -> NDArray[np.float64]:
        """The channels' constants, shape (k,)."""
        constants: NDArray[np.float64] = self.coefficients[0]
        return constants

    @property
    def omega_std_rad_per_s(self) -> float:
        """Standard uncertainty of the angular frequency. [rad/s]"""
        return float(2.0 * np.pi * self.frequency_std_hz)

    def phasor(self, k: int) -> Phasor:
        """Return the fundamental of channel `k` at the origin `t_ref_s`, carried forward."""
        cos, sin = (float(x) for x in self.coefficients[1:3, k])
        cos_drift, sin_drift = (float(x) * self.omega_std_rad_per_s for x in self.follow[1:3, k])
        return Phasor.from_parts(cos, sin, self.covariance[k, 1:3, 1:3], (cos_drift, sin_drift))

    def phasor_at(self, k: int, time_s: float) -> Phasor:
        """Return the fundamental of channel `k` with its origin moved to an instant close to `t_ref_s`."""
        turn = complex(np.exp(1j * self.omega_rad_per_s * (time_s - self.t_ref_s)))
        return combine([turn], [self.phasor(k)])

    def predict(self, times_s: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the continuation of every channel, shape (k, n)."""
        basis = _basis(times_s - self.t_ref_s, self.omega_rad_per_s, self.harmonics)
        values: NDArray[np.float64] = (basis @ self.coefficients).T
        return values

    def fundamental(self, times_s: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the continuation without constant and harmonics, shape (k, n)."""
        basis = _basis(times_s - self.t_ref_s, self.omega_rad_per_s, ())
        values: NDArray[np.float64] = (basis[:, 1:3] @ self.coefficients[1:3]).T
        return values

    def prediction_std(self, time_s: float) -> NDArray[np.float64]:
        """Return the standard uncertainty of each channel's continuation at one instant, shape (k,)."""
        tau = np.array([time_s - self.t_ref_s])
        row = _basis(tau, self.omega_rad_per_s, self.harmonics)[0]
        noise = np.einsum("i,kij,j->k", row, self.covariance, row)
        drift = row @ self.follow + _frequency_slope(tau, self.omega_rad_per_s, self.coefficients)[0]
        stds: NDArray[np.float64] = np.sqrt(noise + (drift * self.omega_std_rad_per_s) ** 2)
        return stds


def fit_prefault(
    times_s: NDArray[np.float64],
    signals: NDArray[np.float64],
    *,
    t_ref_s: float,
    frequency_hz: float,
    refine: bool = True,
    fallback_hz: float | None = None,
    n_currents: int | None = None,
) -> Prefault:
    """Fit the steady state.

    Parameters
    ----------
    times_s : ndarray of float64, shape (n,)
        [s]
    signals : ndarray of float64, shape (k, n)
        Channels that share the frequency.
    t_ref_s : float
        Origin of the phasors. [s]
    frequency_hz : float
        Frequency, a first guess when it is refined. [Hz]
    refine : bool
        Whether the frequency is estimated; a window under a cycle cannot tell it.
    fallback_hz : float, optional
        Frequency to take where no channel has a sinusoid to tell it from; `frequency_hz` when left out. [Hz]
    n_currents : int, optional
        The first so many channels are behind one kind of filter, the rest behind another; all behind one when
        left out.

    Returns
    -------
    Prefault
        With a standard uncertainty of the frequency of zero where it was not estimated.

    Raises
    ------
    ValueError
        If there are fewer samples than coefficients.
    """
    tau = times_s - t_ref_s
    span_s = float(times_s[-1] - times_s[0])
    rate_hz = (len(times_s) - 1) / span_s if span_s > 0 else 0.0
    cycles = span_s * frequency_hz
    harmonics = (
        tuple(h for h in _HARMONICS if h * frequency_hz < 0.4 * rate_hz)
        if cycles >= _HARMONICS_FROM_CYCLES
        else ()
    )
    if len(times_s) < 3 + 2 * len(harmonics) + 2:
        harmonics = ()
    if len(times_s) < 5:
        raise ValueError("a steady state needs at least 5 samples")
    frequency_std_hz = 0.0
    if refine and not _frequency_weights(tau, signals, frequency_hz, harmonics).any():
        refine, frequency_hz = False, fallback_hz or frequency_hz
    if refine:
        # Weighted by each channel's own noise: an idle channel says nothing of the frequency. Twice, since
        # the noise is what a fit at a nearly right frequency leaves. The harmonics come second: they would
        # pull the frequency by many times its uncertainty, and cost.
        for orders in ((), harmonics):
            weights = _frequency_weights(tau, signals, frequency_hz, harmonics)
            frequency_hz = _refined(tau, signals, weights, frequency_hz, span_s, orders)
    omega = 2.0 * np.pi * frequency_hz
    basis = _basis(tau, omega, harmonics)
    coefficients: NDArray[np.float64] = np.linalg.lstsq(basis, signals.T, rcond=None)[0].astype(np.float64)
    residual = signals.T - basis @ coefficients
    freedom = max(len(tau) - basis.shape[1], 1)
    noise = np.sqrt(np.sum(residual**2, axis=0) / freedom)
    noise = np.maximum(noise, _noise_floor(signals))
    in_band = noise * _gains(residual.T, omega * span_s / max(len(tau) - 1, 1), n_currents or len(signals))
    inverse = np.linalg.pinv(basis.T @ basis)
    slope = _frequency_slope(tau, omega, coefficients)
    follow = -inverse @ (basis.T @ slope)  # what the linear fit makes of a change of frequency, (p, k)
    if refine:
        unexplained = slope + basis @ follow
        information = float(np.sum(np.sum(unexplained**2, axis=0) / in_band**2))
        frequency_std_hz = 1.0 / (2.0 * np.pi * np.sqrt(information)) if information > 0 else 0.0
    return Prefault(
        t_ref_s=t_ref_s,
        window_s=(float(times_s[0]), float(times_s[-1])),
        frequency_hz=frequency_hz,
        frequency_std_hz=frequency_std_hz,
        coefficients=coefficients,
        covariance=in_band[:, None, None] ** 2 * inverse,
        follow=follow,
        noise_rms=noise,
        in_band_rms=in_band,
        harmonics=harmonics,
        n_samples=len(tau),
    )


def _gains(residual: NDArray[np.float64], phase_step_rad: float, n_currents: int) -> NDArray[np.float64]:
    gains = np.ones(len(residual))
    for part in (slice(0, n_currents), slice(n_currents, None)):
        if residual[part].size:
            # The fit itself has taken noise out of the band: less of it there than elsewhere is not believed.
            gains[part] = max(1.0, in_band_gain(residual[part], phase_step_rad=phase_step_rad))
    return gains


def _noise_floor(signals: NDArray[np.float64]) -> NDArray[np.float64]:
    """Least noise that is believed: simulated records have none at all, nor has a channel of zeros."""
    floor: NDArray[np.float64] = 1e-9 * np.abs(signals).max(axis=1)
    floor[floor == 0.0] = 1e-9
    return floor


def _frequency_weights(
    tau: NDArray[np.float64], signals: NDArray[np.float64], frequency_hz: float, harmonics: tuple[int, ...]
) -> NDArray[np.float64]:
    """Return one over each channel's noise power, zero for a channel without a sinusoid to speak of."""
    basis = _basis(tau, 2.0 * np.pi * frequency_hz, harmonics)
    coefficients = np.linalg.lstsq(basis, signals.T, rcond=None)[0]
    residual = signals.T - basis @ coefficients
    noise = np.maximum(np.sqrt(np.mean(residual**2, axis=0)), _noise_floor(signals))
    amplitude = np.hypot(coefficients[1], coefficients[2])
    telling = amplitude > _TELLING_SIGMAS * noise * np.sqrt(2.0 / len(tau))
    weights: NDArray[np.float64] = np.where(telling, noise**-2.0, 0.0)
    return weights


def _refined(
    tau: NDArray[np.float64],
    signals: NDArray[np.float64],
    weights: NDArray[np.float64],
    guess_hz: float,
    span_s: float,
    harmonics: tuple[int, ...],
) -> float:
    """Return the frequency of the least weighted sum of squares near a guess."""
    half_width_hz = min(0.4 / span_s, 5.0)
    low = max(guess_hz - half_width_hz, FREQUENCY_RANGE_HZ[0])
    high = min(guess_hz + half_width_hz, FREQUENCY_RANGE_HZ[1])
    if low >= high:
        return guess_hz

    def misfit(frequency_hz: float) -> float:
        basis, _ = np.linalg.qr(_basis(tau, 2.0 * np.pi * frequency_hz, harmonics))
        projected = basis.T @ signals.T
        return float(-np.sum(weights * np.sum(projected**2, axis=0)))

    found = minimize_scalar(misfit, bounds=(low, high), method="bounded", options={"xatol": 1e-7})
    return float(found.x)


def coarse_frequency(
    times_s: NDArray[np.float64], signals: NDArray[np.float64], *, nominal_hz: float
) -> float:
    """Return the power frequency of signals, on a grid fine enough for the refinement to start from.

    Parameters
    ----------
    times_s : ndarray of float64, shape (n,)
        [s]
    signals : ndarray of float64, shape (k, n)
    nominal_hz : float
        Returned where nothing alternates. [Hz]
    """
    span_s = float(times_s[-1] - times_s[0])
    if span_s <= 0:
        return nominal_hz
    step_hz = min(0.25 / span_s, 1.0)
    grid_hz = np.arange(FREQUENCY_RANGE_HZ[0], FREQUENCY_RANGE_HZ[1] + step_hz, step_hz)
    centred = signals - signals.mean(axis=1, keepdims=True)
    power = np.sum(centred**2, axis=1)
    alive = power > 0
    if not alive.any():
        return nominal_hz
    centred = centred[alive] / np.sqrt(power[alive])[:, None]
    waves = np.exp(-2j * np.pi * grid_hz[:, None] * (times_s - times_s[0])) @ centred.T
    strength = np.sum(np.abs(waves) ** 2, axis=1)
    return float(grid_hz[int(np.argmax(strength))])


def _frequency_slope(
    tau: NDArray[np.float64], omega: float, coefficients: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return d(fundamental)/d(omega) of every channel, shape (n, k)."""
    phase = omega * tau
    return np.asarray(
        tau[:, None] * (-np.sin(phase)[:, None] * coefficients[1] + np.cos(phase)[:, None] * coefficients[2])
    )


def _basis(tau: NDArray[np.float64], omega: float, harmonics: tuple[int, ...]) -> NDArray[np.float64]:
    columns = [np.ones_like(tau)]
    for order in (1, *harmonics):
        columns += [np.cos(order * omega * tau), np.sin(order * omega * tau)]
    return np.column_stack(columns)
