"""Coloured noise: how much of it lies where the signal is.

An anti-alias filter takes the noise of high frequencies away and leaves that of low ones, among which the
power frequency and the decaying offset lie. Least squares is still nearly the best estimator, since the noise
is flat across the narrow band that the signal takes, but its uncertainty is that of white noise of the
density found in this band.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import solve_toeplitz

_MAX_ORDER = 8
_SAMPLES_PER_ORDER = 12
_LIMITS = (0.25, 30.0)  # beyond, the residual is structure rather than noise


def in_band_gain(residual: NDArray[np.float64], *, phase_step_rad: float) -> float:
    """Return the factor from the noise's RMS to that of white noise of its density at the power frequency.

    Parameters
    ----------
    residual : ndarray of float64, shape (k, n)
        What is left of a fit, of channels behind filters of one kind.
    phase_step_rad : float
        Power-frequency angle from one sample to the next. [rad]

    Returns
    -------
    float
        1 for white noise.

    Notes
    -----
    Spectral density of an autoregressive model by the Yule-Walker equations (G. U. Yule, Phil. Trans. R. Soc.
    A 226, 1927), its order by Akaike's criterion. Each channel is brought to unit variance first.
    """
    rms = np.sqrt(np.mean(residual**2, axis=1))
    used = residual[rms > 0] / rms[rms > 0, None]
    if not used.size:
        return 1.0
    n = used.shape[1]
    order = min(_MAX_ORDER, n // _SAMPLES_PER_ORDER)
    if order < 1:
        return 1.0
    lags = np.array([np.mean(np.sum(used[:, : n - k] * used[:, k:], axis=1)) / n for k in range(order + 1)])
    best_score, density = 0.0, 1.0  # order zero: white
    for p in range(1, order + 1):
        weights = solve_toeplitz(lags[:p], lags[1 : p + 1])
        innovation = lags[0] - float(weights @ lags[1 : p + 1])
        if innovation <= 0:
            break
        score = used.size * np.log(innovation / lags[0]) + 2 * p
        if score < best_score:
            transfer = 1.0 - np.sum(weights * np.exp(-1j * phase_step_rad * np.arange(1, p + 1)))
            best_score, density = float(score), innovation / float(abs(transfer) ** 2)
    return float(np.clip(np.sqrt(density), *_LIMITS))
