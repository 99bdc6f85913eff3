"""Mistakes between transformer and recorder: polarity, exchanged phases, wrong ratio."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from analyzer.forge.errors import ForgeError

Real = NDArray[np.float64]

PHASE_CHANNELS = ("ia", "ib", "ic", "va", "vb", "vc")


@dataclass(frozen=True, slots=True, kw_only=True)
class Wiring:
    """What is wired or set wrongly, by the recorder's channels.

    Parameters
    ----------
    reversed_polarity : tuple of str
        Channels whose sign is wrong.
    exchanged : tuple of (str, str)
        Pairs that have changed places, both currents or both voltages.
    wrong_scale : tuple of (str, float)
        Channels whose ratio is set wrongly, with recorded over true value.

    Raises
    ------
    ForgeError
        If a channel is unknown or a pair does not match.
    """

    reversed_polarity: tuple[str, ...] = ()
    exchanged: tuple[tuple[str, str], ...] = ()
    wrong_scale: tuple[tuple[str, float], ...] = ()

    def __post_init__(self) -> None:
        named = [*self.reversed_polarity, *(c for pair in self.exchanged for c in pair)]
        for channel in [*named, *(c for c, _ in self.wrong_scale)]:
            if channel not in PHASE_CHANNELS:
                raise ForgeError("bad-choice", f"{channel!r} is no phase channel", where="wiring")
        for first, second in self.exchanged:
            if first == second or first[0] != second[0]:
                raise ForgeError("bad-value", f"{first} and {second} cannot change places", where="exchanged")
        for channel, factor in self.wrong_scale:
            if not (np.isfinite(factor) and factor != 0):
                raise ForgeError("bad-value", f"{factor} is no scale for {channel}", where="wrong_scale")

    def matrix(self) -> Real:
        """Recorded phase channels from true ones, in the order of `PHASE_CHANNELS`, shape (6, 6)."""
        place = {name: k for k, name in enumerate(PHASE_CHANNELS)}
        out = np.eye(6)
        for first, second in self.exchanged:
            out[[place[first], place[second]]] = out[[place[second], place[first]]]
        for channel in self.reversed_polarity:
            out[place[channel]] *= -1
        for channel, factor in self.wrong_scale:
            out[place[channel]] *= factor
        return out
