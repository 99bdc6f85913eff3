"""Phasors with their uncertainty, and what is computed from them.

A phasor X of a quantity x is such that ``x(t) = sqrt(2) Re(X exp(j omega (t - t_ref)))``: its magnitude is a
root-mean-square value.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

SQRT2 = math.sqrt(2.0)


@dataclass(frozen=True, slots=True, eq=False)
class Phasor:
    """A complex quantity and its uncertainty.

    Attributes
    ----------
    value : complex
    own_covariance : ndarray of float64, shape (2, 2)
        Of real and imaginary part, from noise of its own.
    drift : complex
        How the value moves with one standard uncertainty of the frequency, which all phasors of an event
        share.
    """

    value: complex
    own_covariance: NDArray[np.float64]
    drift: complex = 0j

    @classmethod
    def from_parts(
        cls,
        cos: float,
        sin: float,
        covariance: NDArray[np.float64],
        drift: tuple[float, float] = (0.0, 0.0),
    ) -> Phasor:
        """Return the phasor of ``cos*cos(omega tau) + sin*sin(omega tau)``, given the parts' uncertainty."""
        flip = np.diag([1.0, -1.0]) / SQRT2
        return cls(
            complex(cos, -sin) / SQRT2, flip @ covariance @ flip.T, complex(drift[0], -drift[1]) / SQRT2
        )

    @property
    def covariance(self) -> NDArray[np.float64]:
        """Covariance of real and imaginary part, all contributions together, shape (2, 2)."""
        shared = np.array([self.drift.real, self.drift.imag])
        total: NDArray[np.float64] = self.own_covariance + np.outer(shared, shared)
        return total

    @property
    def magnitude(self) -> float:
        """Magnitude, RMS."""
        return abs(self.value)

    @property
    def magnitude_std(self) -> float:
        """Standard uncertainty of the magnitude, to first order."""
        if self.value == 0:
            return float(np.sqrt(np.trace(self.covariance) / 2))
        return self._along(np.array([self.value.real, self.value.imag]) / abs(self.value))

    @property
    def angle_deg(self) -> float:
        """Angle in (-180, 180]. [deg]"""
        return degrees_of(self.value)

    @property
    def angle_std_deg(self) -> float:
        """Standard uncertainty of the angle, to first order. [deg]"""
        if self.value == 0:
            return 180.0
        direction = np.array([-self.value.imag, self.value.real]) / abs(self.value) ** 2
        return math.degrees(self._along(direction))

    def is_significant(self, sigmas: float) -> bool:
        """Whether the magnitude exceeds so many times its standard uncertainty."""
        return self.magnitude > sigmas * math.sqrt(float(np.trace(self.covariance)) / 2)

    def over(self, other: Phasor) -> Phasor:
        """Return the quotient of two whose noises are independent; to first order."""
        quotient = self.value / other.value
        inverse, turned = 1.0 / other.value, -quotient / other.value
        to, of = _matrix(inverse), _matrix(turned)
        covariance = to @ self.own_covariance @ to.T + of @ other.own_covariance @ of.T
        return Phasor(quotient, covariance, inverse * self.drift + turned * other.drift)

    def _along(self, direction: NDArray[np.float64]) -> float:
        return math.sqrt(max(float(direction @ self.covariance @ direction), 0.0))


def combine(factors: Sequence[complex], phasors: Sequence[Phasor]) -> Phasor:
    """Return the sum of factors times phasors whose noises are independent of each other."""
    value = drift = 0j
    covariance = np.zeros((2, 2))
    for factor, phasor in zip(factors, phasors, strict=True):
        matrix = _matrix(factor)
        value += factor * phasor.value
        drift += factor * phasor.drift
        covariance = covariance + matrix @ phasor.own_covariance @ matrix.T
    return Phasor(value, covariance, drift)


def degrees_of(value: complex) -> float:
    """Return the angle of a complex number in (-180, 180]. [deg]"""
    return wrapped_deg(math.degrees(math.atan2(value.imag, value.real)))


def wrapped_deg(angle_deg: float) -> float:
    """Return the angle brought into (-180, 180]. [deg]"""
    wrapped = math.remainder(angle_deg, 360.0)
    return 180.0 if wrapped == -180.0 else wrapped


def _matrix(factor: complex) -> NDArray[np.float64]:
    """Multiplication by a complex number as a matrix on (real, imaginary)."""
    return np.array([[factor.real, -factor.imag], [factor.imag, factor.real]])
