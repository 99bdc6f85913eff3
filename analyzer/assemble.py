"""From an event and its estimate to the findings' terms."""

from __future__ import annotations

import math
from typing import Literal

import numpy as np

from analyzer.comparison import compare, largest_sample, offsets_of
from analyzer.departures import evolving_fault, no_window, residual_structure, short_window, ties_broken
from analyzer.estimate.event import Estimate
from analyzer.estimate.impedance import x_over_r
from analyzer.estimate.rlfit import LoopFit
from analyzer.findings import (
    Clearing,
    Comparison,
    Decay,
    DepartureInfo,
    Event,
    Fit,
    Impedance,
    ImpedanceFindings,
    Inception,
    Peak,
    PhaseFindings,
    Prefault,
    Quantity,
    SourceImpedance,
    XOverR,
)
from analyzer.findings_parts import Unit
from analyzer.terminals import Terminal
from analyzer.theory.modes import (
    PHASES,
    FaultType,
    Loop,
    Phase,
    faulted_phases,
    reference_loop,
    reference_name,
)
from analyzer.theory.rl import RLFault
from analyzer.waveform import events
from analyzer.waveform.phasors import SQRT2, Phasor, combine, wrapped_deg

_NORMAL_95 = 1.959963984540054
# A record without noise before the fault is a computed one; its chi-square would be a quotient by nothing.
_NO_NOISE = 1e-7


def event_findings(
    event: events.Event,
    estimate: Estimate | None,
    terminal: Terminal,
    *,
    nominal_frequency_hz: float | None = None,
) -> Event:
    """Return what is said of one event.

    Parameters
    ----------
    event : analyzer.waveform.events.Event
    estimate : Estimate or None
        None for an event that is no fault, or too short a one.
    terminal : Terminal
    nominal_frequency_hz : float, optional
        Frequency that impedances of the site file are of. [Hz]
    """
    if event.fault_type is None or estimate is None:
        return _on_time(_bare(event, terminal), terminal)
    rows = compare(
        event,
        estimate,
        event.fault_type,
        study=terminal.stated.source if terminal.stated is not None else None,
        nominal_frequency_hz=nominal_frequency_hz,
    )
    departures = (
        *short_window(event, estimate),
        *evolving_fault(event, estimate),
        *residual_structure(estimate, terminal.currents),
        *ties_broken(rows),
    )
    clearing = _clearing(event) if estimate.changed is None else None  # it went on as another fault
    found = Event(
        terminal=terminal.name,
        kind="fault",
        fault_type=event.fault_type,
        direction=estimate.impedances.direction if estimate.impedances else "undetermined",
        inception=_inception(event, estimate, event.fault_type),
        clearing=clearing,
        duration_s=_duration(estimate, clearing),
        window_s=(
            float(event.times_s[estimate.window.start]),
            float(event.times_s[estimate.window.stop - 1]),
        ),
        prefault=_prefault(event),
        phases={phase: _phase(event, estimate, phase) for phase in faulted_phases(event.fault_type)},
        decay=tuple(_decay(loop, fit) for loop, fit in estimate.loops),
        x_over_r=_x_over_r(estimate, rows),
        impedance=_impedance(estimate),
        fit=_fit(estimate),
        comparison=rows,
        departures=departures,
        verdict=_verdict(estimate, departures),
    )
    return _on_time(found, terminal)


def _on_time(found: Event, terminal: Terminal) -> Event:
    """The event with the stated delay of the anti-alias filter taken off its inception and clearing."""
    delay_s = terminal.stated.anti_alias_delay_s if terminal.stated is not None else 0.0
    if delay_s == 0.0:
        return found

    def earlier(time_s: Quantity) -> Quantity:
        moved = {
            name: None if (at := getattr(time_s, name)) is None else at - delay_s
            for name in ("value", "low", "high")
        }
        return time_s.model_copy(update=moved)

    inception = found.inception.model_copy(update={"time_s": earlier(found.inception.time_s)})
    clearing = found.clearing
    if clearing is not None:
        by_phase_s = {phase: earlier(time_s) for phase, time_s in clearing.by_phase_s.items()}
        clearing = Clearing(time_s=earlier(clearing.time_s), by_phase_s=by_phase_s)
    return found.model_copy(update={"inception": inception, "clearing": clearing})


