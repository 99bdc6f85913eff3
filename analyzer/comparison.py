"""What RL theory ties together, held side by side: one row each, with a sentence for a report."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from analyzer.estimate.event import Estimate
from analyzer.estimate.impedance import x_over_r
from analyzer.findings import CheckVerdict, Comparison, Quantity
from analyzer.findings_parts import NORMAL_95
from analyzer.site import SourceStatement
from analyzer.theory.modes import PHASES, FaultType, Phase, faulted_phases, is_ground_fault
from analyzer.waveform.events import Event
from analyzer.waveform.phasors import Phasor, degrees_of

_SIGMAS = 3.0


@dataclass(frozen=True, slots=True, kw_only=True)
class Offsets:
    """Offset of one phase at inception: fitted freely, and as continuity of the current demands. [A]"""

    phase: Phase
    fitted_a: float
    fitted_std_a: float
    continuity_a: float
    continuity_std_a: float
    symmetrical_peak_a: float


def offsets_of(event: Event, estimate: Estimate, phase: Phase) -> Offsets:
    """Return the two offsets of a phase.

    Continuity: the offset is the current just before inception less the sinusoid's value just after.
    """
    k = PHASES.index(phase)
    fit = estimate.phases[phase]
    t0 = estimate.inception.time_s
    fitted, fitted_std = fit.offset
    decaying_per_s = abs(float(fit.rates_per_s @ fit.coefficients[2:]))
    fitted_std = math.hypot(fitted_std, decaying_per_s * estimate.inception.std_s)
    before = float(event.prefault.fundamental(np.array([t0]))[k, 0])
    before_std = float(event.prefault.prediction_std(t0)[k])
    cos_std = math.sqrt(float(fit.covariance[0, 0]))
    # The sinusoid's slope turns the uncertainty of the instant into one of its value.
    slope = fit.omega_rad_per_s * float(fit.coefficients[1])
    timing = abs(slope) * estimate.inception.std_s
    return Offsets(
        phase=phase,
        fitted_a=fitted,
        fitted_std_a=fitted_std,
        continuity_a=before - float(fit.coefficients[0]),
        continuity_std_a=math.hypot(before_std, cos_std, timing),
        symmetrical_peak_a=fit.phasor.magnitude * math.sqrt(2),
    )


def compare(
    event: Event,
    estimate: Estimate,
    fault_type: FaultType,
    *,
    study: SourceStatement | None = None,
    nominal_frequency_hz: float | None = None,
) -> tuple[Comparison, ...]:
    """Return the rows of comparison of one fault.

    Parameters
    ----------
    event : Event
    estimate : Estimate
    fault_type : str
    study : SourceStatement, optional
        The source impedance that a study expects.
    nominal_frequency_hz : float, optional
        Frequency that the study is of; that of the event when left out. [Hz]

    Returns
    -------
    tuple of Comparison
        A row agrees within three standard uncertainties or within a stated share of the quantity, whichever
        is wider: what is significant but does not matter departs from nothing. A study's impedance is
        compared as a complex number with the study's own tolerance; an estimate whose 95 % interval is wider
        than that tolerance decides nothing.
    """
    rows = list(_rows(event, estimate, fault_type))
    if study is not None:
        stretched = event.prefault.frequency_hz / (nominal_frequency_hz or event.prefault.frequency_hz)
        rows += _study_rows(estimate, fault_type, study, reactance_factor=stretched)
    return tuple(rows)


def _rows(event: Event, estimate: Estimate, fault_type: FaultType) -> Iterator[Comparison]:
    phases = faulted_phases(fault_type)
    offsets = max((offsets_of(event, estimate, p) for p in phases), key=lambda o: abs(o.fitted_a))
    if estimate.inception.bridged:
        yield _bridged_row(offsets)
    elif not event.follows_fault:  # there the current goes on from another fault's, not from the load's
        yield _row(
            "offset-continuity",
            Quantity.of(offsets.fitted_a, offsets.fitted_std_a, "A"),
            Quantity.of(offsets.continuity_a, offsets.continuity_std_a, "A"),
            tolerance=0.05 * offsets.symmetrical_peak_a,
            what=f"the offset of phase {offsets.phase} at inception",
            against="what continuity of the current demands",
            unit_text="A",
        )
    yield _x_over_r_row(estimate)
    yield _peak_row(event, estimate, phases)
    impedances = estimate.impedances
    if impedances is not None and impedances.z1 is not None and impedances.z2 is not None:
        yield _row(
            "source-z1-z2",
            Quantity.of(impedances.z2.magnitude, impedances.z2.magnitude_std, "ohm"),
            Quantity.of(impedances.z1.magnitude, impedances.z1.magnitude_std, "ohm"),
            tolerance=0.10 * impedances.z1.magnitude,
            what="the negative-sequence source impedance",
            against="the positive-sequence one",
            unit_text="ohm",
        )


def _bridged_row(offsets: Offsets) -> Comparison:
    gap_a = offsets.continuity_a - offsets.fitted_a
    return Comparison(
        check="offset-continuity",
        measured=Quantity.of(offsets.fitted_a, offsets.fitted_std_a, "A"),
        theory=Quantity.of(offsets.continuity_a, offsets.continuity_std_a, "A"),
        difference=-gap_a,
        in_sigmas=None,
        verdict="undetermined",
        says=f"A transient shorter than the fit's window, {gap_a:.4g} A at inception in phase "
        f"{offsets.phase}, stands between the offset and what continuity of the current demands (a load "
        "beside the fault, or a filter's edge): the two are not compared.",
    )


def _x_over_r_row(estimate: Estimate) -> Comparison:
    fit = estimate.loops[0][1]
    by_angle = x_over_r(estimate.impedances.driven) if estimate.impedances else None
    if fit.decay_rate_per_s is None or fit.decay_rate_per_s <= 0 or by_angle is None:
        missing = fit.why_unknown or "the angle between voltage and current tells no resistance"
        if estimate.impedances is None and not fit.why_unknown:
            missing = "there are no voltages"
        return Comparison(
            check="x-over-r-routes",
            measured=Quantity.unknown("1"),
            theory=Quantity.unknown("1"),
            difference=None,
            in_sigmas=None,
            verdict="undetermined",
            says=f"X/R by decay and by angle cannot be compared: {missing}.",
        )
    value = fit.omega_rad_per_s / fit.decay_rate_per_s
    std = value * (fit.decay_rate_std or 0.0) / fit.decay_rate_per_s
    return _row(
        "x-over-r-routes",
        Quantity.of(value, std, "1"),
        Quantity.of(by_angle[0], by_angle[1], "1"),
        tolerance=0.10 * value,
        what="X/R from the decay",
        against="X/R from the angle between driving voltage and current",
        unit_text="",
    )


def _peak_row(event: Event, estimate: Estimate, phases: tuple[Phase, ...]) -> Comparison:
    samples = {phase: largest_sample(event, phase) for phase in phases}
    phase = max(samples, key=lambda p: abs(float(event.currents_a[PHASES.index(p), samples[p]])))
    k, sample = PHASES.index(phase), samples[phase]
    fit = estimate.phases[phase]
    measured = abs(float(event.currents_a[k, sample]))
    model = abs(fit.value(float(event.times_s[sample])))
    symmetrical = fit.phasor.magnitude * math.sqrt(2)
    return _row(
        "peak",
        Quantity.of(measured, float(event.prefault.noise_rms[k]), "A"),
        Quantity.of(model, fit.phasor.magnitude_std * math.sqrt(2), "A"),
        tolerance=0.03 * symmetrical,
        what=f"the largest sample of phase {phase}",
        against="the fitted closed form at that instant",
        unit_text="A",
    )


def _study_rows(
    estimate: Estimate, fault_type: FaultType, study: SourceStatement, *, reactance_factor: float
) -> Iterator[Comparison]:
    found = estimate.impedances
    for sequence, expected, measured in (
        ("positive", study.z1_ohm, found.z1 if found else None),
        ("zero", study.z0_ohm, found.z0 if found else None),
    ):
        if expected is None or (sequence == "zero" and not is_ground_fault(fault_type)):
            continue
        yield _study_row(
            "source-z1-study" if sequence == "positive" else "source-z0-study",
            measured,
            complex(expected[0], expected[1] * reactance_factor),
            tolerance=study.tolerance_percent / 100.0,
            what=f"{sequence}-sequence source impedance",
            missing="there are no voltages" if found is None else "the record does not determine it",
        )


def _study_row(
    check: str, measured: Phasor | None, expected: complex, *, tolerance: float, what: str, missing: str
) -> Comparison:
    size = abs(expected)
    theory = Quantity.of(size, None, "ohm", low=max(0.0, size * (1 - tolerance)), high=size * (1 + tolerance))
    if measured is None:
        return Comparison(
            check=check,
            measured=Quantity.unknown("ohm"),
            theory=theory,
            difference=None,
            in_sigmas=None,
            verdict="undetermined",
            says=f"The {what} cannot be compared with the study's: {missing}.",
        )
    apart = measured.value - expected
    along = np.array([apart.real, apart.imag]) / (abs(apart) or 1.0)
    half = NORMAL_95 * math.sqrt(max(float(along @ measured.covariance @ along), 0.0))
    allowed = tolerance * size
    verdict: CheckVerdict = "undetermined"
    words = (
        f"which its uncertainty of {half / size:.1%} and the study's tolerance of {tolerance:.0%} leave open"
    )
    if abs(apart) - half > allowed:
        verdict, words = "departs", f"which is more than its tolerance of {tolerance:.0%}: it departs"
    elif max(abs(apart), half) <= allowed:
        verdict, words = "agrees", f"within its tolerance of {tolerance:.0%}: it agrees"
    std = measured.magnitude_std
    return Comparison(
        check=check,
        measured=Quantity.of(
            measured.magnitude, std, "ohm", low=max(0.0, measured.magnitude - NORMAL_95 * std)
        ),
        theory=theory,
        difference=measured.magnitude - size,
        in_sigmas=(measured.magnitude - size) / std if std > 0 else None,
        verdict=verdict,
        says=f"The {what} ({measured.magnitude:.4g} ohm, {measured.angle_deg:.1f}°) is "
        f"{abs(apart) / size:.1%} away from the study's ({size:.4g} ohm, {degrees_of(expected):.1f}°), "
        f"{words}.",
    )


def largest_sample(event: Event, phase: Phase) -> int:
    """Return the sample of the largest magnitude of a phase current during the fault."""
    k = PHASES.index(phase)
    end = event.interruptions.get(phase)
    stop = end.sample if end is not None else len(event.times_s)
    return event.first + int(np.argmax(np.abs(event.currents_a[k, event.first : max(stop, event.first + 1)])))


def _row(
    check: str,
    measured: Quantity,
    theory: Quantity,
    *,
    tolerance: float,
    what: str,
    against: str,
    unit_text: str,
) -> Comparison:
    assert measured.value is not None
    assert theory.value is not None
    difference = measured.value - theory.value
    spread = math.hypot(measured.std or 0.0, theory.std or 0.0)
    in_sigmas = difference / spread if spread > 0 else None
    agrees = abs(difference) <= max(_SIGMAS * spread, tolerance)
    share = f", {abs(difference / theory.value):.1%} apart" if theory.value else ""
    word = "agrees with" if agrees else "departs from"
    unit = f" {unit_text}" if unit_text else ""
    return Comparison(
        check=check,
        measured=measured,
        theory=theory,
        difference=difference,
        in_sigmas=in_sigmas,
        verdict="agrees" if agrees else "departs",
        says=f"{what[0].upper()}{what[1:]} ({measured.value:.4g}{unit}) {word} {against} "
        f"({theory.value:.4g}{unit}){share}.",
    )
