"""What is true of a forged record, computed from its circuit and never from its samples."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from analyzer.forge.circuit import ComplexArray, FloatArray
from analyzer.forge.effects import Effect, effects_of
from analyzer.forge.events import EventKind, Span, read_events
from analyzer.forge.loops import (
    Loop,
    SequenceImpedances,
    driven_loops,
    impedances_at,
    line_impedance,
    loop_impedance,
    reference_loop,
)
from analyzer.forge.measure import (
    Alternating,
    NaturalMode,
    Peak,
    alternating,
    natural_modes,
    phase_peaks,
)
from analyzer.forge.network import Network
from analyzer.forge.nonlinear import OdeStretch
from analyzer.forge.schedule import Fault, FaultType, Schedule
from analyzer.forge.solution import Solution, solve
from analyzer.forge.stretches import Stretch

_EXACT = 1e-9  # a network's mode this close to the loop's R/L is that loop's


@dataclass(frozen=True, slots=True, kw_only=True)
class LoopTruth:
    """One driven loop of a fault.

    Parameters
    ----------
    loop : str
        'AG', 'BC', 'BC+G' or 'ABC'.
    total_ohm : complex or None
        Prefault loop voltage at the bus over the loop's power-frequency fault current; None where it has
        none. [ohm]
    faulted_ohm : complex or None
        Loop voltage over loop current at the terminal during the fault. [ohm]
    formula_ohm : complex or None
        Sum of what lies behind the terminal, the line to the fault, and its resistances. [ohm]
    formula_time_constant_s : float or None
        Of that sum. [s]
    time_constant_s : float or None
        Of the network's own exponential nearest to it. [s]
    exact : bool
        Whether the two are the same: a simple loop, whose offset is that one exponential.
    """

    loop: str
    total_ohm: complex | None
    faulted_ohm: complex | None
    formula_ohm: complex | None
    formula_time_constant_s: float | None
    time_constant_s: float | None
    exact: bool


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class FaultTruth:
    """What is true of a fault besides its times.

    Parameters
    ----------
    fault_type : str
        At its beginning.
    changes : tuple of (float, str)
        Instants at which it became another, and which. [s]
    direction : {'forward', 'reverse'}
        From the recorder.
    symmetrical_current_a : ndarray of complex, shape (3,)
        Power-frequency line current right at inception, RMS phasors referred to that instant. [A]
    steady_current_a : ndarray of complex, shape (3,)
        What it tends to once machines and converters have settled, before anything opens or changes. [A]
    angle_deg : ndarray, shape (3,)
        Of `symmetrical_current_a` against the reference loop's prefault voltage. [deg]
    offset_a : ndarray, shape (3,)
        Sum of the network's exponentials at inception. [A]
    modes : tuple of NaturalMode
        Each of them; empty where the fault was integrated (arc, moving frequency).
    loops : tuple of LoopTruth
        The loops that the type drives.
    behind : SequenceImpedances
        What lies behind the terminal at the actual frequency, all that is connected there in parallel. [ohm]
    ahead : SequenceImpedances
        What lies at the line's far end, seen from the bus through the line. [ohm]
    source_time_constant_s : float or None
        L1/R1 of the source by itself; infinite where it has no resistance. [s]
    faulted_z1_ohm : complex
        Positive-sequence impedance from the bus to the fault. [ohm]
    """

    fault_type: FaultType
    changes: tuple[tuple[float, FaultType], ...]
    direction: Literal["forward", "reverse"]
    symmetrical_current_a: ComplexArray
    steady_current_a: ComplexArray
    angle_deg: FloatArray
    offset_a: FloatArray
    modes: tuple[NaturalMode, ...]
    loops: tuple[LoopTruth, ...]
    behind: SequenceImpedances
    ahead: SequenceImpedances
    source_time_constant_s: float | None
    faulted_z1_ohm: complex


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class EventTruth:
    """What is true of one event.

    Parameters
    ----------
    kind : {'fault', 'energisation', 'switching'}
        What it is.
    inception_s : float
        Exact. [s]
    cleared_s : float or None
        Where the last faulted phase was interrupted. [s]
    opened_s : tuple of three float or None
        Interruption of each phase, at its own current zero. [s]
    frequency_hz : float
        At inception. [Hz]
    reference : str
        Loop that the inception angle refers to.
    inception_angle_deg : float or None
        Its voltage before, carried forward, is sqrt2 V sin(omega (t - t0) + angle); None where it was dead.
    prefault_voltage_v, prefault_current_a : ndarray of complex, shape (3,)
        RMS phasors before, referred to the inception. [V, A]
    peaks : tuple of three Peak
        Largest |current| of each phase within the event.
    fault : FaultTruth or None
        For faults.
    effects : tuple of Effect
        Departures from one symmetrical current and one exponential that were put in.
    """

    kind: EventKind
    inception_s: float
    cleared_s: float | None
    opened_s: tuple[float | None, float | None, float | None]
    frequency_hz: float
    reference: str
    inception_angle_deg: float | None
    prefault_voltage_v: ComplexArray
    prefault_current_a: ComplexArray
    peaks: tuple[Peak, Peak, Peak]
    fault: FaultTruth | None
    effects: tuple[Effect, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class PrimaryTruth:
    """All that is true of a solved record, before any instrument.

    Parameters
    ----------
    nominal_frequency_hz, duration_s : float
        Of the record. [Hz, s]
    events : tuple of EventTruth
        In order of time.
    """

    nominal_frequency_hz: float
    duration_s: float
    events: tuple[EventTruth, ...]


def primary_truth(solution: Solution) -> PrimaryTruth:
    """Return what is true of a solved record.

    Parameters
    ----------
    solution : Solution
        From `solve`.

    Returns
    -------
    PrimaryTruth
        Phasors, offsets and modes come from the stretches' exponentials, instants and peaks from roots.

    Raises
    ------
    ForgeError
        If the periodic state of an arcing fault is not found.
    """
    return PrimaryTruth(
        nominal_frequency_hz=solution.network.nominal_frequency_hz,
        duration_s=solution.duration_s,
        events=tuple(_event(solution, span) for span in read_events(solution)),
    )


def inception_for_angle(
    network: Network,
    fault_type: FaultType,
    *,
    angle_deg: float,
    not_before_s: float,
    frequency_hz: float | None = None,
) -> float:
    """Return the first instant at which a fault would begin at a given point on wave.

    Parameters
    ----------
    network : Network
        In its load flow.
    fault_type : str
        Decides the reference loop.
    angle_deg : float
        Of its voltage at the bus: 0 is a rising zero crossing, 90 the positive crest. [deg]
    not_before_s : float
        Earliest instant. [s]
    frequency_hz : float or None
        None means nominal. [Hz]

    Returns
    -------
    float
        Within one cycle after `not_before_s`. [s]
    """
    before = solve(network, Schedule(frequency_hz=frequency_hz), duration_s=1.0)
    phasors = alternating(before, before.stretches[0], time_s=0.0).voltage_v
    start_deg = np.degrees(np.angle(reference_loop(fault_type).weights @ phasors)) + 90.0
    hz = network.nominal_frequency_hz if frequency_hz is None else frequency_hz
    turns = (angle_deg - start_deg) / 360.0 - not_before_s * hz
    return float(not_before_s + (turns % 1.0) / hz)


def _event(solution: Solution, span: Span) -> EventTruth:
    before, after = _stretch_before(solution, span.start_s), _stretch_after(solution, span.start_s)
    prior = alternating(solution, before, time_s=span.start_s)
    loop = reference_loop("AG" if span.fault is None else span.fault.type)
    driving = complex(loop.weights @ prior.voltage_v)
    dead = abs(driving) <= 1e-9 * max(float(np.abs(prior.voltage_v).max()), 1e-300)
    peaks = phase_peaks(solution, start_s=span.start_s, stop_s=span.stop_s)
    fault = None
    if span.fault is not None:
        fault = _fault(solution, span, span.fault, prior, after, driving)
    return EventTruth(
        kind=span.kind,
        inception_s=span.start_s,
        cleared_s=span.stop_s if span.ended else None,
        opened_s=span.opened_s,
        frequency_hz=solution.course.omega_rad_s(span.start_s) / (2.0 * np.pi),
        reference=loop.name,
        inception_angle_deg=None if dead else wrap_deg(float(np.degrees(np.angle(driving))) + 90.0),
        prefault_voltage_v=prior.voltage_v,
        prefault_current_a=prior.current_a,
        peaks=peaks,
        fault=fault,
        effects=effects_of(
            solution,
            span,
            peaks=peaks,
            modes=natural_modes(solution, after),
            symmetrical_a=None if fault is None else fault.symmetrical_current_a,
            steady_a=None if fault is None else fault.steady_current_a,
        ),
    )


def _fault(
    solution: Solution, span: Span, fault: Fault, prior: Alternating, after: Stretch, driving: complex
) -> FaultTruth:
    network = solution.network
    hz = solution.course.omega_rad_s(span.start_s) / (2.0 * np.pi)
    ratio = hz / network.nominal_frequency_hz
    during = alternating(solution, after, time_s=span.start_s)
    now, _ = after.outputs(np.array([span.start_s]), solution.circuit.groups["near"])
    switched_out = frozenset(
        name
        for name, branches in solution.circuit.poles.items()
        if all(int(branch) in after.space.open_branches for branch in branches)
    )
    behind = impedances_at(network, "bus", frequency_hz=hz, open_elements=switched_out)
    beyond = SequenceImpedances(z1_ohm=None, z2_ohm=None, z0_ohm=None)
    if "remote" not in switched_out:
        beyond = impedances_at(network, "end", frequency_hz=hz, open_elements=switched_out)
    whole1 = line_impedance(network.line.z1_ohm, fraction=1.0, frequency_ratio=ratio)
    whole0 = line_impedance(network.line.z0_ohm, fraction=1.0, frequency_ratio=ratio)
    path = network.line if fault.side == "ahead" or network.adjacent is None else network.adjacent
    to_fault1 = line_impedance(path.z1_ohm, fraction=fault.fraction, frequency_ratio=ratio)
    to_fault0 = line_impedance(path.z0_ohm, fraction=fault.fraction, frequency_ratio=ratio)
    fed_from = behind if fault.side == "ahead" else SequenceImpedances(z1_ohm=None, z2_ohm=None, z0_ohm=None)
    source = network.source
    return FaultTruth(
        fault_type=fault.type,
        changes=tuple(
            (m.time_s, m.fault.type) for m in span.marks if m.what == "change" and m.fault is not None
        ),
        direction="forward" if fault.side == "ahead" else "reverse",
        symmetrical_current_a=during.current_a,
        steady_current_a=_settled(solution, span, after, during),
        angle_deg=_angles(during.current_a, driving),
        # What of the current is not alternating right after inception, the network's exponentials bear.
        offset_a=now[:, 0] - np.sqrt(2.0) * during.current_a.real,
        modes=natural_modes(solution, after),
        loops=tuple(
            _loop(loop, fault, prior, during, after, fed_from, to_fault1, to_fault0, omega=2.0 * np.pi * hz)
            for loop in driven_loops(fault.type)
        ),
        behind=behind,
        ahead=SequenceImpedances(
            z1_ohm=None if beyond.z1_ohm is None else beyond.z1_ohm + whole1,
            z2_ohm=None if beyond.z2_ohm is None else beyond.z2_ohm + whole1,
            z0_ohm=None if beyond.z0_ohm is None else beyond.z0_ohm + whole0,
        ),
        source_time_constant_s=None
        if source is None
        else _time_constant(source.z1_ohm, omega=2.0 * np.pi * network.nominal_frequency_hz),
        faulted_z1_ohm=to_fault1,
    )


def _loop(
    loop: Loop,
    fault: Fault,
    prior: Alternating,
    during: Alternating,
    after: Stretch,
    fed_from: SequenceImpedances,
    to_fault1: complex,
    to_fault0: complex,
    *,
    omega: float,
) -> LoopTruth:
    current = complex(loop.weights @ during.current_a)
    carries = abs(current) > 1e-12 * float(np.abs(during.current_a).max())
    formula: complex | None = None
    needs_zero = loop.name.endswith("G")
    if fed_from.z1_ohm is not None and (fed_from.z0_ohm is not None or not needs_zero):
        z0 = 0j if fed_from.z0_ohm is None else fed_from.z0_ohm + to_fault0
        formula = loop_impedance(loop, fault, z1_ohm=fed_from.z1_ohm + to_fault1, z0_ohm=z0)
    wanted = None if formula is None else _time_constant(formula, omega=omega)
    nearest = None if wanted is None else _nearest_time_constant(after, wanted)
    return LoopTruth(
        loop=loop.name,
        total_ohm=complex(loop.weights @ prior.voltage_v) / current if carries else None,
        faulted_ohm=complex(loop.weights @ during.voltage_v) / current if carries else None,
        formula_ohm=formula,
        formula_time_constant_s=wanted,
        time_constant_s=nearest,
        exact=wanted is not None and nearest is not None and abs(nearest - wanted) <= _EXACT * wanted,
    )


def _time_constant(z_ohm: complex, *, omega: float) -> float:
    return float("inf") if z_ohm.real <= 0.0 else z_ohm.imag / (omega * z_ohm.real)


def _nearest_time_constant(stretch: Stretch, wanted_s: float) -> float | None:
    values = np.linalg.eigvals(stretch.space.a) if stretch.space.n else np.zeros(0)
    real = -values.real[(np.abs(values.imag) <= 1e-9 * np.abs(values)) & (values.real < 0.0)]
    if not len(real) or not np.isfinite(wanted_s) or wanted_s <= 0.0:
        return None
    return float(1.0 / real[np.argmin(np.abs(np.log(real * wanted_s)))])


def _settled(solution: Solution, span: Span, after: Stretch, during: Alternating) -> ComplexArray:
    """Steady phasors of the last stretch before anything opens or changes, referred to the inception."""
    ends = [m.time_s for m in span.marks if m.time_s > span.start_s and m.what != "connected"]
    stop_s = min([*ends, span.stop_s])
    last = [s for s in solution.stretches if s.start_s < stop_s and s.stop_s > span.start_s][-1]
    constant = solution.network.machine is None and solution.network.converter is None
    if last is after or (last.space is after.space and constant):
        return during.steady_current_a
    if isinstance(last, OdeStretch):
        return alternating(solution, last, time_s=span.start_s).steady_current_a
    phasor = alternating(solution, last, time_s=last.start_s).steady_current_a
    travelled = solution.course.theta_rad(last.start_s) - solution.course.theta_rad(span.start_s)
    return np.asarray(phasor * np.exp(-1j * travelled))


def _stretch_before(solution: Solution, time_s: float) -> Stretch:
    return next(s for s in reversed(solution.stretches) if s.start_s < time_s)


def _stretch_after(solution: Solution, time_s: float) -> Stretch:
    return next(s for s in solution.stretches if s.stop_s > time_s)


def _angles(phasors: ComplexArray, reference: complex) -> FloatArray:
    return np.array([wrap_deg(float(np.degrees(np.angle(p * np.conj(reference))))) for p in phasors])


def wrap_deg(angle_deg: float) -> float:
    """Return an angle in (-180, 180]."""
    return float(180.0 - (180.0 - angle_deg) % 360.0)
