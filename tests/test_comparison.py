"""The rows of comparison: what agrees, what departs, and that the sentences say it with their numbers."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.interpolate import CubicSpline

from analyzer.comparison import compare, largest_sample, offsets_of
from analyzer.estimate.event import Estimate, estimate_fault
from analyzer.estimate.phases import ChannelFit
from analyzer.findings import Comparison
from analyzer.records import Record
from analyzer.terminals import assign_terminal
from analyzer.theory.modes import FAULT_TYPES
from analyzer.waveform.events import Event, find_events
from analyzer.waveform.stretches import usable_stretches
from tests.simulated import Case, simulate


def seen(record: Record, nominal_hz: float = 50.0) -> tuple[Event, Estimate]:
    """The first fault of a record and its estimate."""
    record = record.survey()
    terminal, reason = assign_terminal(record)
    assert terminal is not None, reason
    stretches, _ = usable_stretches(record, frequency_hz=nominal_hz)
    events = find_events(record, terminal, stretches, nominal_hz=nominal_hz)
    event = next(event for event in events if event.kind == "fault")
    assert event.fault_type is not None
    estimate = estimate_fault(event, event.fault_type)
    assert estimate is not None
    return event, estimate


def rows_of(event: Event, estimate: Estimate) -> dict[str, Comparison]:
    assert event.fault_type is not None
    return {row.check: row for row in compare(event, estimate, event.fault_type)}


def says_its_numbers(row: Comparison) -> bool:
    numbers = (f"{row.measured.value:.4g}", f"{row.theory.value:.4g}")
    word = {"agrees": "agrees with", "departs": "departs from"}[row.verdict]
    return all(number in row.says for number in numbers) and word in row.says and row.says.endswith(".")


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_a_fault_of_theory_agrees_and_the_sentences_say_the_numbers(fault_type):
    # Some degrees from no offset, so that every phase pair has one.
    event, estimate = seen(simulate(Case(fault_type=fault_type, source_angle_deg=60.0))[0])
    rows = rows_of(event, estimate)
    assert set(rows) >= {"offset-continuity", "x-over-r-routes", "peak"}
    assert ("source-z1-z2" in rows) == (fault_type != "ABC")
    for row in rows.values():
        assert row.verdict == "agrees", row.says
        assert says_its_numbers(row), row.says
        assert row.difference == pytest.approx(row.measured.value - row.theory.value)
        spread = np.hypot(row.measured.std, row.theory.std)
        assert row.in_sigmas == pytest.approx(row.difference / spread)
    share = abs(rows["peak"].difference / rows["peak"].theory.value)
    assert f"{share:.1%} apart" in rows["peak"].says


def with_offset(estimate: Estimate, phase: str, *, grown: float = 0.0, std: float | None = None) -> Estimate:
    """The estimate with the phase's fitted offset moved by a share of its symmetrical peak."""
    fit = estimate.phases[phase]
    peak_a = np.sqrt(2) * fit.phasor.magnitude
    coefficients = fit.coefficients.copy()
    coefficients[2] += np.sign(coefficients[2]) * grown * peak_a
    covariance = fit.covariance.copy()
    if std is not None:
        covariance[2, 2] = (std * peak_a) ** 2
    changed: ChannelFit = replace(fit, coefficients=coefficients, covariance=covariance)
    return replace(estimate, phases={**estimate.phases, phase: changed})


@pytest.fixture(scope="module")
def plain() -> tuple[Event, Estimate]:
    return seen(simulate(Case(snr_db=70.0))[0])


@pytest.mark.parametrize(
    ("grown", "std", "verdict"),
    [
        (0.0, None, "agrees"),
        (0.03, None, "agrees"),  # significant, but it moves no answer
        (0.08, 0.1, "agrees"),  # material, but within the noise
        (0.08, None, "departs"),  # both
    ],
)
def test_a_row_departs_only_where_it_is_significant_and_material(plain, grown, std, verdict):
    event, estimate = plain
    row = rows_of(event, with_offset(estimate, "A", grown=grown, std=std))["offset-continuity"]
    assert row.verdict == verdict
    assert says_its_numbers(row)
    if grown and std is None:
        assert abs(row.in_sigmas) > 3.0


