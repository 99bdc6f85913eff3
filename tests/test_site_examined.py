"""What the site file's statements do to findings, held against the circuit's truth."""

from __future__ import annotations

import cmath
from dataclasses import replace
from datetime import datetime, timedelta

import pytest

from analyzer.examine import examine
from analyzer.findings import Findings
from analyzer.records import Moment
from analyzer.site import Site
from tests.simulated import Case, simulate


def _site(terminal: dict[str, object] | None = None, **sections: object) -> Site:
    return Site.model_validate({**sections, "terminal": [terminal or {}]})


LINE = {"z1_ohm_per_km": [0.3, 2.0], "z0_ohm_per_km": [0.9, 6.0]}


@pytest.mark.parametrize("fault_type", ["AG", "BG", "CG"])
@pytest.mark.parametrize("fraction", [0.1, 0.75])
@pytest.mark.parametrize("load_ohm", [None, 40.0 + 15.0j])
def test_a_stated_line_reaches_to_a_fault_to_ground(fault_type, fraction, load_ohm):
    """The line of the circuit is of one kilometre, so that the fault is at fraction times its impedance."""
    case = Case(fault_type=fault_type, fraction=fraction, load_ohm=load_ohm)
    record, _ = simulate(case)
    assert examine(record).events[0].impedance.faulted is None
    (event,) = examine(record, site=_site({"line": LINE})).events
    truth = fraction * case.line_z1_ohm
    found = event.impedance.faulted
    assert found.x_ohm.value == pytest.approx(truth.imag, abs=0.004)
    assert found.r_ohm.value == pytest.approx(truth.real, abs=0.004)


def test_the_intervals_of_the_impedance_to_the_fault_hold_the_truth():
    held = 0
    for seed in range(40):
        case = Case(
            fault_type=("AG", "BG", "CG")[seed % 3], source_angle_deg=37.0 * seed, seed=seed, snr_db=50
        )
        (event,) = examine(simulate(case)[0], site=_site({"line": LINE})).events
        found, truth = event.impedance.faulted, case.fraction * case.line_z1_ohm
        held += found.x_ohm.low <= truth.imag <= found.x_ohm.high
        held += found.r_ohm.low <= truth.real <= found.r_ohm.high
    # Binomial: at 95 % fewer than 69 of 80 are held once in some thousand runs.
    assert held >= 69


def test_a_resistance_at_the_fault_is_seen_larger_than_it_is_in_phase_with_the_residual():
    """Va = m (Z1 Ia + (Z0 - Z1) I0) + Rf Ia: of one phase alone m Z1 + Rf Ia / (Ia + 3 k0 I0)."""
    case = Case(resistance_ohm=2.0)
    record, truth = simulate(case)
    (event,) = examine(record, site=_site({"line": LINE})).events
    currents = truth.fault.symmetrical_current_a
    k0 = (case.line_z0_ohm - case.line_z1_ohm) / (3 * case.line_z1_ohm)
    expected = case.fraction * case.line_z1_ohm
    expected += case.resistance_ohm * currents[0] / (currents[0] + k0 * sum(currents))
    found = event.impedance.faulted
    assert complex(found.r_ohm.value, found.x_ohm.value) == pytest.approx(expected, abs=0.005)


def test_behind_the_terminal_a_line_ahead_tells_nothing():
    record, _ = simulate(Case())
    (event,) = examine(record, site=_site({"line": LINE, "polarity": "into-bus"})).events
    assert event.direction == "reverse"
    assert event.impedance.faulted is None


def _rows(findings: Findings) -> dict[str, object]:
    return {row.check: row for row in findings.events[0].comparison}


def test_a_study_agrees_within_its_tolerance_and_departs_beyond():
    case = Case()
    record, _ = simulate(case)
    for factor, turn_deg, tolerance, verdict in (
        (1.0, 0.0, 1, "agrees"),
        (1.08, 0.0, 10, "agrees"),
        (1.08, 0.0, 5, "departs"),
        (1.0, 9.0, 10, "departs"),  # of the same magnitude, and yet another impedance
        (1.0, 3.0, 10, "agrees"),
    ):
        turned = cmath.rect(factor, -cmath.pi * turn_deg / 180)
        z1, z0 = turned * case.z1_ohm, turned * case.z0_ohm
        source = {
            "z1_ohm": [z1.real, z1.imag], "z0_ohm": [z0.real, z0.imag], "tolerance_percent": tolerance,
        }  # fmt: skip
        findings = examine(record, site=_site({"source": source}))
        for check, z in (("source-z1-study", z1), ("source-z0-study", z0)):
            row = _rows(findings)[check]
            assert row.verdict == verdict, (factor, turn_deg, tolerance, row.says)
            assert row.theory.value == pytest.approx(abs(z))
            assert row.theory.high == pytest.approx(row.theory.value * (1 + tolerance / 100))
            assert row.difference == pytest.approx(row.measured.value - row.theory.value)
        # A study that is wrong is no departure of the record from theory.
        assert findings.verdict == "follows-theory"
    assert examine(record).events[0].comparison == findings.events[0].comparison[:-2]


