"""From the truths of network and instruments to the truth document; no number comes from the samples."""

from __future__ import annotations

import math
from collections.abc import Iterable

import numpy as np

from analyzer.findings_parts import Phase
from analyzer.forge import truth_document as doc
from analyzer.forge.circuit import ComplexArray
from analyzer.forge.effects import Effect
from analyzer.forge.instruments.class_errors import TransformerError
from analyzer.forge.instruments.truth import ChainTruth, PutIn
from analyzer.forge.loops import SequenceImpedances
from analyzer.forge.measure import Peak
from analyzer.forge.scenario import Scenario
from analyzer.forge.scenario_file import plain_tree
from analyzer.forge.scenario_instruments import Role
from analyzer.forge.truth import EventTruth, FaultTruth, PrimaryTruth, wrap_deg

_PHASES: tuple[Phase, ...] = ("A", "B", "C")


def build_truth(
    *,
    record: doc.TrueRecord,
    scenario: Scenario,
    primary: PrimaryTruth,
    chain: ChainTruth,
    channels: tuple[Role, ...],
    lead_s: float,
) -> doc.TruthDocument:
    """Return the truth document of a record.

    Parameters
    ----------
    record : TrueRecord
        What it is called and how long it is.
    scenario : Scenario
        Drawn.
    primary : PrimaryTruth
        On the solution's clock.
    chain : ChainTruth
        On the record's clock.
    channels : tuple of str
        As recorded, in the order of the chain's per-channel truths.
    lead_s : float
        By how much the solution's clock is ahead of the record's. [s]
    """
    instruments = _instruments(chain, channels)
    return doc.TruthDocument(
        record=record,
        instruments=instruments,
        events=tuple(_event(event, lead_s, instruments.delay_s) for event in primary.events),
        departures=tuple(_put_in(item) for item in chain.departures),
        scenario=plain_tree(scenario),
    )


def _instruments(chain: ChainTruth, channels: tuple[Role, ...]) -> doc.TrueInstruments:
    saturation = None
    if chain.saturation is not None:
        s = chain.saturation
        saturation = {
            phase: doc.PhaseSaturation(
                first_crossing_s=s.first_crossing_s[k],
                saturated_fraction=s.saturated_fraction[k],
                peak_flux_pu=s.peak_flux_pu[k],
                peak_magnetising_a=s.peak_magnetising_a[k],
            )
            for k, phase in enumerate(_PHASES)
        }
    return doc.TrueInstruments(
        delay_s=chain.filter_delay_s,
        delay_at_zero_s=chain.filter_delay_at_zero_s,
        filter_gain=_gain(chain.filter_gain),
        relay_filter_gain=_gain(chain.relay_filter_gain),
        ct_time_constant_s=chain.ct_time_constant_s,
        ct_errors=_errors(chain.ct_errors),
        vt_errors=_errors(chain.vt_errors),
        saturation=saturation,
        skew_s=dict(zip(channels, chain.skew_s, strict=True)),
        noise_rms=dict(zip(channels, chain.noise_rms, strict=True)),
        value_per_count=dict(zip(channels, chain.value_per_count, strict=False)),
        clipped_samples=dict(zip(channels, chain.clipped_samples, strict=True)),
        solver_error_a=chain.solver_error_a,
    )


def _gain(value: complex) -> doc.Gain:
    return doc.Gain(magnitude=abs(value), angle_deg=_angle(value))


def _angle(value: complex) -> float:
    return wrap_deg(math.degrees(math.atan2(value.imag, value.real)))


def _errors(errors: tuple[TransformerError, ...]) -> dict[Phase, doc.TrueError]:
    return {
        phase: doc.TrueError(ratio_pu=error.ratio_pu, phase_minutes=error.phase_minutes)
        for phase, error in zip(_PHASES, errors, strict=False)
    }


def _put_in(item: PutIn) -> doc.TrueDeparture:
    return doc.TrueDeparture(
        code=item.code,  # type: ignore[arg-type]  # checked by the model
        time_s=item.time_s,
        channels=item.channels,  # type: ignore[arg-type]
        strength=item.strength,
        unit=None,
        says=item.measure,
    )


def _effect(effect: Effect, lead_s: float) -> doc.TrueDeparture:
    return doc.TrueDeparture(
        code=effect.code,  # type: ignore[arg-type]  # checked by the model
        time_s=effect.time_s - lead_s,
        channels=(),
        strength=effect.strength,
        unit=effect.unit,
        says=effect.says,
    )


def _event(event: EventTruth, lead_s: float, delay_s: float) -> doc.TrueEvent:
    fault = event.fault
    faulted = [k for k, phase in enumerate(_PHASES) if fault is None or phase in fault.fault_type]
    opened: dict[Phase, float] = {
        _PHASES[k]: at - lead_s for k in faulted if (at := event.opened_s[k]) is not None
    }
    cleared_s = None if event.cleared_s is None else event.cleared_s - lead_s
    omega = 2.0 * math.pi * event.frequency_hz
    inception_s = event.inception_s - lead_s
    return doc.TrueEvent(
        kind=event.kind,
        fault_type=None if fault is None else fault.fault_type,
        direction=None if fault is None else fault.direction,
        inception=doc.TrueInception(
            time_s=inception_s,
            delay_s=delay_s,
            voltage_angle_deg=event.inception_angle_deg,
            reference=event.reference,  # type: ignore[arg-type]  # checked by the model
        ),
        clearing=doc.TrueClearing(time_s=cleared_s, by_phase_s=opened) if opened or cleared_s else None,
        duration_s=None if cleared_s is None else cleared_s - inception_s,
        prefault=_prefault(event),
        phases={_PHASES[k]: _phase(fault, k, event.peaks[k], lead_s) for k in faulted},
        segments=() if fault is None else _segments(fault, inception_s, lead_s),
        decay=() if fault is None else tuple(_decays(fault, omega)),
        modes=() if fault is None else tuple(_modes(fault)),
        x_over_r=None if fault is None else _ratio(fault.loops[0].formula_ohm),
        impedance=None if fault is None else _impedances(fault),
        departures=tuple(_effect(effect, lead_s) for effect in event.effects),
    )