def _bare(event: events.Event, terminal: Terminal) -> Event:
    """An event of which only the time and the state before it are stated."""
    step_s = event.sample_interval_s
    is_fault = event.fault_type is not None
    return Event(
        terminal=terminal.name,
        kind=event.kind,
        fault_type=event.fault_type,
        direction="undetermined",
        inception=Inception(
            time_s=Quantity.of(event.first_s - step_s / 2, step_s / math.sqrt(12), "s"),
            voltage_angle_deg=Quantity.unknown("deg"),
            reference=None,
        ),
        clearing=_clearing(event) if is_fault else None,
        duration_s=None,
        window_s=(event.first_s, event.first_s),
        prefault=_prefault(event),
        phases={},
        decay=(),
        x_over_r=XOverR.unknown(),
        impedance=ImpedanceFindings.unknown(),
        fit=Fit.none(),
        comparison=(),
        departures=no_window(event) if is_fault else (),
        verdict="undetermined",
    )


def _inception(event: events.Event, estimate: Estimate, fault_type: FaultType) -> Inception:
    at = estimate.inception
    time_s = Quantity.of(at.time_s, at.std_s, "s", low=at.low_s, high=at.high_s)
    if event.voltages_v is None:
        return Inception(time_s=time_s, voltage_angle_deg=Quantity.unknown("deg"), reference=None)
    loop = reference_loop(fault_type)
    before = [event.prefault.phasor_at(3 + k, at.time_s) for k in range(3)]
    driving = combine(list(loop.weights[0]), before)
    # sqrt(2) V sin(omega (t - t0) + alpha) has the phasor angle alpha - 90 degrees at t0.
    angle_deg = wrapped_deg(driving.angle_deg + 90.0)
    degrees_per_s = 360.0 * event.prefault.frequency_hz
    std_deg = math.hypot(driving.angle_std_deg, degrees_per_s * at.std_s)
    return Inception(
        time_s=time_s,
        voltage_angle_deg=_angle(angle_deg, std_deg),
        reference=reference_name(fault_type),
    )


def _clearing(event: events.Event) -> Clearing | None:
    opened = {
        phase: Quantity.of(end.time_s, end.std_s, "s")
        for phase, end in event.interruptions.items()
        if end is not None
    }
    if len(opened) < len(event.interruptions):
        return None  # the current of a faulted phase flows to the end of what was recorded
    last = max(opened.values(), key=lambda quantity: quantity.value or 0.0)
    return Clearing(time_s=last, by_phase_s=opened)


def _duration(estimate: Estimate, clearing: Clearing | None) -> Quantity | None:
    if clearing is None or clearing.time_s.value is None:
        return None
    std_s = math.hypot(estimate.inception.std_s, clearing.time_s.std or 0.0)
    return Quantity.of(clearing.time_s.value - estimate.inception.time_s, std_s, "s")


def _prefault(event: events.Event) -> Prefault:
    prefault = event.prefault

    def rms(offset: int, unit: Unit) -> dict[Phase, Quantity]:
        phasors = {phase: prefault.phasor(offset + k) for k, phase in enumerate(PHASES)}
        return {phase: _at_least_zero(p.magnitude, p.magnitude_std, unit) for phase, p in phasors.items()}

    std_hz = prefault.frequency_std_hz
    return Prefault(
        frequency_hz=Quantity.of(prefault.frequency_hz, std_hz, "Hz")
        if std_hz > 0
        else Quantity.unknown("Hz"),
        voltage_rms_v=rms(3, "V") if event.voltages_v is not None else {},
        current_rms_a=rms(0, "A"),
    )


def _phase(event: events.Event, estimate: Estimate, phase: Phase) -> PhaseFindings:
    fit = estimate.phases[phase]
    current = fit.phasor
    angle = Quantity.unknown("deg")
    if event.voltages_v is not None and event.fault_type is not None:
        before = [event.prefault.phasor_at(3 + k, estimate.inception.time_s) for k in range(3)]
        driving = combine(list(reference_loop(event.fault_type).weights[0]), before)
        std_deg = math.hypot(current.angle_std_deg, driving.angle_std_deg)
        angle = _angle(wrapped_deg(current.angle_deg - driving.angle_deg), std_deg)
    offsets = offsets_of(event, estimate, phase)
    return PhaseFindings(
        symmetrical_rms_a=_at_least_zero(current.magnitude, current.magnitude_std, "A"),
        angle_deg=angle,
        dc_initial_a=Quantity.of(offsets.fitted_a, offsets.fitted_std_a, "A"),
        dc_theory_a=Quantity.of(offsets.continuity_a, offsets.continuity_std_a, "A"),
        peak=_peak(event, estimate, phase),
    )


