"""The solved record: exact currents and voltages at any instant, and their samples."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analyzer.forge.circuit import Circuit, FloatArray
from analyzer.forge.drives import FrequencyCourse
from analyzer.forge.errors import impossible, require_at_least, require_positive
from analyzer.forge.network import Network
from analyzer.forge.schedule import Schedule
from analyzer.forge.story import Mark, Story
from analyzer.forge.stretches import Stretch

if TYPE_CHECKING:
    from analyzer.forge.truth import PrimaryTruth


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class PrimaryWaveforms:
    """Sampled primary quantities at the recorder.

    Parameters
    ----------
    sample_rate_hz : float
        Samples per second. [Hz]
    time_s : ndarray, shape (n,)
        Nominal sampling instants after the record's start. [s]
    voltage_v : ndarray, shape (3, n)
        Phase-to-ground at the bus, phases A, B, C. [V]
    current_a : ndarray, shape (3, n)
        Out of the bus into the line. [A]
    """

    sample_rate_hz: float
    time_s: FloatArray
    voltage_v: FloatArray
    current_a: FloatArray

    def __post_init__(self) -> None:
        for name in ("time_s", "voltage_v", "current_a"):
            array = np.array(getattr(self, name), dtype=np.float64)
            array.setflags(write=False)
            object.__setattr__(self, name, array)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Solution:
    """A schedule carried through a network.

    Parameters
    ----------
    network, schedule : Network, Schedule
        What was asked for.
    duration_s : float
        Length of the record. [s]
    circuit : Circuit
        Its branches.
    course : FrequencyCourse
        The common frequency over time.
    stretches : tuple of Stretch
        One after the other, gapless from 0 to `duration_s`.
    marks : tuple of Mark
        What happened, at exact instants.
    """

    network: Network
    schedule: Schedule
    duration_s: float
    circuit: Circuit
    course: FrequencyCourse
    stretches: tuple[Stretch, ...]
    marks: tuple[Mark, ...]

    def current(self, time_s: ArrayLike) -> FloatArray:
        """Return the line currents out of the bus.

        Parameters
        ----------
        time_s : array_like, shape (n,)
            Any instants within the record; just after a switching at its very instant. [s]

        Returns
        -------
        ndarray, shape (3, n)
            Phases A, B, C. [A]

        Raises
        ------
        ForgeError
            If an instant lies outside the record.
        """
        return self._evaluate(time_s, self.circuit.groups["near"])[0]

    def voltage(self, time_s: ArrayLike) -> FloatArray:
        """Return the phase-to-ground voltages of the bus, as `current`. [V]."""
        return self._evaluate(time_s, np.zeros(0, dtype=np.intp))[1]

    def branch_current(self, element: str, time_s: ArrayLike) -> FloatArray:
        """Return the currents of another element, as `current`.

        Parameters
        ----------
        element : str
            'source', 'near', 'far', 'remote-source', 'fault' (A, B, C, ground), 'adjacent', 'capacitor',
            'transformer', 'machine', 'converter' or a load's name.
        time_s : array_like, shape (n,)
            Instants. [s]

        Raises
        ------
        ForgeError
            If there is no such element.
        """
        if element not in self.circuit.groups:
            raise impossible("element", f"{element!r} is not in this network")
        return self._evaluate(time_s, self.circuit.groups[element])[0]

    def _evaluate(self, time_s: ArrayLike, branches: NDArray[np.intp]) -> tuple[FloatArray, FloatArray]:
        times = np.atleast_1d(np.asarray(time_s, dtype=np.float64))
        if times.size and not (times.min() >= 0.0 and times.max() <= self.duration_s):
            raise impossible("time_s", f"lies outside the record of {self.duration_s:g} s")
        starts = np.array([stretch.start_s for stretch in self.stretches])
        owner = np.searchsorted(starts, times, side="right") - 1
        currents, voltages = np.zeros((len(branches), len(times))), np.zeros((3, len(times)))
        for index in np.unique(owner):
            here = owner == index
            currents[:, here], voltages[:, here] = self.stretches[index].outputs(times[here], branches)
        return currents, voltages

    def sample(
        self,
        sample_rate_hz: float,
        *,
        start_s: float = 0.0,
        stop_s: float | None = None,
        delay_s: ArrayLike = 0.0,
    ) -> PrimaryWaveforms:
        """Return samples of the exact solution.

        Parameters
        ----------
        sample_rate_hz : float
            Samples per second. [Hz]
        start_s, stop_s : float
            First instant, and the one not to pass; None is the record's end. [s]
        delay_s : array_like, broadcast to shape (6,)
            By how much later than nominal va, vb, vc, ia, ib, ic are taken; instants outside the record are
            taken at its ends. [s]

        Returns
        -------
        PrimaryWaveforms
            Times count from the record's start.

        Raises
        ------
        ForgeError
            If the rate is not positive or the start lies outside the record.
        """
        require_positive(sample_rate_hz, "sample_rate_hz")
        require_at_least(start_s, 0.0, "start_s")
        stop = self.duration_s if stop_s is None else min(stop_s, self.duration_s)
        if start_s >= stop:
            raise impossible("start_s", "nothing is left to sample")
        count = int(np.floor((stop - start_s) * sample_rate_hz * (1.0 + 1e-12))) + 1
        times = start_s + np.arange(count) / sample_rate_hz
        delays = np.broadcast_to(np.asarray(delay_s, dtype=np.float64), (6,))
        near = self.circuit.groups["near"]
        if np.all(delays == delays[0]):
            currents, voltages = self._evaluate(np.clip(times + delays[0], 0.0, self.duration_s), near)
        else:
            currents, voltages = np.zeros((3, count)), np.zeros((3, count))
            for phase in range(3):
                voltages[phase] = self.voltage(np.clip(times + delays[phase], 0.0, self.duration_s))[phase]
                currents[phase] = self.current(np.clip(times + delays[3 + phase], 0.0, self.duration_s))[
                    phase
                ]
        return PrimaryWaveforms(
            sample_rate_hz=sample_rate_hz, time_s=times, voltage_v=voltages, current_a=currents
        )

    def truth(self) -> PrimaryTruth:
        """Return what is true of this record; see `analyzer.forge.truth.primary_truth`."""
        # Truth is derived from a solution, so that module imports this one.
        from analyzer.forge.truth import primary_truth

        return primary_truth(self)


def solve(network: Network, schedule: Schedule, *, duration_s: float) -> Solution:
    """Carry a schedule through a network.

    Parameters
    ----------
    network : Network
        In load-flow steady state at the start.
    schedule : Schedule
        What happens; happenings at or beyond `duration_s` are left out.
    duration_s : float
        Length of the record. [s]

    Returns
    -------
    Solution
        Exact within each linear stretch.

    Raises
    ------
    ForgeError
        If the network or schedule is impossible; it names the parameter.
    """
    story = Story(network, schedule, duration_s)
    story.run()
    return Solution(
        network=network,
        schedule=schedule,
        duration_s=duration_s,
        circuit=story.circuit,
        course=story.course,
        stretches=tuple(story.stretches),
        marks=tuple(story.marks),
    )
