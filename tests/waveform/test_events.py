"""From a terminal's samples to its events."""

from __future__ import annotations

import numpy as np
import pytest

from analyzer.forge.schedule import Connect, Disconnect, Fault, FaultEnd, FaultStart, PolesOpen
from analyzer.records import Record
from analyzer.terminals import assign_terminal
from analyzer.theory.modes import FAULT_TYPES, faulted_phases
from analyzer.waveform.events import Event, find_events
from analyzer.waveform.stretches import usable_stretches
from tests.simulated import Case, simulate


def events_of(record: Record, nominal_hz: float = 50.0) -> tuple[Event, ...]:
    record = record.survey()
    terminal, reason = assign_terminal(record)
    assert terminal is not None, reason
    stretches, _ = usable_stretches(record, frequency_hz=nominal_hz)
    return find_events(record, terminal, stretches, nominal_hz=nominal_hz)


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_type_first_sample_and_openings_of_a_fault(fault_type):
    record, truth = simulate(Case(fault_type=fault_type, load_ohm=80 + 30j, source_angle_deg=250.0))
    (event,) = events_of(record)
    assert (event.kind, event.fault_type) == ("fault", fault_type)
    step_s = event.sample_interval_s
    assert step_s == pytest.approx(1 / 3200.0)
    # The first sample beyond the inception, or a few later where a phase leaves without a slope.
    assert -0.5 <= (event.first_s - truth.inception_s) / step_s <= 8
    assert set(event.interruptions) == set(faulted_phases(fault_type))
    for phase, end in event.interruptions.items():
        opened_s = truth.opened_s["ABC".index(phase)]
        assert end.time_s == pytest.approx(opened_s, abs=2 * step_s)
    assert event.end == min(end.sample for end in event.interruptions.values())
    assert event.prefault.window_s[1] < truth.inception_s
    assert event.prefault.t_ref_s == pytest.approx(event.first_s, abs=10 * step_s)


def test_a_fault_that_is_not_cleared_ends_with_the_record():
    record, _ = simulate(Case(open_s=None))
    (event,) = events_of(record)
    assert event.interruptions == {"A": None}
    assert event.end == record.n_samples


def test_the_converters_zero_is_taken_off():
    record, _ = simulate(Case(load_ohm=80 + 30j))
    moved = {
        channel.id: (record.signal(channel.id) + 5.0 * (k - 2), channel.unit)
        for k, channel in enumerate(record.analog)
    }
    (plain,) = events_of(record)
    (event,) = events_of(Record.from_arrays(moved, sample_rate_hz=3200.0, nominal_frequency_hz=50.0))
    assert event.first == plain.first
    np.testing.assert_allclose(event.currents_a, plain.currents_a, atol=1e-6 * np.abs(plain.currents_a).max())
    np.testing.assert_allclose(event.voltages_v, plain.voltages_v, atol=1e-6 * np.abs(plain.voltages_v).max())


def test_two_faults_and_a_switching_come_in_the_order_of_time():
    case = Case(load_ohm=60 + 20j, load_place="end", duration_s=1.2)
    first = Fault(type="AG", fraction=0.4)
    second = Fault(type="BC", fraction=0.4)
    record, _ = simulate(
        case,
        FaultStart(time_s=0.2, fault=first),
        FaultEnd(time_s=0.27),
        FaultStart(time_s=0.6, fault=second),
        FaultEnd(time_s=0.68),
        Disconnect(time_s=1.0, element="load"),
    )
    events = events_of(record)
    assert [(event.kind, event.fault_type) for event in events] == [
        ("fault", "AG"),
        ("fault", "BC"),
        ("switching", None),
    ]
    for event, time_s in zip(events, (0.2, 0.6, 1.0), strict=True):
        assert event.first_s == pytest.approx(time_s, abs=5e-3)  # a load goes at its current zeros


@pytest.mark.parametrize("happening", [Connect, Disconnect])
def test_a_switching_has_no_type_and_no_interruptions(happening):
    record, _ = simulate(Case(load_ohm=40 + 15j, load_place="end"), happening(time_s=0.15, element="load"))
    events = events_of(record)
    assert events
    for event in events:
        assert (event.kind, event.fault_type, event.interruptions) == ("switching", None, {})


def test_a_current_of_rounding_alone_has_none():
    # A load at the bus lies behind the terminal; a computed record then holds 1e-14 A there, without noise.
    record, _ = simulate(Case(load_ohm=40 + 15j), Connect(time_s=0.15, element="load"))
    assert np.abs(record.signals(["IA", "IB", "IC"])).max() < 1e-9
    assert events_of(record) == ()


def test_a_steady_record_has_none():
    record, _ = simulate(Case(load_ohm=40 + 15j, duration_s=0.4), PolesOpen(time_s=0.39))
    assert events_of(record.between(0.0, 0.35)) == ()


@pytest.mark.parametrize("early_s", [0.004, 0.010])
def test_too_little_before_a_fault_tells_nothing(early_s):
    # Under three quarters of a cycle of prefault: no continuation to leave.
    record, _ = simulate(Case())
    view = record.between(0.12345 - early_s, 0.3)
    for event in events_of(view):
        assert event.first_s > 0.2  # the opening may be seen, the inception not
