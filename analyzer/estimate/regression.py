"""X/R by regression of the loop's equation on the waveforms themselves.

``e(t) = R i + L di/dt`` integrates to ``L i(t) = E(t) - R J(t) + constant`` with E and J the integrals of the
driving voltage and of the current: no derivative is taken of noisy samples, steady state and transient count
alike. Divided by L the noise of i(t) stays white, so that ordinary least squares in 1/L, R/L and a constant
weighs it rightly; what noise does to J is smaller by the number of samples in a radian.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline

from analyzer.waveform.phasors import SQRT2, Phasor


@dataclass(frozen=True, slots=True, kw_only=True)
class Regression:
    """R/L of a loop by its waveforms: ``decay_rate_per_s`` and its standard uncertainty. [1/s]"""

    decay_rate_per_s: float
    std_per_s: float


def regress_loop(
    times_s: NDArray[np.float64],
    currents: NDArray[np.float64],
    *,
    driving: Sequence[Phasor],
    omega_rad_per_s: float,
    omega_std_rad_per_s: float,
    t_ref_s: float,
    noise_rms: NDArray[np.float64],
    zero_std: NDArray[np.float64],
) -> Regression | None:
    """Return R/L by regression.

    Parameters
    ----------
    times_s : ndarray of float64, shape (n,)
        Within the fault. [s]
    currents : ndarray of float64, shape (k, n)
        The loop's currents, the converter's zero taken off. [A]
    driving : sequence of k Phasor
        Electromotive force of each, origin at `t_ref_s`. [V]
    omega_rad_per_s, omega_std_rad_per_s : float
        [rad/s]
    t_ref_s : float
        [s]
    noise_rms, zero_std : ndarray of float64, shape (k,)
        Noise of each current, and the standard uncertainty of its zero. [A]

    Returns
    -------
    Regression or None
        None where there is no driving voltage.
    """
    tau = times_s - t_ref_s
    integrals = CubicSpline(times_s, currents, axis=1).antiderivative()(times_s)
    emf = np.array([phasor.value for phasor in driving])
    if np.any(np.abs(emf) == 0):
        return None

    def solve(
        emf: NDArray[np.complex128], omega: float, zero: NDArray[np.float64]
    ) -> tuple[float, float, float]:
        rotation = np.exp(1j * omega * tau)
        driven = SQRT2 * (emf[:, None] * rotation / (1j * omega)).real
        shifted = integrals - zero[:, None] * tau
        k, n = currents.shape
        design = np.zeros((k * n, 2 + k))
        design[:, 0] = (driven / noise_rms[:, None]).ravel()
        design[:, 1] = (-shifted / noise_rms[:, None]).ravel()
        for j in range(k):
            design[j * n : (j + 1) * n, 2 + j] = 1.0 / noise_rms[j]
        target = ((currents - zero[:, None]) / noise_rms[:, None]).ravel()
        # Columns to one length: volt-seconds and coulombs differ by many powers of ten.
        lengths = np.linalg.norm(design, axis=0)
        scaled = design / lengths
        solution = np.linalg.lstsq(scaled, target, rcond=None)[0]
        residual = target - scaled @ solution
        inverse = np.linalg.pinv(scaled.T @ scaled, hermitian=True)
        chi = max(1.0, float(residual @ residual) / max(k * n - 2 - k, 1))
        return (
            float(solution[1] / lengths[1]),
            float(inverse[1, 1] / lengths[1] ** 2) * chi,
            float(solution[0] / lengths[0]),
        )

    no_shift = np.zeros(len(currents))
    rate, variance, inverse_l = solve(emf, omega_rad_per_s, no_shift)
    if inverse_l <= 0:
        return None
    for j, phasor in enumerate(driving):
        step = 1e-4 * abs(emf[j])
        gradient = np.empty(2)
        for part, direction in enumerate((1.0, 1j)):
            moved = emf.copy()
            moved[j] += step * direction
            gradient[part] = (solve(moved, omega_rad_per_s, no_shift)[0] - rate) / step
        variance += float(gradient @ phasor.own_covariance @ gradient)
        moved_zero = no_shift.copy()
        moved_zero[j] = zero_std[j]
        variance += (solve(emf, omega_rad_per_s, moved_zero)[0] - rate) ** 2
    if omega_std_rad_per_s > 0:
        drifted = emf + np.array([phasor.drift for phasor in driving])
        variance += (solve(drifted, omega_rad_per_s + omega_std_rad_per_s, no_shift)[0] - rate) ** 2
    return Regression(decay_rate_per_s=rate, std_per_s=math.sqrt(variance))
