r"""A short circuit as a voltage source behind a resistance and an inductance.

With the driving voltage :math:`\sqrt2\,V\sin(\omega t+\alpha)`, t counted from inception, and :math:`i_0` the
load current at that instant, the current is

.. math:: i(t) = \sqrt2\,I\cos(\omega t+\psi) + A\,e^{-\lambda t},\quad I = V/|Z|,\quad
          \psi = \alpha-\varphi-90°,\quad A = i_0 - \sqrt2\,I\cos\psi,\quad \lambda = R/L,

the offset A being what continuity of the current through the inductance demands.

References
----------
J. J. Grainger and W. D. Stevenson, Power System Analysis, chapter 10 (from memory); C. N. Hartman,
"Understanding Asymmetry", IEEE Trans. Ind. Appl. 21(4), 1985, p. 842. The closed form was compared with a
circuit simulation; see the tests.
"""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass
from typing import TypedDict

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analyzer.theory.closed_form import (
    TheoryError,
    asymmetrical_rms,
    joule_integral,
    offset_current,
    rl_current,
    rl_current_gradient,
)
from analyzer.theory.inception_angle import WorstInception, worst_inception
from analyzer.theory.peak import CurrentPeak, peak_gradient, peak_of

__all__ = [
    "CurrentPeak",
    "RLFault",
    "TheoryError",
    "WorstInception",
    "asymmetrical_rms",
    "joule_integral",
    "offset_current",
    "peak_gradient",
    "peak_of",
    "rl_current",
    "rl_current_gradient",
    "worst_inception",
]


class _Model(TypedDict):
    """What the functions of the closed form take."""

    cos_a: float
    sin_a: float
    offset_a: float
    decay_rate_per_s: float
    omega_rad_per_s: float