def test_a_study_is_of_nominal_frequency():
    case = Case(actual_frequency_hz=47.0)
    record, _ = simulate(case)
    z1 = case.z1_ohm
    source = {"z1_ohm": [z1.real, z1.imag], "tolerance_percent": 1}
    row = _rows(examine(record, site=_site({"source": source})))["source-z1-study"]
    assert row.theory.value == pytest.approx(abs(complex(z1.real, z1.imag * 47 / 50)), rel=1e-4)
    assert row.verdict == "agrees"


def test_what_the_record_does_not_determine_is_not_compared():
    source = {"z1_ohm": [0.4, 4.0], "z0_ohm": [0.6, 5.0]}
    site = _site({"source": source})
    record, _ = simulate(Case())
    rows = _rows(examine(record.select(["IA", "IB", "IC"]), site=site))
    assert rows["source-z1-study"].verdict == "undetermined"
    assert "there are no voltages" in rows["source-z1-study"].says
    record, _ = simulate(Case(fault_type="BC"))
    assert "source-z0-study" not in _rows(examine(record, site=site))


def test_an_estimate_less_sure_than_the_study_decides_nothing():
    case = Case(snr_db=25.0)
    source = {"z1_ohm": [case.z1_ohm.real, case.z1_ohm.imag], "tolerance_percent": 0.2}
    row = _rows(examine(simulate(case)[0], site=_site({"source": source})))["source-z1-study"]
    assert row.measured.std / row.measured.value > 0.001
    assert row.verdict == "undetermined"
    assert "leave open" in row.says


def test_a_stated_filter_delay_is_taken_off_the_times_and_nothing_else():
    record, _ = simulate(Case(fault_type="BCG"))
    plain = examine(record).events[0]
    late = examine(record, site=_site({"anti_alias_delay_s": 2e-4})).events[0]
    for one, other in (
        (plain.inception.time_s, late.inception.time_s),
        (plain.clearing.time_s, late.clearing.time_s),
        *((plain.clearing.by_phase_s[p], late.clearing.by_phase_s[p]) for p in "BC"),
    ):
        for end in ("value", "low", "high"):
            assert getattr(one, end) - getattr(other, end) == pytest.approx(2e-4, abs=1e-12)
        assert one.std == other.std
    same = {"inception": plain.inception, "clearing": plain.clearing}
    assert late.model_copy(update=same) == plain


def test_the_nominal_frequency_goes_before_the_records():
    record, _ = simulate(Case())
    wrong = replace(record, nominal_frequency_hz=60.0)
    assert any(p.code == "frequency-contradicted" for p in examine(wrong).record.problems)
    findings = examine(wrong, site=Site.model_validate({"site": {"nominal_frequency_hz": 50}}))
    assert not any(p.code == "frequency-contradicted" for p in findings.record.problems)
    assert findings.record.nominal_frequency_hz == 50.0
    (event,) = findings.events
    assert event.inception.time_s.value == pytest.approx(examine(record).events[0].inception.time_s.value)


def test_a_clock_is_stated_where_the_record_says_nothing_of_it():
    start = Moment(second=datetime(2031, 3, 4, 6, 12, 40), nanosecond=0)
    record = replace(simulate(Case())[0], start=start, trigger=start.later(0.1))
    site = _site(clock={"utc_offset_h": 5.5, "stated_error_s": 0.002})
    findings = examine(record, site=site)
    assert findings.record.start_time == "2031-03-04T06:12:40.000000+05:30"
    assert findings.record.trigger_time == "2031-03-04T06:12:40.100000+05:30"
    assert findings.record.clock.quality == "within 0.002 s, as the site file states"
    own = replace(record, start=start.in_zone(timedelta(hours=1)))
    findings = examine(own, site=site)
    assert findings.record.start_time.endswith("+01:00")
    assert any(p.code == "clock-contradicted" for p in findings.record.problems)
