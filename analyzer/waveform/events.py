"""From a terminal's samples to its events, each with its prefault, type, first sample and end."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from analyzer.records import Record
from analyzer.terminals import Terminal
from analyzer.theory.modes import PHASES, FaultType, Phase, faulted_phases
from analyzer.waveform.clearing import Interruption, interruption
from analyzer.waveform.inception import departure, first_change
from analyzer.waveform.kinds import fault_type_of, kind_of
from analyzer.waveform.prefault import Prefault, coarse_frequency, fit_prefault
from analyzer.waveform.sampling import aligned_signals
from analyzer.waveform.scan import searched_parts
from analyzer.waveform.stretches import Stretch

_MAX_PREFAULT_CYCLES = 10.0
_MIN_PREFAULT_CYCLES = 0.75
_REFINE_FROM_CYCLES = 1.5
_MAX_EVENTS = 32  # of one stretch, or of one window of a long one
_SMALLEST_CHANGE = 0.1  # of the current; less is not worth an event
_NOTHING_A = 1e-6  # the rounding of a computed record, which has no noise to hide it


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Event:
    """A change of the terminal's currents, in the samples of one stretch.

    Attributes
    ----------
    kind : {"fault", "energisation", "switching", "unclassified"}
    fault_type : str or None
        None where the event is no fault.
    times_s : ndarray of float64, shape (n,)
        Sample times of the stretch. [s]
    currents_a : ndarray of float64, shape (3, n)
        Phases A, B, C, the converter's zero taken off. [A]
    voltages_v : ndarray of float64, shape (3, n), or None
        Phases A, B, C, zero taken off. [V]
    prefault : Prefault
        Channels: the three currents, then the three voltages where there are any; origin at `first_s`.
    first : int
        First sample that departs.
    interruptions : mapping of phase to Interruption or None
        Of the faulted phases.
    follows_fault : bool
        Whether the state before was another fault: then the current does not leave the prefault one here.
    """

    kind: Literal["fault", "energisation", "switching", "unclassified"]
    fault_type: FaultType | None
    times_s: NDArray[np.float64]
    currents_a: NDArray[np.float64]
    voltages_v: NDArray[np.float64] | None
    prefault: Prefault
    first: int
    interruptions: dict[Phase, Interruption | None]
    follows_fault: bool = False

    @property
    def first_s(self) -> float:
        """Time of the first sample that departs. [s]"""
        return float(self.times_s[self.first])

    @property
    def sample_interval_s(self) -> float:
        """Mean sampling interval. [s]"""
        return float((self.times_s[-1] - self.times_s[0]) / (len(self.times_s) - 1))

    @property
    def end(self) -> int:
        """First sample after the fault: where the first pole interrupts, or the end of the stretch."""
        opened = [end.sample for end in self.interruptions.values() if end is not None]
        return min(opened, default=len(self.times_s))


def find_events(
    record: Record, terminal: Terminal, stretches: tuple[Stretch, ...], *, nominal_hz: float
) -> tuple[Event, ...]:
    """Return the events of a terminal in the order of time.

    Parameters
    ----------
    record : Record
    terminal : Terminal
    stretches : tuple of Stretch
        Where a wave of power frequency can be seen.
    nominal_hz : float
        Power frequency, roughly. [Hz]

    Returns
    -------
    tuple of Event
    """
    events: list[Event] = []
    for stretch in stretches:
        for part in searched_parts(record, terminal.signals, stretch, frequency_hz=nominal_hz):
            times_s, currents, voltages = aligned_signals(record, terminal, part)
            events.extend(_events_of_stretch(times_s, currents, voltages, nominal_hz=nominal_hz))
    return tuple(events)


def _events_of_stretch(
    times_s: NDArray[np.float64],
    currents: NDArray[np.float64],
    voltages: NDArray[np.float64] | None,
    *,
    nominal_hz: float,
) -> list[Event]:
    events: list[Event] = []
    rate_hz = (len(times_s) - 1) / float(times_s[-1] - times_s[0])
    cycle = rate_hz / nominal_hz
    settled, after = 0, 0
    while len(events) < _MAX_EVENTS:
        change = first_change(times_s, currents, frequency_hz=nominal_hz, after=after)
        if change is None:
            break
        event = _event_at(times_s, currents, voltages, change, settled, cycle, nominal_hz)
        if event is None:
            after = change + round(cycle)
        else:
            events.append(event)
            opened = [end.sample for end in event.interruptions.values() if end is not None]
            if event.kind == "fault" and not opened:
                break
            after = (max(opened) if opened else change) + round(1.5 * cycle)
        settled = after - round(0.5 * cycle)
    return events


def _event_at(
    times_s: NDArray[np.float64],
    currents: NDArray[np.float64],
    voltages: NDArray[np.float64] | None,
    change: int,
    settled: int,
    cycle: float,
    nominal_hz: float,
) -> Event | None:
    """Return the event whose change is at a sample, None where there is too little before or after it."""
    guard = max(3, round(0.3 * cycle))
    stop = change - guard
    start = max(settled, stop - round(_MAX_PREFAULT_CYCLES * cycle), 0)
    if stop - start < _MIN_PREFAULT_CYCLES * cycle or len(times_s) - change < 0.75 * cycle:
        return None
    stacked = currents if voltages is None else np.vstack([currents, voltages])
    window = slice(start, stop)
    cycles = (stop - start) / cycle
    guide = stacked[3:, window] if voltages is not None else stacked[:, window]
    refine = cycles >= _REFINE_FROM_CYCLES and bool(np.ptp(guide, axis=1).max() > 0)
    frequency_hz = coarse_frequency(times_s[window], guide, nominal_hz=nominal_hz) if refine else nominal_hz
    prefault = fit_prefault(
        times_s[window],
        stacked[:, window],
        t_ref_s=float(times_s[change]),
        frequency_hz=frequency_hz,
        refine=refine,
        fallback_hz=nominal_hz,
        n_currents=3,
    )
    search_from = max(stop - guard, start)
    first = departure(
        times_s,
        currents,
        prefault,
        first=search_from,
        stop=min(change + round(0.5 * cycle), len(times_s)),
    )
    first = change if first is None else first
    seen = slice(min(first + 2, len(times_s) - 1), min(first + 2 + round(1.25 * cycle), len(times_s)))
    if seen.stop - seen.start < max(0.7 * cycle, 8):
        return None
    zero = prefault.zero[:, None]
    before = np.array([prefault.phasor(k).value for k in range(len(stacked))])
    phasors, second = _rough_phasors(
        times_s[seen] - prefault.t_ref_s, (stacked - zero)[:, seen], prefault.omega_rad_per_s
    )
    changes = (phasors - before)[:3]
    largest_a = np.abs(changes).max()
    if largest_a < _NOTHING_A or largest_a < _SMALLEST_CHANGE * max(
        np.abs(before[:3]).max(), np.abs(phasors[:3]).max()
    ):
        return None
    fault_type = fault_type_of(changes)
    kind = kind_of(
        fault_type,
        before=before,
        during=phasors,
        second_harmonic=float(np.abs(second[:3]).max() / largest_a),
    )
    fault_type = fault_type if kind == "fault" else None
    currents_a = currents - zero[:3]
    return Event(
        kind=kind,
        fault_type=fault_type,
        times_s=times_s,
        currents_a=currents_a,
        voltages_v=None if voltages is None else voltages - zero[3:],
        prefault=prefault,
        first=first,
        interruptions=_interruptions(fault_type, times_s, currents_a, prefault, first),
    )


def following_fault(event: Event, first: int) -> Event | None:
    """Return the fault that a fault becomes at a sample, None where too little is left to tell its type.

    Its type follows from the change against the state before the first fault.
    """
    cycle = 1.0 / (event.prefault.frequency_hz * event.sample_interval_s)
    seen = slice(first + 2, min(first + 2 + round(1.25 * cycle), event.end))
    if seen.stop - seen.start < max(0.7 * cycle, 8):
        return None
    prefault = event.prefault
    phasors, _ = _rough_phasors(
        event.times_s[seen] - prefault.t_ref_s, event.currents_a[:, seen], prefault.omega_rad_per_s
    )
    before = np.array([prefault.phasor(k).value for k in range(3)])
    fault_type = fault_type_of(phasors - before)
    if fault_type is None:
        return None
    return replace(
        event,
        fault_type=fault_type,
        first=first,
        interruptions=_interruptions(fault_type, event.times_s, event.currents_a, prefault, first),
        follows_fault=True,
    )


def _interruptions(
    fault_type: FaultType | None,
    times_s: NDArray[np.float64],
    currents_a: NDArray[np.float64],
    prefault: Prefault,
    first: int,
) -> dict[Phase, Interruption | None]:
    return {
        phase: interruption(
            times_s,
            currents_a[PHASES.index(phase)],
            inception=first,
            frequency_hz=prefault.frequency_hz,
            load_peak_a=float(np.sqrt(2) * prefault.phasor(PHASES.index(phase)).magnitude),
            noise_rms_a=float(prefault.noise_rms[PHASES.index(phase)]),
        )
        for phase in (faulted_phases(fault_type) if fault_type else ())
    }


def _rough_phasors(
    tau: NDArray[np.float64], signals: NDArray[np.float64], omega: float
) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
    """Phasors and second harmonics beside an offset taken as a straight line, to tell the type by."""
    columns = [np.cos(omega * tau), np.sin(omega * tau), np.cos(2 * omega * tau), np.sin(2 * omega * tau)]
    basis = np.column_stack([*columns, np.ones_like(tau), tau])
    parts = np.linalg.lstsq(basis, signals.T, rcond=None)[0] / np.sqrt(2.0)
    return np.asarray(parts[0] - 1j * parts[1]), np.asarray(parts[2] - 1j * parts[3])
