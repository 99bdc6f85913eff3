"""What is found in simulated records, and what is not taken for a fault."""

from __future__ import annotations

import pytest

from tests.campaigns.events import fault_case, quiet_case, run


def test_a_few_faults_and_quiet_records():
    outcomes = [fault_case(seed) for seed in range(100_000, 100_020)]
    assert all(outcome.found and outcome.type_right and outcome.direction_right for outcome in outcomes)
    assert not any(quiet_case(seed) for seed in range(100_000, 100_010))


@pytest.mark.montecarlo
def test_campaign():
    figures = run(2000, 1000, seed=1, workers=2)
    assert figures["missed"] == 0
    assert figures["type right, %"] >= 99.5
    assert figures["direction right, %"] >= 99.5
    assert figures["faults reported in them"] == 0
    assert figures["inception error at 50 dB and more, median, samples"] <= 0.1
    assert figures["inception error at 50 dB and more, 95th percentile, samples"] <= 1.0
    assert figures["clearing error per pole, median, samples"] <= 1.0
