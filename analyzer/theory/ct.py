"""Current transformers in closed form: time to saturation, flux factor, image of an offset.

The fault current is taken without load before it,

.. math:: i(t) = \\hat I [\\cos(\\omega t + \\psi) - \\cos\\psi\\, e^{-t/\\tau}]

and fluxes are in units of the peak flux that the symmetrical part alone would need, so that the saturation
flux is `ks`, the saturation voltage over the voltage of the symmetrical current on the secondary impedance.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.optimize import brentq

# Voltage zeros are bracketed on this grid. A pair of zeros closer than this changes the flux by about the
# cube of the spacing in radians, 1e-4 of the symmetrical flux, and is overlooked.
_POINTS_PER_CYCLE = 144


def _check(*, x_over_r: float, freq_hz: float, ks: float = 1.0, remanence_pu: float = 0.0) -> None:
    if not (math.isfinite(x_over_r) and x_over_r > 0):
        raise ValueError(f"x_over_r must be positive and finite, not {x_over_r}")
    if not (math.isfinite(freq_hz) and freq_hz > 0):
        raise ValueError(f"freq_hz must be positive and finite, not {freq_hz}")
    if not ks > 0:
        raise ValueError(f"ks must be positive, not {ks}")
    if not -1 < remanence_pu < 1:
        raise ValueError(f"remanence_pu must lie between -1 and 1, not {remanence_pu}")


def flux_pu(
    t: ArrayLike,
    *,
    x_over_r: float,
    freq_hz: float,
    current_angle_deg: float = 180.0,
    burden_angle_deg: float = 0.0,
) -> NDArray[np.float64]:
    r"""Core flux of an ideal current transformer (no exciting current) in units of the symmetrical peak flux.

    .. math:: \lambda(t) = \cos\beta\,[\sin(\omega t+\psi)-\sin\psi-\omega\tau\cos\psi(1-e^{-t/\tau})]
              + \sin\beta\,[\cos(\omega t+\psi)-\cos\psi\,e^{-t/\tau}]

    Parameters
    ----------
    t : array_like, shape (...)
        Time after inception, not negative. [s]
    x_over_r : float
        Of the fault loop, at `freq_hz`; the time constant is `x_over_r / (2 pi freq_hz)`.
    freq_hz : float
        Power frequency. [Hz]
    current_angle_deg : float
        Angle psi of the symmetrical current at inception. 180 gives the whole offset, positive. [deg]
    burden_angle_deg : float
        Angle beta of the secondary impedance, winding included; 0 is resistive. [deg]

    Returns
    -------
    ndarray, shape (...)
        Flux without remanence. [1]

    Raises
    ------
    ValueError
        If `x_over_r` or `freq_hz` is not positive.

    References
    ----------
    Integral of the secondary voltage, own derivation from the RL closed form (Grainger and Stevenson,
    Power System Analysis, ch. 10, from memory).
    """
    _check(x_over_r=x_over_r, freq_hz=freq_hz)
    u = 2 * np.pi * freq_hz * np.asarray(t, dtype=float)
    psi, beta = math.radians(current_angle_deg), math.radians(burden_angle_deg)
    decay = np.exp(-u / x_over_r)
    integral = np.sin(u + psi) - math.sin(psi) + x_over_r * math.cos(psi) * np.expm1(-u / x_over_r)
    current = np.cos(u + psi) - math.cos(psi) * decay
    return np.asarray(math.cos(beta) * integral + math.sin(beta) * current)


def time_to_saturation_s(
    *,
    x_over_r: float,
    ks: float,
    freq_hz: float,
    remanence_pu: float = 0.0,
    current_angle_deg: float = 180.0,
    burden_angle_deg: float = 0.0,
) -> float:
    """First instant after inception at which the flux reaches the saturation flux, AC ripple included.

    Parameters
    ----------
    x_over_r, freq_hz, current_angle_deg, burden_angle_deg : float
        As for `flux_pu`.
    ks : float
        Saturation flux over the symmetrical peak flux, that is saturation voltage over If·|Z|.
    remanence_pu : float
        Flux before the fault in units of the saturation flux, signed like the flux; between -1 and 1.

    Returns
    -------
    float
        Time after inception; `inf` if the flux never gets there. [s]

    Raises
    ------
    ValueError
        If an argument is outside its range.

    Notes
    -----
    Between zeros of the secondary voltage the flux is monotone, so the zeros are found first and the crossing
    is bracketed between two of them: no crossing that only just happens is missed. The exciting current,
    which delays the crossing a little, is neglected.

    References
    ----------
    First principles; IEEE C37.110-2007 has a corrigendum on its time-to-saturation equations.
    """
    _check(x_over_r=x_over_r, freq_hz=freq_hz, ks=ks, remanence_pu=remanence_pu)
    omega = 2 * math.pi * freq_hz
    tau = x_over_r / omega
    psi, beta = math.radians(current_angle_deg), math.radians(burden_angle_deg)

    def flux(t: float) -> float:
        value = flux_pu(
            t,
            x_over_r=x_over_r,
            freq_hz=freq_hz,
            current_angle_deg=current_angle_deg,
            burden_angle_deg=burden_angle_deg,
        )
        return remanence_pu * ks + float(value)

    def voltage(t: ArrayLike) -> NDArray[np.float64]:
        u = omega * np.asarray(t, dtype=float)
        offset = math.cos(psi) * (math.cos(beta) - math.sin(beta) / x_over_r) * np.exp(-u / x_over_r)
        return np.asarray(np.cos(u + psi + beta) - offset)

    # After forty time constants the exponential is below rounding and the flux repeats from cycle to cycle;
    # where the mean flux alone gets there with three units to spare, more than the ripple, the crossing lies
    # before that.
    share = (ks * (1 + abs(remanence_pu)) + 3) / (x_over_r * abs(math.cos(psi) * math.cos(beta)) + 1e-300)
    horizon = (-math.log1p(-share) * tau if share < 1 else 40 * tau) + 2 / freq_hz
    grid = np.linspace(0.0, horizon, math.ceil(horizon * freq_hz * _POINTS_PER_CYCLE) + 1)
    volts = voltage(grid)
    turns = [0.0]
    for k in np.flatnonzero(np.diff(np.signbit(volts))):
        turns.append(_root(lambda t: float(voltage(t)), float(grid[k]), float(grid[k + 1])))
    turns.append(horizon)
    if abs(flux(0.0)) >= ks:
        return 0.0
    for start, end in pairwise(turns):
        if abs(flux(end)) >= ks:
            return _root(lambda t: abs(flux(t)) - ks, start, end)
    return math.inf


def _root(function: Callable[[float], float], low: float, high: float) -> float:
    return float(brentq(function, low, high, xtol=1e-13, rtol=8.9e-16))


def time_to_saturation_envelope_s(
    *, x_over_r: float, ks: float, freq_hz: float, remanence_pu: float = 0.0
) -> float:
    r"""Published envelope of the time to saturation of a fully offset current on a resistive burden.

    .. math:: t_s = -\tau \ln\!\left(1 - \frac{K_s(1-\rho) - 1}{X/R}\right)

    It puts the AC flux at its crest at every instant and so leaves its ripple out: it is never late, and for
    X/R of 15 to 40 it is 0.1 to 8 ms early. `time_to_saturation_s` integrates the flux instead.

    Parameters
    ----------
    x_over_r, ks, freq_hz : float
        As for `time_to_saturation_s`.
    remanence_pu : float
        Remanent flux in units of the saturation flux, in the direction of the offset.

    Returns
    -------
    float
        0 where the symmetrical flux alone already saturates, `inf` where the flux never gets there. [s]

    Raises
    ------
    ValueError
        If an argument is outside its range.

    References
    ----------
    IEEE C37.110 (form from memory; IEEE PC37.110-2007/Cor 1 corrects equations 18 and 19 of the 2007 print).
    """
    _check(x_over_r=x_over_r, freq_hz=freq_hz, ks=ks, remanence_pu=remanence_pu)
    rise = ks * (1 - remanence_pu) - 1
    if rise <= 0:
        return 0.0
    if rise >= x_over_r:
        return math.inf
    return -x_over_r / (2 * math.pi * freq_hz) * math.log1p(-rise / x_over_r)


def transient_flux_factor(*, x_over_r: float, burden_angle_deg: float = 0.0) -> float:
    """Limit of the flux of a fully offset current over the symmetrical peak flux, 1 + (X/R) cos(beta).

    Parameters
    ----------
    x_over_r : float
        Of the fault loop.
    burden_angle_deg : float
        Angle of the secondary impedance, winding included. [deg]

    Returns
    -------
    float
        The factor by which a core must be larger than for the symmetrical current to stay below saturation.

    Raises
    ------
    ValueError
        If `x_over_r` is not positive.

    References
    ----------
    IEEE C37.110 (from memory): saturation voltage at least If (Rct + Zb) (1 + X/R) / (1 - remanence).
    """
    _check(x_over_r=x_over_r, freq_hz=1.0)
    return 1.0 + x_over_r * math.cos(math.radians(burden_angle_deg))


def linear_ct_offset(
    t: ArrayLike, *, offset_a: float, time_constant_s: float, ct_time_constant_s: float
) -> NDArray[np.float64]:
    r"""Secondary image of a decaying offset behind an unsaturated core, referred to the primary.

    .. math:: A\,\frac{T_s e^{-t/\tau} - \tau e^{-t/T_s}}{T_s - \tau}

    Parameters
    ----------
    t : array_like, shape (...)
        Time after inception, not negative. [s]
    offset_a : float
        Primary offset A at inception. [A]
    time_constant_s : float
        Of the primary offset, tau. [s]
    ct_time_constant_s : float
        Of the secondary circuit, Ts = (Lm + L) / R. [s]

    Returns
    -------
    ndarray, shape (...)
        It crosses zero and undershoots. [A]

    Raises
    ------
    ValueError
        If a time constant is not positive.

    Notes
    -----
    Step response of a high-pass of gain one (burden inductance small against the magnetising one). Written
    with `expm1` so that equal time constants, where the limit is (1 - t/tau) e^(-t/tau), lose no digits.

    References
    ----------
    Own derivation (inverse Laplace transform of a first-order high-pass driven by an exponential).
    """
    if not (time_constant_s > 0 and ct_time_constant_s > 0):
        raise ValueError("time constants must be positive")
    times = np.asarray(t, dtype=float)
    core, decay = 1 / ct_time_constant_s, 1 / time_constant_s
    # (e^(-core t) - e^(-decay t)) / ((decay - core) t), regular where the rates are equal
    spread = abs(decay - core) * times
    mean = np.ones_like(spread)
    np.divide(-np.expm1(-spread), spread, out=mean, where=spread != 0)
    mean *= np.exp(-min(core, decay) * times)
    return np.asarray(offset_a * (np.exp(-decay * times) - core * times * mean))
