"""Which departures from plain R-L theory a forged event holds, and how strongly."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np

from analyzer.forge.circuit import ComplexArray
from analyzer.forge.events import Span
from analyzer.forge.measure import NaturalMode, Peak, longest_wait
from analyzer.forge.schedule import Fault, FrequencyRamp
from analyzer.forge.solution import Solution


class _Add(Protocol):
    def __call__(self, code: str, strength: float, unit: str, says: str, *, time_s: float = ...) -> None: ...


_SHOWN = 1e-6  # share below which an effect is there by rounding only


@dataclass(frozen=True, slots=True, kw_only=True)
class Effect:
    """A departure that is really in the record.

    Parameters
    ----------
    code : str
        In the words of the findings' departure codes.
    time_s : float
        Where it begins. [s]
    strength : float
        How strong, in `unit`.
    unit : str
        Of the strength.
    says : str
        What the strength measures.
    """

    code: str
    time_s: float
    strength: float
    unit: str
    says: str


def effects_of(
    solution: Solution,
    span: Span,
    *,
    peaks: tuple[Peak, Peak, Peak],
    modes: tuple[NaturalMode, ...],
    symmetrical_a: ComplexArray | None,
    steady_a: ComplexArray | None,
) -> tuple[Effect, ...]:
    """Return the departures of one event.

    Parameters
    ----------
    solution : Solution
        The record.
    span : Span
        The event.
    peaks : tuple of Peak
        Its phase peaks.
    modes : tuple of NaturalMode
        Its exponentials.
    symmetrical_a, steady_a : ndarray of complex, shape (3,), or None
        Power-frequency currents at inception and settled; None where it is no fault. [A]

    Returns
    -------
    tuple of Effect
        None of the instruments' own: those are the instrument chain's to tell.
    """
    found: list[Effect] = []

    def add(code: str, strength: float, unit: str, says: str, *, time_s: float = span.start_s) -> None:
        found.append(Effect(code=code, time_s=time_s, strength=strength, unit=unit, says=says))

    if any(m.where == "transformer" and m.what == "connected" for m in span.marks):
        add(
            "inrush",
            max(peak.value_a for peak in peaks),
            "A",
            "largest line current while the core is magnetised",
        )
    for ramp in solution.schedule.happenings:
        if isinstance(ramp, FrequencyRamp) and ramp.time_s < span.stop_s and ramp.end_s > span.start_s:
            low, high = max(ramp.time_s, span.start_s), min(ramp.end_s, span.stop_s)
            add(
                "frequency-excursion",
                ramp.rate_hz_per_s * (high - low),
                "Hz",
                "change within the event",
                time_s=low,
            )
    ringing = [mode for mode in modes if mode.frequency_hz > 2.0 * solution.network.nominal_frequency_hz]
    if ringing:
        size = max(float(np.abs(mode.amplitude_a).max()) for mode in ringing)
        add("oscillatory-start", size, "A", "initial amplitude of the ringing in the line current")
    fault = span.fault
    if fault is not None and symmetrical_a is not None and steady_a is not None:
        _fault_effects(solution, span, fault, modes, symmetrical_a, steady_a, add)
    return tuple(found)


def _fault_effects(
    solution: Solution,
    span: Span,
    fault: Fault,
    modes: tuple[NaturalMode, ...],
    symmetrical_a: ComplexArray,
    steady_a: ComplexArray,
    add: _Add,
) -> None:
    network, faulted = solution.network, list(fault.phases)
    offsets = [np.abs(mode.amplitude_a[faulted]) for mode in modes if mode.frequency_hz == 0.0]
    if len(offsets) > 1:
        table = np.array(offsets)
        sums = np.maximum(table.sum(axis=0), 1e-300)
        second = float((1.0 - table.max(axis=0) / sums).max())
        if second > _SHOWN:
            add(
                "two-time-constants",
                second,
                "1",
                "largest share of a phase's offset outside its main exponential",
            )
    if network.machine is not None:
        size = np.abs(symmetrical_a[faulted])
        fall = float((1.0 - np.abs(steady_a[faulted]) / np.maximum(size, 1e-300)).max())
        if fall > _SHOWN:
            add("ac-decrement", fall, "1", "share of the initial symmetrical current that decays")
    if network.converter is not None:
        strength = network.converter.limit_rms_a
        add("limited-source", strength, "A", "rms current at which the converter's control holds")
    changes = [m for m in span.marks if m.what == "change"]
    if changes:
        add("evolving-fault", float(len(changes)), "1", "number of changes", time_s=changes[0].time_s)
    arcs = [m.fault.arc for m in span.marks if m.fault is not None and m.fault.arc is not None]
    if arcs or fault.arc is not None:
        arc = arcs[0] if arcs else fault.arc
        assert arc is not None
        add("arcing", arc.voltage_v, "V", "arc voltage of each faulted phase")
    idle = {(m.phase, m.time_s) for m in span.marks if m.what == "opened"}
    restrikes = [m for m in span.marks if m.what == "restruck" and (m.phase, m.time_s) not in idle]
    if restrikes:
        add("restrike", float(len(restrikes)), "1", "number of restrikes", time_s=restrikes[0].time_s)
    cycle_s = 2.0 * np.pi / solution.course.omega_rad_s(span.start_s)
    alone = all(m.what != "opened" or m.time_s > span.stop_s for m in span.marks)
    if span.ended and alone and span.stop_s - span.start_s < cycle_s:
        add("self-clearing", span.stop_s - span.start_s, "s", "duration without a breaker")
    wait = max(longest_wait(solution, p, start_s=span.start_s, stop_s=span.stop_s) for p in faulted)
    if wait > cycle_s:
        add("delayed-zeros", wait, "s", "longest time without a zero crossing of a faulted phase")