def _peak(event: events.Event, estimate: Estimate, phase: Phase) -> Peak:
    k = PHASES.index(phase)
    fit = estimate.phases[phase]
    sample = largest_sample(event, phase)
    end_s = float(event.times_s[estimate.window.stop - 1])
    peak, std_a = fit.peak(end_s=end_s)
    symmetrical, symmetrical_std = SQRT2 * fit.phasor.magnitude, SQRT2 * fit.phasor.magnitude_std
    ratio = peak.magnitude_a / symmetrical
    # A largest value at the very inception is an exponential run backwards out of the window: no peak.
    known = peak.place != "start"
    return Peak(
        measured_a=abs(float(event.currents_a[k, sample])),
        measured_time_s=float(event.times_s[sample]),
        model_a=_at_least_zero(peak.magnitude_a, std_a, "A") if known else Quantity.unknown("A"),
        model_time_s=fit.t_ref_s + peak.time_s if known else None,
        ratio=_at_least_zero(ratio, std_a / symmetrical + ratio * symmetrical_std / symmetrical, "1")
        if known
        else Quantity.unknown("1"),
        worst_case_a=_worst_case(estimate, symmetrical, symmetrical_std),
    )


def _worst_case(estimate: Estimate, symmetrical_peak_a: float, std_a: float) -> Quantity:
    """Largest peak over all inception angles, the same impedance and no load: kappa times the crest."""
    fit = estimate.loops[0][1]
    rate = fit.decay_rate_per_s
    if len(estimate.loops) > 1 or rate is None or rate <= 0:
        return Quantity.unknown("A")

    def kappa(decay_rate: float) -> float:
        ratio = fit.omega_rad_per_s / max(decay_rate, 1e-9)
        fault = RLFault.from_x_over_r(
            x_over_r=ratio,
            symmetrical_rms_a=1.0,
            voltage_rms_v=1.0,
            frequency_hz=fit.omega_rad_per_s / (2 * math.pi),
            inception_angle_deg=0.0,  # a voltage zero is the worst without load
        )
        return fault.kappa

    step = 1e-3 * rate
    slope = (kappa(rate + step) - kappa(rate - step)) / (2 * step)
    value = kappa(rate) * symmetrical_peak_a
    std = math.hypot(kappa(rate) * std_a, slope * symmetrical_peak_a * (fit.decay_rate_std or 0.0))
    return _at_least_zero(value, std, "A")


def _decay(loop: Loop, fit: LoopFit) -> Decay:
    tau, ratio = Quantity.unknown("s"), Quantity.unknown("1")
    rate, std = fit.decay_rate_per_s, fit.decay_rate_std
    if rate is not None and std is not None and rate > 0:
        # The limits turn round: the slowest decay is the longest time constant, without end at zero.
        slow = fit.decay_rate_low if fit.decay_rate_low is not None and fit.decay_rate_low > 0 else None
        fast = fit.decay_rate_high
        tau = Quantity.of(
            1 / rate, std / rate**2, "s", low=1 / fast if fast else None, high=1 / slow if slow else None
        )
        omega = fit.omega_rad_per_s
        ratio = Quantity.of(
            omega / rate,
            omega * std / rate**2,
            "1",
            low=omega / fast if fast else None,
            high=omega / slow if slow else None,
        )
    return Decay(loop=loop.name, time_constant_s=tau, x_over_r=ratio)


def _x_over_r(estimate: Estimate, rows: tuple[Comparison, ...]) -> XOverR:
    loop, fit = estimate.loops[0]
    from_decay = _decay(loop, fit).x_over_r
    by_angle = x_over_r(estimate.impedances.driven) if estimate.impedances else None
    from_angle = Quantity.unknown("1")
    if by_angle is not None:
        from_angle = _at_least_zero(by_angle[0], by_angle[1], "1")
    agree = any(row.check == "x-over-r-routes" and row.verdict == "agrees" for row in rows)
    return XOverR(
        from_decay=from_decay,
        from_angle=from_angle,
        from_waveform=_from_waveform(estimate),
        combined=_combined(from_decay, from_angle) if agree else Quantity.unknown("1"),
    )


