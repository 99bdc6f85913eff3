"""The recorder's converter: noise in front of it, its range and resolution."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.signal import lfilter

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.checks import need_not_negative, need_positive

Real = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Converter:
    """Resolution and range, in primary terms.

    Parameters
    ----------
    bits : int
        2 to 32, sign included.
    current_range_a, voltage_range_v : float
        Largest instantaneous value before clipping. [A], [V]

    Raises
    ------
    ForgeError
        If a value is outside its range.
    """

    bits: int
    current_range_a: float
    voltage_range_v: float

    def __post_init__(self) -> None:
        if not 2 <= self.bits <= 32:
            raise ForgeError("bad-value", f"{self.bits} is not between 2 and 32", where="bits")
        need_positive(current_range_a=self.current_range_a, voltage_range_v=self.voltage_range_v)

    @property
    def largest_count(self) -> int:
        """Positive end of the range in counts; the negative one is its opposite."""
        return int(2 ** (self.bits - 1) - 1)


def quantise(samples: Real, *, full_scale: ArrayLike, largest_count: int) -> tuple[NDArray[np.int64], Real]:
    """Round to counts and clip at the ends of the range.

    Parameters
    ----------
    samples : ndarray, shape (channels, n)
    full_scale : array_like, shape (channels,)
        Value of the largest count, for each channel.
    largest_count : int

    Returns
    -------
    counts : ndarray of int, shape (channels, n)
    value_per_count : ndarray, shape (channels,)
    """
    step = np.asarray(full_scale, dtype=float) / largest_count
    counts = np.clip(np.rint(samples / step[:, None]), -largest_count, largest_count)
    return counts.astype(np.int64), step


@dataclass(frozen=True, slots=True, kw_only=True)
class Noise:
    """Gaussian noise of the channels, independent between them.

    Parameters
    ----------
    current_rms_a, voltage_rms_v : float
        RMS values. [A], [V]
    lag1_autocorrelation : float
        0 is white; else first-order autoregressive, between -1 and 1.

    Raises
    ------
    ForgeError
        If a value is outside its range.
    """

    current_rms_a: float = 0.0
    voltage_rms_v: float = 0.0
    lag1_autocorrelation: float = 0.0

    def __post_init__(self) -> None:
        need_not_negative(current_rms_a=self.current_rms_a, voltage_rms_v=self.voltage_rms_v)
        if not abs(self.lag1_autocorrelation) < 1:
            raise ForgeError("bad-value", "must lie between -1 and 1", where="lag1_autocorrelation")

    @classmethod
    def at_ratio(
        cls,
        snr_db: float,
        *,
        current_rms_a: float,
        voltage_rms_v: float,
        lag1_autocorrelation: float = 0.0,
    ) -> Noise:
        """Noise at a signal-to-noise ratio, 20 log10 of signal RMS over noise RMS.

        Parameters
        ----------
        snr_db : float
        current_rms_a, voltage_rms_v : float
            RMS of the signals that the ratio is stated for.
        """
        if not math.isfinite(snr_db):
            raise ForgeError("bad-value", f"{snr_db} is not finite", where="snr_db")
        share = 10 ** (-snr_db / 20)
        return cls(
            current_rms_a=share * current_rms_a,
            voltage_rms_v=share * voltage_rms_v,
            lag1_autocorrelation=lag1_autocorrelation,
        )


def draw_noise(
    rms: ArrayLike, *, n_samples: int, lag1_autocorrelation: float, rng: np.random.Generator
) -> Real:
    """Draw stationary noise.

    Parameters
    ----------
    rms : array_like, shape (channels,)
    n_samples : int
    lag1_autocorrelation : float
    rng : numpy.random.Generator

    Returns
    -------
    ndarray, shape (channels, n_samples)
    """
    level = np.asarray(rms, dtype=float)[:, None]
    white = rng.standard_normal((level.shape[0], n_samples))
    if lag1_autocorrelation:
        innovation = math.sqrt(1 - lag1_autocorrelation**2)
        # The first sample already has the stationary spread, so the noise has no start of its own.
        white[:, 1:] *= innovation
        white = lfilter([1.0], [1.0, -lag1_autocorrelation], white, axis=-1)
    return level * white
