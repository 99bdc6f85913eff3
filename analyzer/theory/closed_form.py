r"""The current after a fault as a formula: one sinusoid and any number of decaying exponentials.

.. math:: i(t) = c\cos\omega t + s\sin\omega t + \sum_k A_k e^{-\lambda_k t}

with t counted from inception. A single RL loop has one exponential; the phase currents of a
double-phase-to-ground fault have two. The decay rate :math:`\lambda = R/L` is used throughout and never its
inverse, so that a loop without resistance is an ordinary case.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import exprel

from analyzer.errors import FaultassayError


class TheoryError(FaultassayError, ValueError):
    """A value for which the formulas have no meaning, such as a negative resistance."""


def exponential_terms(offset_a: ArrayLike, decay_rate_per_s: ArrayLike) -> list[tuple[float, float]]:
    """Pair every offset with its decay rate.

    Parameters
    ----------
    offset_a : float or array_like of float, shape (k,)
        Value of each exponential at inception. [A]
    decay_rate_per_s : float or array_like of float, shape (k,)
        Its decay rate. [1/s]

    Returns
    -------
    list of (float, float)
        k pairs (offset, decay rate).

    Raises
    ------
    TheoryError
        If the two differ in length or hold something that is not a finite number.
    """
    offsets = np.atleast_1d(np.asarray(offset_a, dtype=np.float64))
    rates = np.atleast_1d(np.asarray(decay_rate_per_s, dtype=np.float64))
    if offsets.ndim != 1 or offsets.shape != rates.shape:
        raise TheoryError(
            "unpaired-exponentials",
            f"offsets of shape {offsets.shape} and decay rates of shape {rates.shape} do not pair up",
            where="offset_a, decay_rate_per_s",
            hint="give one decay rate for each offset",
        )
    if not (np.isfinite(offsets).all() and np.isfinite(rates).all()):
        raise TheoryError(
            "not-finite",
            "an offset or a decay rate is not a finite number",
            where="offset_a, decay_rate_per_s",
        )
    return list(zip(offsets.tolist(), rates.tolist(), strict=True))


def check_omega(omega_rad_per_s: float) -> float:
    """Return the angular frequency, or raise `TheoryError` where it is not positive and finite."""
    if not 0 < omega_rad_per_s < math.inf:
        raise TheoryError(
            "no-frequency", f"the angular frequency is {omega_rad_per_s} rad/s", hint="it must be positive"
        )
    return omega_rad_per_s


def rl_current(
    t_s: ArrayLike,
    *,
    cos_a: float,
    sin_a: float,
    offset_a: ArrayLike,
    decay_rate_per_s: ArrayLike,
    omega_rad_per_s: float,
    time_derivative: int = 0,
) -> NDArray[np.float64]:
    r"""Return the current of the model, or one of its derivatives with respect to time.

    Parameters
    ----------
    t_s : array_like of float, any shape
        Time after inception; the formula itself also continues to negative times. [s]
    cos_a, sin_a : float
        Amplitudes (not RMS) of the cosine and the sine part; the cosine part is the value of the sinusoid
        at inception. [A]
    offset_a, decay_rate_per_s : float or array_like of float, shape (k,)
        The exponentials, any number of them, none included. [A], [1/s]
    omega_rad_per_s : float
        Angular frequency. [rad/s]
    time_derivative : int
        0 for the current, n > 0 for its n-th derivative.

    Returns
    -------
    ndarray of float, shape of `t_s`
        Instantaneous current. [A/s**n]

    Raises
    ------
    TheoryError
        If offsets and decay rates do not pair up.

    Examples
    --------
    A fault at voltage zero on a pure reactance is fully offset, and doubles after half a cycle:

    >>> model = {"cos_a": -1.0, "sin_a": 0.0, "offset_a": 1.0, "decay_rate_per_s": 0.0}
    >>> rl_current([0.0, 0.01], **model, omega_rad_per_s=100 * math.pi).tolist()
    [0.0, 2.0]
    """
    t = np.asarray(t_s, dtype=np.float64)
    cos_n, sin_n = _differentiated(cos_a, sin_a, time_derivative)
    angle = omega_rad_per_s * t
    current = omega_rad_per_s**time_derivative * (cos_n * np.cos(angle) + sin_n * np.sin(angle))
    for offset, rate in exponential_terms(offset_a, decay_rate_per_s):
        current = current + offset * (-rate) ** time_derivative * np.exp(-rate * t)
    return np.asarray(current)


def rl_current_gradient(
    t_s: ArrayLike,
    *,
    cos_a: float,
    sin_a: float,
    offset_a: ArrayLike,
    decay_rate_per_s: ArrayLike,
    omega_rad_per_s: float,
    time_derivative: int = 0,
) -> NDArray[np.float64]:
    """Return the derivatives of `rl_current` with respect to its parameters.

    The derivative with respect to the inception instant is not among them: it is minus that with respect to
    time, which `rl_current` gives.

    Parameters
    ----------
    t_s, cos_a, sin_a, offset_a, decay_rate_per_s, omega_rad_per_s, time_derivative
        As for `rl_current`.

    Returns
    -------
    ndarray of float, shape (*shape of t_s, 3 + 2 k)
        In the last axis: cos_a, sin_a, the k offsets, the k decay rates, omega_rad_per_s.

    Raises
    ------
    TheoryError
        If offsets and decay rates do not pair up.
    """
    t = np.asarray(t_s, dtype=np.float64)
    n, omega = time_derivative, omega_rad_per_s
    terms = exponential_terms(offset_a, decay_rate_per_s)
    cosine, sine = np.cos(omega * t), np.sin(omega * t)
    cos_n, sin_n = _differentiated(cos_a, sin_a, n)
    of_cos, of_sin = _differentiated(1.0, 0.0, n), _differentiated(0.0, 1.0, n)

    by_omega = omega**n * t * (sin_n * cosine - cos_n * sine)
    if n > 0:
        by_omega = by_omega + n * omega ** (n - 1) * (cos_n * cosine + sin_n * sine)
    by_offset, by_rate = [], []
    for offset, rate in terms:
        decay = np.exp(-rate * t)
        by_offset.append((-rate) ** n * decay)
        shrink = -t * (-rate) ** n
        if n > 0:
            shrink = shrink - n * (-rate) ** (n - 1)
        by_rate.append(offset * shrink * decay)
    columns = [
        omega**n * (of_cos[0] * cosine + of_cos[1] * sine),
        omega**n * (of_sin[0] * cosine + of_sin[1] * sine),
        *by_offset,
        *by_rate,
        by_omega,
    ]
    return np.stack(columns, axis=-1)


def offset_current(
    t_s: ArrayLike, *, offset_a: ArrayLike, decay_rate_per_s: ArrayLike
) -> NDArray[np.float64]:
    """Return the offset, the sum of the exponentials alone.

    Parameters
    ----------
    t_s : array_like of float, any shape
        Time after inception. [s]
    offset_a, decay_rate_per_s : float or array_like of float, shape (k,)
        Initial values and decay rates. [A], [1/s]

    Returns
    -------
    ndarray of float, shape of `t_s`
        Offset, with its sign. [A]

    Raises
    ------
    TheoryError
        If offsets and decay rates do not pair up.
    """
    return rl_current(
        t_s, cos_a=0.0, sin_a=0.0, offset_a=offset_a, decay_rate_per_s=decay_rate_per_s, omega_rad_per_s=0.0
    )


def asymmetrical_rms(
    t_s: ArrayLike, *, symmetrical_rms_a: float, offset_a: ArrayLike, decay_rate_per_s: ArrayLike
) -> NDArray[np.float64]:
    r"""Return the asymmetrical RMS current, the offset taken as it stands at each instant.

    .. math:: I_{asym}(t) = \sqrt{I^2 + i_{dc}(t)^2}

    Parameters
    ----------
    t_s : array_like of float, any shape
        Time after inception. [s]
    symmetrical_rms_a : float
        RMS value of the sinusoid. [A]
    offset_a, decay_rate_per_s : float or array_like of float, shape (k,)
        The exponentials. [A], [1/s]

    Returns
    -------
    ndarray of float, shape of `t_s`
        Asymmetrical RMS current. [A]

    Raises
    ------
    TheoryError
        If offsets and decay rates do not pair up.

    Notes
    -----
    Common practice. The offset is taken as constant over the cycle, so this is not the root of a mean over
    any interval; for that see `joule_integral`.
    """
    offset = offset_current(t_s, offset_a=offset_a, decay_rate_per_s=decay_rate_per_s)
    return np.asarray(np.hypot(symmetrical_rms_a, offset))


def joule_integral(
    start_s: ArrayLike,
    end_s: ArrayLike,
    *,
    cos_a: float,
    sin_a: float,
    offset_a: ArrayLike,
    decay_rate_per_s: ArrayLike,
    omega_rad_per_s: float,
) -> NDArray[np.float64]:
    r"""Return :math:`\int i^2\,dt` of the model between two instants, in closed form.

    Parameters
    ----------
    start_s, end_s : array_like of float, shapes that broadcast
        Limits, counted from inception. [s]
    cos_a, sin_a, offset_a, decay_rate_per_s, omega_rad_per_s
        As for `rl_current`.

    Returns
    -------
    ndarray of float, broadcast shape
        Joule integral; negative where `end_s` is before `start_s`, as an integral is. [A²s]

    Raises
    ------
    TheoryError
        If offsets and decay rates do not pair up, or the frequency is not positive.

    Notes
    -----
    The square is multiplied out and every product integrated by itself, so the rounding error is some 1e-15
    of (largest current)² times the duration, whatever remains of the sum.
    """
    omega = check_omega(omega_rad_per_s)
    # In order of time, so that no exponential of a long step backwards overflows.
    start, end = np.minimum(start_s, end_s), np.maximum(start_s, end_s)
    duration, centre = end - start, omega * (start + end)
    terms = exponential_terms(offset_a, decay_rate_per_s)

    # Differences of sines and cosines as products, which keep their digits over short durations.
    ripple = (cos_a**2 - sin_a**2) * np.cos(centre) + 2 * cos_a * sin_a * np.sin(centre)
    total = (cos_a**2 + sin_a**2) / 2 * duration + ripple * np.sin(omega * duration) / (2 * omega)

    for offset, rate in terms:
        p, q = -(rate * cos_a + omega * sin_a), omega * cos_a - rate * sin_a
        at_end = np.exp(-rate * end) * (p * np.cos(omega * end) + q * np.sin(omega * end))
        at_start = np.exp(-rate * start) * (p * np.cos(omega * start) + q * np.sin(omega * start))
        total = total + 2 * offset * (at_end - at_start) / (rate**2 + omega**2)
    for offset, rate in terms:
        for other_offset, other_rate in terms:
            both = rate + other_rate
            # exprel(x) = (exp(x) - 1)/x, which has no hole at x = 0.
            decay = duration * np.exp(-both * start) * exprel(-both * duration)
            total = total + offset * other_offset * decay
    return np.asarray(np.where(np.less(end_s, start_s), -total, total))


def _differentiated(cos_a: float, sin_a: float, times: int) -> tuple[float, float]:
    """Cosine and sine part after differentiating with respect to the angle so many times."""
    return [(cos_a, sin_a), (sin_a, -cos_a), (-cos_a, -sin_a), (-sin_a, cos_a)][times % 4]
