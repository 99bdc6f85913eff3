"""A fault that becomes another one, told from drifts, saturation and plain faults."""

from __future__ import annotations

from pathlib import Path

import pytest

from analyzer.examine import examine
from analyzer.forge.schedule import Fault, FaultChange, FaultStart, PolesOpen
from analyzer.records import read
from analyzer.theory.modes import FAULT_TYPES
from tests.simulated import Case, simulate

SAMPLES = Path(__file__).resolve().parents[2] / "sample_records"


@pytest.mark.parametrize(
    ("before", "after"), [("AG", "ABG"), ("BC", "ABC"), ("CG", "BCG"), ("AB", "ABG"), ("ABG", "ABC")]
)
@pytest.mark.parametrize("samples_per_cycle", [24, 96])
def test_each_state_of_an_evolving_fault_is_an_event(before, after, samples_per_cycle):
    case = Case(samples_per_cycle=samples_per_cycle)
    changed_s = case.inception_s + 2.45 / case.frequency_hz
    record, truth = simulate(
        case,
        FaultStart(time_s=case.inception_s, fault=Fault(type=before, fraction=0.4)),
        FaultChange(time_s=changed_s, fault=Fault(type=after, fraction=0.4)),
        PolesOpen(time_s=changed_s + 2.4 / case.frequency_hz),
    )
    findings = examine(record)
    assert [event.fault_type for event in findings.events] == [before, after]
    first, second = findings.events
    (departure,) = [d for d in first.departures if d.code == "evolving-fault"]
    step_s = 1.0 / (case.frequency_hz * samples_per_cycle)
    assert departure.time_s == pytest.approx(changed_s, abs=4 * step_s)
    assert first.window_s[1] < changed_s < second.window_s[0]
    assert first.clearing is None
    assert second.clearing is not None
    assert not [d for d in second.departures if d.code == "evolving-fault"]
    assert not [row for row in second.comparison if row.check == "offset-continuity"]
    z1 = [event.impedance.source.z1.magnitude_ohm.value for event in findings.events]
    assert z1 == pytest.approx([abs(truth.fault.behind.z1_ohm)] * 2, rel=0.01)


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_a_plain_fault_stays_one_event(fault_type):
    for seed in range(3):
        record, _ = simulate(
            Case(fault_type=fault_type, source_angle_deg=50.0 * seed, snr_db=40.0, seed=seed)
        )
        (event,) = examine(record).events
        assert not [d for d in event.departures if d.code == "evolving-fault"]


@pytest.mark.parametrize(
    "name", ["06-machine-abc", "08-saturated-ag", "12-energisation", "13-filtered-ca", "14-two-ends-ag"]
)
def test_drift_saturation_inrush_and_filters_are_no_other_fault(name):
    findings = examine(read(SAMPLES / name))
    assert len(findings.events) == 1
    assert not [d for d in findings.events[0].departures if d.code == "evolving-fault"]