def _prefault(event: EventTruth) -> doc.TruePrefault:
    angle = event.inception_angle_deg

    def angles(phasors: ComplexArray) -> dict[Phase, float | None]:
        # The reference loop's voltage is sin(omega t + angle), a cosine of 90 degrees less.
        return {
            phase: None if angle is None or value == 0.0 else wrap_deg(_angle(complex(value)) - angle + 90.0)
            for phase, value in zip(_PHASES, phasors, strict=True)
        }

    def sizes(phasors: ComplexArray) -> dict[Phase, float]:
        return {phase: float(size) for phase, size in zip(_PHASES, np.abs(phasors), strict=True)}

    return doc.TruePrefault(
        frequency_hz=event.frequency_hz,
        voltage_rms_v=sizes(event.prefault_voltage_v),
        voltage_angle_deg=angles(event.prefault_voltage_v),
        current_rms_a=sizes(event.prefault_current_a),
        current_angle_deg=angles(event.prefault_current_a),
    )


def _phase(fault: FaultTruth | None, k: int, peak: Peak, lead_s: float) -> doc.TruePhase:
    size = 0.0 if fault is None else abs(complex(fault.symmetrical_current_a[k]))
    return doc.TruePhase(
        symmetrical_rms_a=None if fault is None else size,
        angle_deg=None if fault is None else float(fault.angle_deg[k]),
        steady_rms_a=None if fault is None else abs(complex(fault.steady_current_a[k])),
        dc_initial_a=None if fault is None else float(fault.offset_a[k]),
        peak=doc.TruePeak(
            value_a=peak.value_a,
            time_s=peak.time_s - lead_s,
            ratio=peak.value_a / (math.sqrt(2.0) * size) if size > 0.0 else None,
        ),
    )


def _segments(fault: FaultTruth, inception_s: float, lead_s: float) -> tuple[doc.TrueSegment, ...]:
    changes = [(time_s - lead_s, kind) for time_s, kind in fault.changes]
    return tuple(
        doc.TrueSegment(time_s=time_s, fault_type=kind)
        for time_s, kind in [(inception_s, fault.fault_type), *changes]
    )


def _decays(fault: FaultTruth, omega: float) -> Iterable[doc.TrueDecay]:
    for loop in fault.loops:
        tau = loop.time_constant_s
        tau = tau if tau is not None and math.isfinite(tau) else None
        yield doc.TrueDecay(
            loop=loop.loop,  # type: ignore[arg-type]  # checked by the model
            time_constant_s=tau,
            x_over_r=None if tau is None else omega * tau,
            exact=loop.exact,
        )


def _modes(fault: FaultTruth) -> Iterable[doc.TrueMode]:
    for mode in fault.modes:
        sizes = mode.amplitude_a.real if mode.frequency_hz == 0.0 else np.abs(mode.amplitude_a)
        yield doc.TrueMode(
            time_constant_s=mode.time_constant_s if math.isfinite(mode.time_constant_s) else None,
            frequency_hz=mode.frequency_hz,
            amplitude_a={phase: float(size) for phase, size in zip(_PHASES, sizes, strict=True)},
        )


def _ratio(z_ohm: complex | None) -> float | None:
    return None if z_ohm is None or z_ohm.real == 0.0 else z_ohm.imag / z_ohm.real


def _impedance(z_ohm: complex) -> doc.TrueImpedance:
    return doc.TrueImpedance(
        r_ohm=z_ohm.real,
        x_ohm=z_ohm.imag,
        magnitude_ohm=abs(z_ohm),
        angle_deg=_angle(z_ohm),
        x_over_r=_ratio(z_ohm),
    )


def _maybe(z_ohm: complex | None) -> doc.TrueImpedance | None:
    return None if z_ohm is None else _impedance(z_ohm)


def _impedances(fault: FaultTruth) -> doc.TrueImpedances:
    first = fault.loops[0]
    # What the terminal's current change reveals is behind it: seen from a reverse fault, the line's side.
    seen: SequenceImpedances = fault.behind if fault.direction == "forward" else fault.ahead
    return doc.TrueImpedances(
        source=doc.TrueSource(z1=_maybe(seen.z1_ohm), z2=_maybe(seen.z2_ohm), z0=_maybe(seen.z0_ohm)),
        faulted_loop=_maybe(first.faulted_ohm),
        faulted=_impedance(fault.faulted_z1_ohm),
        total=_maybe(first.total_ohm),
        loops=tuple(
            doc.TrueLoop(
                loop=loop.loop,  # type: ignore[arg-type]  # checked by the model
                circuit=_maybe(loop.formula_ohm),
                total=_maybe(loop.total_ohm),
                faulted_loop=_maybe(loop.faulted_ohm),
            )
            for loop in fault.loops
        ),
    )
