"""What else is on the system: harmonics, interharmonics, and components whose frequency moves."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.checks import need_not_negative, need_one_of, need_positive

Real = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Component:
    """A sinusoid added to the three primary quantities, present before, during and after the fault.

    Parameters
    ----------
    on : {"current", "voltage"}
    freq_hz : float
        At the start of the record. [Hz]
    rms : float
        [A] or [V]
    angle_deg : float
        Of phase A at the start of the record. [deg]
    sequence : {"positive", "negative", "zero"}
        Which way the phases follow each other; of the balanced harmonics, order 3 is zero, 5 negative,
        7 positive, and so on.
    drift_hz_per_s : float
        How fast its frequency moves; a fundamental that is off nominal leaves such a beat behind. [Hz/s]

    Raises
    ------
    ForgeError
        If a value is outside its range.
    """

    on: Literal["current", "voltage"]
    freq_hz: float
    rms: float
    angle_deg: float = 0.0
    sequence: Literal["positive", "negative", "zero"] = "positive"
    drift_hz_per_s: float = 0.0

    def __post_init__(self) -> None:
        need_one_of(self.on, ("current", "voltage"), where="on")
        need_one_of(self.sequence, ("positive", "negative", "zero"), where="sequence")
        need_positive(freq_hz=self.freq_hz)
        need_not_negative(rms=self.rms)
        if not np.isfinite([self.angle_deg, self.drift_hz_per_s]).all():
            raise ForgeError("bad-value", "angle and drift must be finite", where="background")


def harmonic(
    order: int,
    *,
    on: Literal["current", "voltage"],
    fundamental_hz: float,
    rms: float,
    angle_deg: float = 0.0,
) -> Component:
    """Balanced harmonic, whose sequence follows from its order."""
    if order < 2:
        raise ForgeError("bad-value", f"{order} is no harmonic order", where="order")
    sequences: tuple[Literal["zero", "positive", "negative"], ...] = ("zero", "positive", "negative")
    return Component(
        on=on, freq_hz=order * fundamental_hz, rms=rms, angle_deg=angle_deg, sequence=sequences[order % 3]
    )


def background_signal(
    components: tuple[Component, ...], *, on: Literal["current", "voltage"], time_s: Real
) -> Real:
    """Sum of the components on one kind of quantity.

    Parameters
    ----------
    components : tuple of Component
    on : {"current", "voltage"}
    time_s : ndarray, shape (n,)

    Returns
    -------
    ndarray, shape (3, n)
    """
    turn = {"positive": -1.0, "negative": 1.0, "zero": 0.0}
    total = np.zeros((3, time_s.size))
    for part in components:
        if part.on != on:
            continue
        phases = np.radians(part.angle_deg + turn[part.sequence] * 120 * np.arange(3))
        angle = 2 * np.pi * (part.freq_hz + 0.5 * part.drift_hz_per_s * time_s) * time_s
        total += np.sqrt(2) * part.rms * np.cos(angle + phases[:, None])
    return total