def _from_waveform(estimate: Estimate) -> Quantity:
    found, omega = estimate.regression, estimate.loops[0][1].omega_rad_per_s
    if found is None or found.decay_rate_per_s <= _NORMAL_95 * found.std_per_s:
        return Quantity.unknown("1")
    rate, std = found.decay_rate_per_s, found.std_per_s
    half = _NORMAL_95 * std
    return Quantity.of(
        omega / rate, omega * std / rate**2, "1", low=omega / (rate + half), high=omega / (rate - half)
    )


def _combined(first: Quantity, second: Quantity) -> Quantity:
    """Weighted mean of two estimates taken as independent; their scatter widens it where it is the larger."""
    if first.value is None or second.value is None or not first.std or not second.std:
        return Quantity.unknown("1")
    weights = np.array([first.std**-2, second.std**-2])
    values = np.array([first.value, second.value])
    mean = float(weights @ values / weights.sum())
    scatter = float(weights @ (values - mean) ** 2)  # chi-square of one degree of freedom
    std = math.sqrt(max(1.0, scatter) / float(weights.sum()))
    return _at_least_zero(mean, std, "1")


def _impedance(estimate: Estimate) -> ImpedanceFindings:
    found = estimate.impedances
    if found is None:
        return ImpedanceFindings.unknown()
    return ImpedanceFindings(
        source=SourceImpedance(z1=_z(found.z1), z2=_z(found.z2), z0=_z(found.z0), method="incremental"),
        faulted_loop=_z(found.faulted_loop) if found.faulted_loop else None,
        faulted=_z(found.faulted) if found.faulted else None,
        total=_z(found.total),
    )


def _z(impedance: Phasor | None) -> Impedance:
    if impedance is None:
        return Impedance.unknown()
    covariance = impedance.covariance
    r_std, x_std = (math.sqrt(max(float(covariance[k, k]), 0.0)) for k in (0, 1))
    ratio = x_over_r(impedance)
    return Impedance(
        r_ohm=Quantity.of(impedance.value.real, r_std, "ohm"),
        x_ohm=Quantity.of(impedance.value.imag, x_std, "ohm"),
        magnitude_ohm=_at_least_zero(impedance.magnitude, impedance.magnitude_std, "ohm"),
        angle_deg=_angle(impedance.angle_deg, impedance.angle_std_deg),
        x_over_r=_at_least_zero(ratio[0], ratio[1], "1") if ratio else Quantity.unknown("1"),
        correlation_rx=max(-1.0, min(1.0, float(covariance[0, 1]) / (r_std * x_std)))
        if r_std > 0 and x_std > 0
        else None,
    )


def _fit(estimate: Estimate) -> Fit:
    _, fit = estimate.loops[0]
    noise = float(np.sqrt(np.mean(fit.noise_before_rms**2)))
    amplitude = float(np.hypot(fit.coefficients[0], fit.coefficients[1]).max())
    quiet = noise < _NO_NOISE * amplitude
    return Fit(
        samples=fit.n_samples,
        free_parameters=fit.free_parameters,
        noise_rms_a=noise,
        residual_rms_a=float(np.sqrt(np.mean(fit.residual_rms**2))),
        reduced_chi_square=None if quiet else fit.reduced_chi_square,
        lag1_autocorrelation=fit.lag1_autocorrelation,
        bound_ratio=None if quiet else fit.bound_ratio,
    )


def _verdict(
    estimate: Estimate, departures: tuple[DepartureInfo, ...]
) -> Literal["follows-theory", "departs", "undetermined"]:
    if any(departure.severity != "note" for departure in departures):
        return "departs"
    return "undetermined" if estimate.loops[0][1].decay_rate_per_s is None else "follows-theory"


def _angle(value_deg: float, std_deg: float) -> Quantity:
    """An angle whose interval would leave the circle is stated without one."""
    half = _NORMAL_95 * std_deg
    if value_deg - half > -180.0 and value_deg + half <= 180.0:
        return Quantity.of(value_deg, std_deg, "deg")
    return Quantity(value=value_deg, std=std_deg, low=None, high=None, unit="deg")


def _at_least_zero(value: float, std: float, unit: Unit) -> Quantity:
    """A magnitude: its interval ends at zero."""
    half = _NORMAL_95 * std
    return Quantity.of(value, std, unit, low=max(0.0, value - half), high=value + half)
