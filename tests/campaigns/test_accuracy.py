"""Errors and intervals where one RL circuit explains the record."""

from __future__ import annotations

import numpy as np
import pytest

from tests.campaigns.accuracy import case, run


def test_a_few_cases_give_every_quantity():
    outcomes = [case(seed, noise="coloured") for seed in range(100_000, 100_012)]
    names = set().union(*outcomes)
    assert {"inception", "time constant", "X/R combined", "peak", "source Z1, X", "source Z0, R"} <= names
    held = [inside for outcome in outcomes for values in outcome.values() for _, inside in values]
    # Most must hold already; how many exactly is the campaign's to say.
    assert np.mean(held) > 0.85


@pytest.mark.montecarlo
@pytest.mark.parametrize("noise", ["white", "coloured"])
def test_campaign(noise):
    for name, (count, _, held) in run(2000, noise=noise, seed=1, workers=2).items():
        assert count > 500
        # 95 % stated. In white noise 92.8 to 97.1 % were found, in coloured noise 90.2 to 95.3 %.
        assert held > (0.92 if noise == "white" else 0.89), name
