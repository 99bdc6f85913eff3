"""From a scenario with distributions to one without, the same for a record whatever the campaign's size."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from analyzer.forge.amounts import drawn_tree
from analyzer.forge.scenario import Scenario


@dataclass(frozen=True, slots=True, kw_only=True)
class Draw:
    """A scenario for one record, with the random numbers that its instruments take.

    Parameters
    ----------
    scenario : Scenario
        Without distributions.
    seed, index : int
        What it was drawn with.
    instruments_rng : numpy.random.Generator
        For class errors and noise.
    """

    scenario: Scenario
    seed: int
    index: int
    instruments_rng: np.random.Generator


def draw_scenario(scenario: Scenario, *, seed: int | None = None, index: int = 0) -> Draw:
    """Return the scenario of one record of a campaign.

    Parameters
    ----------
    scenario : Scenario
        With or without distributions.
    seed : int or None
        Not negative; None is the scenario's own.
    index : int
        Of the record in the campaign, counted from 0; the first is what a single record is.

    Returns
    -------
    Draw

    Raises
    ------
    pydantic.ValidationError
        If a drawn value lies outside what its key allows.

    Notes
    -----
    Record `index` takes the child `index` of the seed's `numpy.random.SeedSequence`, hence depends neither on
    the number of records nor on their order. One child of that serves the distributions, the other
    the instruments, so that noise does not change when a distribution is added.
    """
    seed = scenario.record.seed if seed is None else seed
    # What `SeedSequence(seed).spawn(count)[index]` gives, without spawning all before it.
    own = np.random.SeedSequence(seed, spawn_key=(index,))
    for_amounts, for_instruments = own.spawn(2)
    tree = scenario.model_dump(exclude_unset=True)
    settled = Scenario.model_validate(drawn_tree(tree, np.random.default_rng(for_amounts)))
    return Draw(
        scenario=settled, seed=seed, index=index, instruments_rng=np.random.default_rng(for_instruments)
    )
