"""Ratio and phase errors of instrument transformers within their IEC 61869 accuracy class.

An error is applied as a gain and a shift in time, y(t) = (1 + e) x(t + d/omega): exactly the complex gain
(1 + e) exp(j d) for the fundamental; a harmonic turns by its order times d and an offset keeps its shape.
What the magnetising inductance does to an offset is the current transformer's own affair (module `ct`).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.checks import need_one_of, need_positive
from analyzer.forge.instruments.sampling import shift

Real = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class ClassLimits:
    """What a class permits: ratio ± per unit, phase ± minutes around a middle; None is no limit."""

    ratio_pu: float
    phase_minutes: float | None
    phase_middle_minutes: float = 0.0


# At rated current. IEC 61869-2:2012 Tables 205 and 206, from memory. TPZ's displacement is 180' ± 18'.
_PROTECTION_CT = {
    "5P": ClassLimits(ratio_pu=0.01, phase_minutes=60),
    "5PR": ClassLimits(ratio_pu=0.01, phase_minutes=60),
    "10P": ClassLimits(ratio_pu=0.03, phase_minutes=None),
    "10PR": ClassLimits(ratio_pu=0.03, phase_minutes=None),
    "TPX": ClassLimits(ratio_pu=0.005, phase_minutes=30),
    "TPY": ClassLimits(ratio_pu=0.01, phase_minutes=60),
    "TPZ": ClassLimits(ratio_pu=0.01, phase_minutes=18, phase_middle_minutes=180),
}
_MEASURING_PERCENT = (5.0, 20.0, 100.0, 120.0)
# Ratio error in % at 5, 20, 100 and 120 % of rated current: IEC 61869-2 Table 201 as listed at
# https://procitec.in/?p=242. Phase displacement in minutes at the same currents: from memory.
_MEASURING_CT = {
    "0.1": ((0.4, 0.2, 0.1, 0.1), (15, 8, 5, 5)),
    "0.2": ((0.75, 0.35, 0.2, 0.2), (30, 15, 10, 10)),
    "0.5": ((1.5, 0.75, 0.5, 0.5), (90, 45, 30, 30)),
    "1": ((3.0, 1.5, 1.0, 1.0), (180, 90, 60, 60)),
}
# At 80 to 120 % of rated voltage (protection classes from 5 %). IEC 61869-3:2011, from memory.
_VT = {
    "0.1": ClassLimits(ratio_pu=0.001, phase_minutes=5),
    "0.2": ClassLimits(ratio_pu=0.002, phase_minutes=10),
    "0.5": ClassLimits(ratio_pu=0.005, phase_minutes=20),
    "1": ClassLimits(ratio_pu=0.01, phase_minutes=40),
    "3P": ClassLimits(ratio_pu=0.03, phase_minutes=120),
    "6P": ClassLimits(ratio_pu=0.06, phase_minutes=240),
}


def class_limits(
    class_name: str, *, kind: Literal["ct", "vt"], percent_of_rated: float = 100.0
) -> ClassLimits:
    """Error limits of an accuracy class.

    Parameters
    ----------
    class_name : str
        Such as "5P", "TPZ", "0.2" for a current transformer; "3P", "0.5" for a voltage transformer.
    kind : {"ct", "vt"}
    percent_of_rated : float
        Current at which a measuring class is asked for; the limits are interpolated between the standard's
        currents (common practice) and held beyond them. Other classes have one pair of limits.

    Raises
    ------
    ForgeError
        If the class is not known.
    """
    need_one_of(kind, ("ct", "vt"), where="kind")
    need_positive(percent_of_rated=percent_of_rated)
    table = _VT if kind == "vt" else _PROTECTION_CT
    if class_name in table:
        return table[class_name]
    if kind == "ct" and class_name in _MEASURING_CT:
        ratio, minutes = _MEASURING_CT[class_name]
        return ClassLimits(
            ratio_pu=float(np.interp(percent_of_rated, _MEASURING_PERCENT, ratio)) / 100,
            phase_minutes=float(np.interp(percent_of_rated, _MEASURING_PERCENT, minutes)),
        )
    known = ", ".join([*table, *(_MEASURING_CT if kind == "ct" else ())])
    raise ForgeError("unknown-class", f"{class_name!r} is no accuracy class", where="class_name", hint=known)


@dataclass(frozen=True, slots=True, kw_only=True)
class TransformerError:
    """Error of one transformer: secondary over ideal secondary is (1 + ratio_pu) exp(j phase_minutes).

    Parameters
    ----------
    ratio_pu : float
        Ratio error, between -1 and 1. [1]
    phase_minutes : float
        Phase displacement, positive where the secondary leads. [minutes of arc]
    """

    ratio_pu: float = 0.0
    phase_minutes: float = 0.0

    def __post_init__(self) -> None:
        if not abs(self.ratio_pu) < 1:
            raise ForgeError("bad-value", f"{self.ratio_pu} is no ratio error", where="ratio_pu")
        if not abs(self.phase_minutes) < 90 * 60:
            raise ForgeError(
                "bad-value", f"{self.phase_minutes} is beyond a right angle", where="phase_minutes"
            )

    @property
    def complex_gain(self) -> complex:
        """Gain of the fundamental."""
        angle = math.radians(self.phase_minutes / 60)
        return (1 + self.ratio_pu) * complex(math.cos(angle), math.sin(angle))


@dataclass(frozen=True, slots=True, kw_only=True)
class ErrorsByClass:
    """Errors to be drawn, uniformly within a class's limits and for each phase by itself."""

    class_name: str
    kind: Literal["ct", "vt"]
    percent_of_rated: float = 100.0

    def __post_init__(self) -> None:
        class_limits(self.class_name, kind=self.kind, percent_of_rated=self.percent_of_rated)


