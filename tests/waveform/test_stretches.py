"""The parts of a record in which the power frequency can be seen."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.examine import examine
from analyzer.records import Record
from analyzer.records.timebase import TimeBase
from analyzer.waveform.stretches import Stretch, usable_stretches
from tests.simulated import Case, simulate


def record_of(*parts: tuple[float, int]) -> Record:
    """Record of parts, each a rate and a number of samples; its values do not matter."""
    n = sum(count for _, count in parts)
    timebase = TimeBase.from_rates(
        [rate for rate, _ in parts], list(np.cumsum([count for _, count in parts])), n_samples=n
    )
    plain = Record.from_arrays({"IA": (np.zeros(n), "A")}, sample_rate_hz=1.0)
    return replace(plain, timebase=timebase)


def test_one_rate_is_one_stretch():
    stretches, problems = usable_stretches(record_of((3200.0, 640)), frequency_hz=50.0)
    assert stretches == (Stretch(first=0, stop=640, rate_hz=3200.0),)
    assert problems == ()


def test_a_slow_part_is_left_out_and_said_so():
    record = record_of((3200.0, 640), (50.0, 100), (3200.0, 320))
    stretches, (problem,) = usable_stretches(record, frequency_hz=50.0)
    assert [(s.first, s.stop) for s in stretches] == [(0, 640), (740, 1060)]
    assert (problem.code, problem.severity) == ("rate-too-low", "warning")
    for words in ("50 Hz", "left out"):
        assert words in problem.message
    assert problem.where.startswith("0.2000 s to 2.")


def test_eight_samples_a_cycle_are_enough():
    for rate_hz, n_usable in [(399.0, 0), (400.0, 1)]:
        stretches, problems = usable_stretches(record_of((rate_hz, 400)), frequency_hz=50.0)
        assert len(stretches) == n_usable
        assert len(problems) == 1 - n_usable


def test_a_part_under_two_cycles_is_left_out_and_said_so():
    record = record_of((3200.0, 127), (1600.0, 200))
    stretches, (problem,) = usable_stretches(record, frequency_hz=50.0)
    assert [(s.first, s.stop) for s in stretches] == [(127, 327)]
    assert (problem.code, problem.severity) == ("stretch-too-short", "note")
    assert "two cycles" in problem.message


@settings(deadline=None, derandomize=True, max_examples=20)
@given(st.lists(st.floats(3180.0, 3220.0), min_size=100, max_size=400))
def test_hundreds_of_slightly_different_rates_are_one_stretch(rates_hz):
    # A recorder that follows the power frequency writes a rate for every cycle.
    stretches, problems = usable_stretches(record_of(*((rate, 64) for rate in rates_hz)), frequency_hz=50.0)
    assert problems == ()
    (stretch,) = stretches
    assert (stretch.first, stretch.stop) == (0, 64 * len(rates_hz))


def test_a_slow_drift_of_the_rate_does_not_add_up_to_one_stretch():
    # Each step is small, but the rate of the stretch is that of its beginning.
    rates_hz = np.linspace(3200.0, 4800.0, 200)
    stretches, _ = usable_stretches(record_of(*((float(rate), 64) for rate in rates_hz)), frequency_hz=50.0)
    assert len(stretches) > 10
    assert stretches[-1].rate_hz > 4600.0


def test_a_fault_is_found_beside_a_slow_part_and_in_a_record_of_many_rates():
    record, truth = simulate(Case())
    n = record.n_samples
    slow = 40
    values = record.signals()
    longer = {
        channel.id: (np.concatenate([values[k], np.zeros(slow)]), channel.unit)
        for k, channel in enumerate(record.analog)
    }
    timebase = TimeBase.from_rates([3200.0, 50.0], [n, n + slow], n_samples=n + slow)
    mixed = Record.from_arrays(longer, sample_rate_hz=3200.0, nominal_frequency_hz=50.0)
    findings = examine(replace(mixed, timebase=timebase))
    assert [problem.code for problem in findings.record.problems] == ["rate-too-low"]
    (event,) = findings.events
    assert event.inception.time_s.value == pytest.approx(truth.inception_s, abs=1e-4)

    rates_hz = 3200.0 * (1 + 1e-5 * np.sin(np.arange(15)))
    stops = [*range(64, 64 * 15, 64), n]
    many = replace(record, timebase=TimeBase.from_rates(list(rates_hz), stops, n_samples=n))
    (event,) = examine(many).events
    assert event.fault_type == "AG"
    assert event.inception.time_s.value == pytest.approx(truth.inception_s, abs=1e-4)
