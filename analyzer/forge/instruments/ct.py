"""Current transformer: magnetising branch, winding and burden, knee point, remanence, air gap.

Everything runs on the secondary side and is referred back to the primary by the rated ratio, so that an ideal
transformer returns its input.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.checks import need_not_negative, need_one_of, need_positive
from analyzer.forge.instruments.core import Core, solve_core
from analyzer.forge.instruments.linear import ModalSystem, Tones, run_linear

Real = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class KneePoint:
    """Knee of an exciting curve whose saturated branch is a power law, i = a·flux^exponent.

    Parameters
    ----------
    voltage_v : float
        RMS secondary voltage at the knee. [V]
    exciting_current_a : float
        RMS exciting current that the power law alone takes at this voltage. [A]
    freq_hz : float
        At which the two were measured. [Hz]
    exponent : float
        22 is usual for a single-valued core in saturation studies (from memory: the IEEE Power System
        Relaying Committee's work on CT saturation, which states the knee as the voltage at 10 A).

    Raises
    ------
    ForgeError
        If a value is not positive or the exponent is below 3.
    """

    voltage_v: float
    exciting_current_a: float
    freq_hz: float
    exponent: float = 22.0

    def __post_init__(self) -> None:
        need_positive(
            voltage_v=self.voltage_v,
            exciting_current_a=self.exciting_current_a,
            freq_hz=self.freq_hz,
            exponent=self.exponent,
        )
        if self.exponent < 3:
            raise ForgeError("bad-value", f"{self.exponent} is too small for saturation", where="exponent")

    @property
    def flux_wb(self) -> float:
        """Peak flux linkage at the knee voltage. [Wb turns]"""
        return math.sqrt(2) * self.voltage_v / (2 * math.pi * self.freq_hz)

    @property
    def peak_current_a(self) -> float:
        """Instantaneous exciting current at the knee flux: RMS over the RMS of sin^exponent. [A]"""
        s = self.exponent
        mean_square = math.exp(math.lgamma(s + 0.5) - math.lgamma(s + 1)) / math.sqrt(math.pi)
        return self.exciting_current_a / math.sqrt(mean_square)


@dataclass(frozen=True, slots=True, kw_only=True)
class CurrentTransformer:
    """A current transformer with its burden; values on the secondary side.

    Parameters
    ----------
    ratio : float
        Rated primary over rated secondary current.
    winding_ohm, burden_ohm, burden_h : float
        Secondary winding; burden with its leads. [ohm], [H]
    magnetising_h : float
        Unsaturated magnetising inductance. [H]
    core : {"iron", "gapped"}
        A gap makes the magnetising inductance small and straight (TPZ-like); the word only labels the truth.
    knee : KneePoint or None
        None is a core that never saturates.
    remanence_pu : tuple of float
        Flux before the record in units of the knee flux, for each phase or once for all; between -1 and 1.

    Raises
    ------
    ForgeError
        If a value is outside its range; `where` names it.
    """

    ratio: float
    winding_ohm: float
    burden_ohm: float
    magnetising_h: float
    burden_h: float = 0.0
    core: Literal["iron", "gapped"] = "iron"
    knee: KneePoint | None = None
    remanence_pu: tuple[float, ...] = (0.0,)

    def __post_init__(self) -> None:
        need_not_negative(winding_ohm=self.winding_ohm, burden_ohm=self.burden_ohm, burden_h=self.burden_h)
        need_positive(ratio=self.ratio, magnetising_h=self.magnetising_h, resistance_ohm=self.resistance_ohm)
        need_one_of(self.core, ("iron", "gapped"), where="core")
        if not all(-1 < value < 1 for value in self.remanence_pu):
            raise ForgeError("bad-value", "remanence must lie between -1 and 1", where="remanence_pu")
        if self.knee is None and any(self.remanence_pu):
            raise ForgeError("bad-value", "remanence needs a knee to be measured by", where="remanence_pu")

    @property
    def resistance_ohm(self) -> float:
        """Whole resistance of the secondary circuit."""
        return self.winding_ohm + self.burden_ohm

    @property
    def time_constant_s(self) -> float:
        """Secondary time constant (Lm + L) / R of the unsaturated core."""
        return (self.magnetising_h + self.burden_h) / self.resistance_ohm

    @classmethod
    def with_time_constant(
        cls,
        time_constant_s: float,
        *,
        ratio: float,
        winding_ohm: float,
        burden_ohm: float,
        burden_h: float = 0.0,
        core: Literal["iron", "gapped"] = "iron",
        knee: KneePoint | None = None,
        remanence_pu: tuple[float, ...] = (0.0,),
    ) -> CurrentTransformer:
        """Choose the magnetising inductance for a secondary time constant; other parameters as the class."""
        return cls(
            ratio=ratio,
            winding_ohm=winding_ohm,
            burden_ohm=burden_ohm,
            burden_h=burden_h,
            magnetising_h=time_constant_s * (winding_ohm + burden_ohm) - burden_h,
            core=core,
            knee=knee,
            remanence_pu=remanence_pu,
        )

    def saturation_factor(self, current_rms_a: float, freq_hz: float) -> float:
        """Ks of a symmetrical primary current: knee flux over the peak flux it needs; inf without a knee."""
        if self.knee is None:
            return math.inf
        omega = 2 * math.pi * freq_hz
        impedance = math.hypot(self.resistance_ohm, omega * self.burden_h)
        return self.knee.flux_wb * omega / (math.sqrt(2) * current_rms_a / self.ratio * impedance)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class CtResult:
    """What leaves a current transformer, referred to the primary; arrays of shape (phases, n).

    Parameters
    ----------
    secondary_a : ndarray
        Secondary current times the ratio. [A]
    magnetising_a : ndarray
        What is missing from it, primary less secondary. [A]
    flux_pu : ndarray
        Core flux in units of the knee flux; NaN for a core without a knee.
    error_a : float
        How far the currents may be off, from halving the step; 0 for a linear core. It does not see that a
        kink between two samples (inception) adds 2e-6 of the current's crest at 38.4 kHz. [A]
    substeps : int
        Steps per sample that this took.
    """

    secondary_a: Real
    magnetising_a: Real
    flux_pu: Real
    error_a: float
    substeps: int


@dataclass(frozen=True, slots=True, kw_only=True)
class SaturationTruth:
    """Saturation of the cores over a window; one entry per phase.

    Parameters
    ----------
    first_crossing_s : tuple of float or None
        First instant at which the flux passes the knee, None where it never does. [s]
    saturated_fraction : tuple of float
        Share of the window with the flux beyond the knee.
    peak_flux_pu : tuple of float
        Largest flux over the knee flux; NaN without a knee.
    peak_magnetising_a : tuple of float
        Largest magnetising current, referred to the primary. [A]
    """

    first_crossing_s: tuple[float | None, ...]
    saturated_fraction: tuple[float, ...]
    peak_flux_pu: tuple[float, ...]
    peak_magnetising_a: tuple[float, ...]


def transform_current(
    primary_a: Real,
    ct: CurrentTransformer,
    *,
    sample_rate_hz: float,
    tones: Tones,
    tolerance: float = 1e-5,
) -> CtResult:
    """Pass primary currents through current transformers, one per row.

    Parameters
    ----------
    primary_a : ndarray, shape (phases, n)
        Uniformly sampled, finely enough that the current is smooth between samples. [A]
    ct : CurrentTransformer
    sample_rate_hz : float
    tones : Tones
        The steady state before the first sample; the core starts in it, on top of its remanence.
    tolerance : float
        Permitted error of a saturating core over the largest primary current, verified by halving the step.

    Returns
    -------
    CtResult

    Raises
    ------
    ForgeError
        If remanence has neither one entry nor one per phase, or the tolerance is not reached.
    """
    phases = primary_a.shape[0]
    if len(ct.remanence_pu) not in (1, phases):
        raise ForgeError("bad-value", f"one value or {phases} are needed", where="remanence_pu")
    if ct.knee is None:
        secondary = run_linear(
            _linear(ct, ct.magnetising_h), primary_a, sample_rate_hz=sample_rate_hz, tones=tones
        )
        return CtResult(
            secondary_a=secondary,
            magnetising_a=primary_a - secondary,
            flux_pu=np.full_like(primary_a, np.nan),
            error_a=0.0,
            substeps=1,
        )
    remanence = np.broadcast_to(np.array(ct.remanence_pu, dtype=float), (phases,))[:, None] * ct.knee.flux_wb
    core = Core(
        magnetising_h=ct.magnetising_h,
        knee_wb=ct.knee.flux_wb,
        knee_a=ct.knee.peak_current_a,
        exponent=ct.knee.exponent,
        remanence_wb=remanence,
    )
    current = primary_a / ct.ratio
    unsaturated = np.empty_like(current)
    for phase, inductance in enumerate(core.incremental_h()[:, 0]):
        own = Tones(freqs_hz=tones.freqs_hz, amplitudes=tones.amplitudes[:, phase : phase + 1] / ct.ratio)
        row = current[phase : phase + 1]
        image = run_linear(_linear(ct, float(inductance)), row, sample_rate_hz=sample_rate_hz, tones=own)
        unsaturated[phase] = remanence[phase] + inductance * (row - image)[0]
    solution = solve_core(
        current,
        sample_rate_hz=sample_rate_hz,
        core=core,
        resistance_ohm=ct.resistance_ohm,
        inductance_h=ct.burden_h,
        linear_flux_wb=unsaturated,
        tolerance=tolerance,
    )
    magnetising = ct.ratio * core.current_and_slope(solution.flux_wb)[0]
    return CtResult(
        secondary_a=primary_a - magnetising,
        magnetising_a=magnetising,
        flux_pu=solution.flux_wb / ct.knee.flux_wb,
        error_a=solution.error_a * ct.ratio,
        substeps=solution.substeps,
    )


def _linear(ct: CurrentTransformer, magnetising_h: float) -> ModalSystem:
    """High-pass Lm s / ((Lm + L) s + R)."""
    pole = -ct.resistance_ohm / (magnetising_h + ct.burden_h)
    gain = magnetising_h / (magnetising_h + ct.burden_h)
    return ModalSystem(poles=np.array([pole + 0j]), residues=np.array([gain * pole + 0j]), direct=gain)


def saturation_truth(result: CtResult, *, time_s: Real, start_s: float, end_s: float) -> SaturationTruth:
    """When and how far the cores saturated in the window from `start_s` to `end_s`.

    Parameters
    ----------
    result : CtResult
    time_s : ndarray, shape (n,)
        Instants of the result's samples; the crossing is interpolated between them.
    start_s, end_s : float
        The window, ends included.
    """
    inside = (time_s >= start_s) & (time_s <= end_s)
    times, flux = time_s[inside], np.abs(result.flux_pu[:, inside])
    crossings: list[float | None] = []
    for row in flux:
        beyond = np.flatnonzero(row >= 1)
        if beyond.size == 0:
            crossings.append(None)
            continue
        k = int(beyond[0])
        part = 0.0 if k == 0 else (row[k] - 1) / (row[k] - row[k - 1])
        crossings.append(float(times[k] - part * (times[k] - times[max(k - 1, 0)])))
    return SaturationTruth(
        first_crossing_s=tuple(crossings),
        saturated_fraction=tuple(float(v) for v in (flux >= 1).mean(axis=1)),
        peak_flux_pu=tuple(float(v) for v in flux.max(axis=1)),
        peak_magnetising_a=tuple(float(v) for v in np.abs(result.magnetising_a[:, inside]).max(axis=1)),
    )