def test_the_offset_of_the_worst_phase_is_the_one_compared():
    event, estimate = seen(simulate(Case(fault_type="ABC"))[0])
    offsets = {phase: offsets_of(event, estimate, phase) for phase in "ABC"}
    worst = max(offsets, key=lambda phase: abs(offsets[phase].fitted_a))
    row = rows_of(event, estimate)["offset-continuity"]
    assert f"phase {worst}" in row.says
    assert row.measured.value == offsets[worst].fitted_a


@pytest.mark.parametrize("fault_type", ["AG", "BC", "CAG", "ABC"])
def test_both_offsets_are_those_of_the_circuit(fault_type):
    record, truth = simulate(Case(fault_type=fault_type, load_ohm=50 + 20j, load_place="end", snr_db=70.0))
    event, estimate = seen(record)
    for phase in estimate.phases:
        found = offsets_of(event, estimate, phase)
        k = "ABC".index(phase)
        for value, std in (
            (found.fitted_a, found.fitted_std_a),
            (found.continuity_a, found.continuity_std_a),
        ):
            # A load at the far end carries an exponential of its own, which is a little of the offset.
            near = 0.01 * found.symmetrical_peak_a
            assert value == pytest.approx(truth.fault.offset_a[k], abs=4 * std + near)
        assert found.symmetrical_peak_a == pytest.approx(
            np.sqrt(2) * abs(truth.fault.symmetrical_current_a[k]), rel=5e-3
        )


def test_x_over_r_without_voltages_or_offset_is_not_compared_and_says_why():
    record, _ = simulate(Case())
    event, estimate = seen(record.select(["IA", "IB", "IC"]))
    row = rows_of(event, estimate)["x-over-r-routes"]
    assert (row.verdict, row.difference, row.in_sigmas, row.measured.value) == (
        "undetermined",
        None,
        None,
        None,
    )
    assert "no voltages" in row.says
    case = Case(snr_db=45.0)
    z = (2 * case.z1_ohm + case.z0_ohm + case.fraction * (2 * case.line_z1_ohm + case.line_z0_ohm)) / 3
    angle_deg = np.degrees(np.angle(z)) - 90 - 360 * 50.0 * case.inception_s
    event, estimate = seen(simulate(replace(case, source_angle_deg=float(angle_deg)))[0])
    row = rows_of(event, estimate)["x-over-r-routes"]
    assert row.verdict == "undetermined"
    assert "no offset" in row.says


def test_two_routes_that_disagree_depart():
    # A voltage that lags by 3.6 degrees, as one of a poor transformer: the angle shows too small an X/R.
    record, _ = simulate(Case(snr_db=70.0))
    times_s = record.times()
    late = {
        c.id: (
            CubicSpline(times_s, record.signal(c.id))(times_s - 200e-6)
            if c.id[0] == "V"
            else record.signal(c.id),
            c.unit,
        )
        for c in record.analog
    }
    event, estimate = seen(Record.from_arrays(late, sample_rate_hz=3200.0, nominal_frequency_hz=50.0))
    row = rows_of(event, estimate)["x-over-r-routes"]
    assert row.verdict == "departs"
    assert says_its_numbers(row)
    ratio = row.measured.value
    expected = np.tan(np.arctan(ratio) - np.radians(3.6))
    assert row.theory.value == pytest.approx(expected, rel=0.05)


def test_the_largest_sample_is_sought_before_the_interruption():
    record, truth = simulate(Case())
    event, _ = seen(record)
    values = event.currents_a.copy()
    late = event.interruptions["A"].sample + 40
    values[0, late] = 1e6
    values[0, event.first - 30] = 1e6
    assert event.first <= largest_sample(replace(event, currents_a=values), "A") < late
    sample = largest_sample(event, "A")
    assert abs(event.currents_a[0, sample]) == pytest.approx(truth.peaks[0].value_a, rel=0.01)


def test_a_sample_that_the_closed_form_does_not_reach_departs(plain):
    event, estimate = plain
    values = event.currents_a.copy()
    values[0, largest_sample(event, "A")] *= 1.2
    row = rows_of(replace(event, currents_a=values), estimate)["peak"]
    assert row.verdict == "departs"
    assert says_its_numbers(row)