def draw_errors(
    spec: ErrorsByClass,
    *,
    rng: np.random.Generator,
    count: int,
    middle: Literal["added", "in-core"] = "added",
) -> tuple[TransformerError, ...]:
    """Draw errors for a number of transformers; where the class has no phase limit the phase error is zero.

    Parameters
    ----------
    spec : ErrorsByClass
    rng : numpy.random.Generator
    count : int
    middle : {"added", "in-core"}
        TPZ's 180 minutes come from its gap; "in-core" leaves them to a core that is simulated.
    """
    need_one_of(middle, ("added", "in-core"), where="middle")
    limits = class_limits(spec.class_name, kind=spec.kind, percent_of_rated=spec.percent_of_rated)
    ratio = rng.uniform(-limits.ratio_pu, limits.ratio_pu, size=count)
    spread = limits.phase_minutes or 0.0
    phase = rng.uniform(-spread, spread, size=count)
    if middle == "added":
        phase += limits.phase_middle_minutes
    return tuple(
        TransformerError(ratio_pu=float(r), phase_minutes=float(p)) for r, p in zip(ratio, phase, strict=True)
    )


def apply_errors(
    signal: Real, errors: tuple[TransformerError, ...], *, sample_rate_hz: float, freq_hz: float
) -> Real:
    """Apply one error per row by gain and shift in time.

    Parameters
    ----------
    signal : ndarray, shape (phases, n)
        The first and last samples, as many as the shift and three more, rest on repeated end values.
    errors : tuple of TransformerError
        One per row.
    sample_rate_hz : float
    freq_hz : float
        Fundamental frequency that the phase displacement is stated at.
    """
    if len(errors) != signal.shape[0]:
        raise ForgeError("bad-value", f"{len(errors)} errors for {signal.shape[0]} phases", where="errors")
    gain = np.array([1 + e.ratio_pu for e in errors])[:, None]
    advance = [e.phase_minutes / (60 * 360 * freq_hz) for e in errors]
    return gain * shift(signal, sample_rate_hz=sample_rate_hz, advance_s=advance)
