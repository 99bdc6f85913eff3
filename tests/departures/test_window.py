"""``short-window``: too few cycles to tell a time constant."""

from __future__ import annotations

from dataclasses import replace

import pytest

from analyzer.departures import short_window
from analyzer.estimate.event import Estimate
from analyzer.examine import examine
from tests.simulated import Case, simulate
from tests.test_comparison import seen


def window_of(cycles: float, estimate: Estimate, *, known: bool) -> Estimate:
    ((loop, fit),) = estimate.loops
    first = estimate.window.start
    return replace(
        estimate,
        window=slice(first, first + round(64 * cycles)),
        loops=((loop, fit if known else replace(fit, decay_rate_per_s=None)),),
    )


@pytest.mark.parametrize(
    ("cycles", "known", "said"),
    [(0.9, False, True), (1.4, False, True), (1.6, False, False), (0.9, True, False)],
)
def test_it_is_said_where_the_decay_is_unknown_for_it(cycles, known, said):
    event, estimate = seen(simulate(Case())[0])
    found = short_window(event, window_of(cycles, estimate, known=known))
    assert len(found) == said
    for departure in found:
        assert (departure.code, departure.severity) == ("short-window", "note")
        assert departure.statistic == pytest.approx(cycles, rel=0.02)
        assert f"{departure.statistic:.2f} cycles" in departure.says


def test_a_fault_under_a_cycle_is_said_to_be_short_and_when_it_ended():
    record, truth = simulate(Case(open_s=0.13))
    lasts_s = truth.cleared_s - truth.inception_s
    assert lasts_s < 0.018
    (event,) = examine(record).events
    (departure,) = event.departures
    assert (departure.code, departure.severity) == ("short-window", "note")
    assert departure.statistic == pytest.approx(lasts_s * 50.0, abs=0.1)
    assert (event.kind, event.fault_type, event.verdict) == ("fault", "AG", "undetermined")
    assert (event.phases, event.decay, event.comparison) == ({}, (), ())
    assert event.clearing.time_s.value == pytest.approx(truth.cleared_s, abs=1e-3)