@dataclass(frozen=True, slots=True, kw_only=True)
class RLFault:
    """One fault loop, from its physical parameters.

    Attributes
    ----------
    r_ohm : float
        Resistance of the whole loop, 0 or more. [ohm]
    l_h : float
        Inductance of the whole loop, positive. [H]
    frequency_hz : float
        Power frequency. [Hz]
    voltage_rms_v : float
        Driving voltage, RMS, of the loop: phase to ground or phase to phase as the fault type has it. [V]
    inception_angle_deg : float
        Point on the wave of the driving voltage: 0 is a rising zero crossing, 90 the positive crest. [deg]
    prefault_current_a : float
        Instantaneous current at inception, of the load. [A]

    Raises
    ------
    TheoryError
        If a value has no meaning. A loop without inductance is refused too: its current may jump.

    Examples
    --------
    >>> fault = RLFault.from_x_over_r(
    ...     x_over_r=15.0,
    ...     symmetrical_rms_a=10e3,
    ...     voltage_rms_v=11.5e3,
    ...     frequency_hz=50.0,
    ...     inception_angle_deg=0.0,
    ... )
    >>> round(fault.kappa, 6), round(fault.time_constant_s, 6)
    (1.814316, 0.047746)
    """

    r_ohm: float
    l_h: float
    frequency_hz: float
    voltage_rms_v: float
    inception_angle_deg: float
    prefault_current_a: float = 0.0

    def __post_init__(self) -> None:
        _check("r_ohm", self.r_ohm, self.r_ohm >= 0, "a resistance of 0 or more")
        _check("l_h", self.l_h, self.l_h > 0, "a positive inductance")
        _check("frequency_hz", self.frequency_hz, self.frequency_hz > 0, "a positive frequency")
        _check("voltage_rms_v", self.voltage_rms_v, self.voltage_rms_v > 0, "a positive voltage")
        _check("inception_angle_deg", self.inception_angle_deg, True, "an angle")
        _check("prefault_current_a", self.prefault_current_a, True, "a current")

    @classmethod
    def from_x_over_r(
        cls,
        *,
        x_over_r: float,
        symmetrical_rms_a: float,
        voltage_rms_v: float,
        frequency_hz: float,
        inception_angle_deg: float,
        prefault_current_a: float = 0.0,
    ) -> RLFault:
        """Build the loop from X/R and the symmetrical current, as a short-circuit study states them.

        Parameters
        ----------
        x_over_r : float
            At the power frequency; positive, infinite for a loop without resistance. [1]
        symmetrical_rms_a : float
            Symmetrical fault current, RMS, positive. [A]
        voltage_rms_v, frequency_hz, inception_angle_deg, prefault_current_a : float
            As for the class.

        Returns
        -------
        RLFault

        Raises
        ------
        TheoryError
            If a value has no meaning.
        """
        if not x_over_r > 0:
            raise TheoryError(
                "no-meaning",
                f"x_over_r is {x_over_r}",
                where="x_over_r",
                hint="a positive ratio; infinity for a loop without resistance",
            )
        _check("symmetrical_rms_a", symmetrical_rms_a, symmetrical_rms_a > 0, "a positive current")
        _check("voltage_rms_v", voltage_rms_v, voltage_rms_v > 0, "a positive voltage")
        _check("frequency_hz", frequency_hz, frequency_hz > 0, "a positive frequency")
        z_ohm = voltage_rms_v / symmetrical_rms_a
        return cls(
            r_ohm=z_ohm / math.hypot(1.0, x_over_r),
            l_h=z_ohm / math.hypot(1.0, 1.0 / x_over_r) / (2 * math.pi * frequency_hz),
            frequency_hz=frequency_hz,
            voltage_rms_v=voltage_rms_v,
            inception_angle_deg=inception_angle_deg,
            prefault_current_a=prefault_current_a,
        )

    @property
    def omega_rad_per_s(self) -> float:
        """Angular frequency. [rad/s]"""
        return 2 * math.pi * self.frequency_hz

    @property
    def x_ohm(self) -> float:
        """Reactance at the power frequency. [ohm]"""
        return self.omega_rad_per_s * self.l_h

    @property
    def impedance_ohm(self) -> complex:
        """Impedance R + jX. [ohm]"""
        return complex(self.r_ohm, self.x_ohm)

    @property
    def impedance_magnitude_ohm(self) -> float:
        """Magnitude of the impedance. [ohm]"""
        return abs(self.impedance_ohm)

    @property
    def impedance_angle_deg(self) -> float:
        """Angle of the impedance, by which the sinusoid lags the driving voltage. [deg]"""
        return math.degrees(cmath.phase(self.impedance_ohm))

    @property
    def x_over_r(self) -> float:
        """X/R at the power frequency, infinite without resistance. [1]"""
        return self.x_ohm / self.r_ohm if self.r_ohm > 0 else math.inf

    @property
    def decay_rate_per_s(self) -> float:
        """Decay rate R/L of the offset. [1/s]"""
        return self.r_ohm / self.l_h

    @property
    def time_constant_s(self) -> float:
        """Time constant L/R of the offset, infinite without resistance. [s]"""
        return self.l_h / self.r_ohm if self.r_ohm > 0 else math.inf

    @property
    def current_phasor_a(self) -> complex:
        """Phasor of the symmetrical current, RMS, the driving voltage being the reference. [A]"""
        return self.voltage_rms_v / self.impedance_ohm

    @property
    def symmetrical_rms_a(self) -> float:
        """Symmetrical current, RMS. [A]"""
        return self.voltage_rms_v / self.impedance_magnitude_ohm

    @property
    def symmetrical_peak_a(self) -> float:
        """Crest of the symmetrical current. [A]"""
        return math.sqrt(2) * self.symmetrical_rms_a

    @property
    def cos_a(self) -> float:
        """Cosine part of the sinusoid, which is its value at inception. [A]"""
        return math.sqrt(2) * self._current_at_inception.imag

    @property
    def sin_a(self) -> float:
        """Sine part of the sinusoid. [A]"""
        return math.sqrt(2) * self._current_at_inception.real

    @property
    def offset_initial_a(self) -> float:
        """Offset at inception, with its sign. [A]"""
        return self.prefault_current_a - self.cos_a

    @property
    def kappa(self) -> float:
        """Largest instantaneous current over the symmetrical crest, for this inception and load. [1]"""
        return self.peak().magnitude_a / self.symmetrical_peak_a

    def current(self, t_s: ArrayLike) -> NDArray[np.float64]:
        """Return the instantaneous fault current.

        Parameters
        ----------
        t_s : array_like of float, any shape
            Time after inception, not negative. [s]

        Returns
        -------
        ndarray of float, shape of `t_s`
            Current. [A]

        Raises
        ------
        TheoryError
            If a time lies before inception, where another circuit was closed.
        """
        return rl_current(_after_inception(t_s), **self._model)

    def offset(self, t_s: ArrayLike) -> NDArray[np.float64]:
        """Return the offset, the decaying part of the current, with its sign; `t_s` as for `current`. [A]"""
        return offset_current(
            _after_inception(t_s), offset_a=self.offset_initial_a, decay_rate_per_s=self.decay_rate_per_s
        )

    def offset_percent(self, t_s: ArrayLike) -> NDArray[np.float64]:
        """Return the offset's magnitude in percent of the symmetrical crest; `t_s` as for `current`. [%]

        At the instant of contact parting this is the DC component by which breaker standards rate a breaker.
        """
        return np.asarray(100 * np.abs(self.offset(t_s)) / self.symmetrical_peak_a)

    def asymmetrical_rms(self, t_s: ArrayLike) -> NDArray[np.float64]:
        """Return the asymmetrical RMS current with the offset as it stands at `t_s`, as for `current`. [A]"""
        return asymmetrical_rms(
            _after_inception(t_s),
            symmetrical_rms_a=self.symmetrical_rms_a,
            offset_a=self.offset_initial_a,
            decay_rate_per_s=self.decay_rate_per_s,
        )

    def joule_integral(self, start_s: ArrayLike, end_s: ArrayLike) -> NDArray[np.float64]:
        """Return the integral of the squared current between two instants, each as for `current`. [A²s]"""
        return joule_integral(_after_inception(start_s), _after_inception(end_s), **self._model)

    def peak(self, *, t_end_s: float = math.inf) -> CurrentPeak:
        """Return the largest instantaneous current from inception on, or until `t_end_s` such as clearing."""
        return peak_of(**self._model, t_end_s=t_end_s)

    def worst_inception(self, *, prefault_current_phasor_a: complex = 0j) -> WorstInception:
        """Return the inception angle that gives the largest peak in this loop, and that peak.

        Parameters
        ----------
        prefault_current_phasor_a : complex
            Load current before the fault, RMS phasor, the driving voltage being the reference: at the
            inception angle a the instantaneous load current is sqrt(2) Im(phasor exp(ja)). It takes the
            place of `prefault_current_a`, which holds for one inception angle alone. [A]

        Returns
        -------
        WorstInception
            Without load the angle is 0, a voltage zero, at every X/R.

        Raises
        ------
        TheoryError
            If the phasor is not finite.
        """
        return worst_inception(
            fault_a=self.current_phasor_a,
            offset_a=prefault_current_phasor_a - self.current_phasor_a,
            decay_rate_per_s=self.decay_rate_per_s,
            omega_rad_per_s=self.omega_rad_per_s,
        )

    @property
    def _current_at_inception(self) -> complex:
        return self.current_phasor_a * cmath.rect(1.0, math.radians(self.inception_angle_deg))

    @property
    def _model(self) -> _Model:
        return _Model(
            cos_a=self.cos_a,
            sin_a=self.sin_a,
            offset_a=self.offset_initial_a,
            decay_rate_per_s=self.decay_rate_per_s,
            omega_rad_per_s=self.omega_rad_per_s,
        )


def _check(name: str, value: float, fits: bool, expected: str) -> None:
    if not (fits and math.isfinite(value)):
        raise TheoryError("no-meaning", f"{name} is {value}", where=name, hint=f"it must be {expected}")


def _after_inception(t_s: ArrayLike) -> NDArray[np.float64]:
    t = np.asarray(t_s, dtype=np.float64)
    if not (t >= 0).all():
        raise TheoryError(
            "before-inception",
            "a time is negative or not a number",
            where="t_s",
            hint="times count from inception; before it another circuit was closed",
        )
    return t
