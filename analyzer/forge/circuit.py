"""The branches of a network: incidence, resistance, inductance, and which currents a switch interrupts."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from analyzer.forge.errors import impossible
from analyzer.forge.network import Line, Network, Source, phase_matrices
from analyzer.forge.schedule import Fault

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]
GROUND = "ground"
# RMS phasors of phases A, B, C for a positive-sequence quantity of one.
POSITIVE: ComplexArray = np.exp(-2j * np.pi / 3.0 * np.arange(3))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Circuit:
    """A network as branches between nodes; ground is no row of the incidence.

    Parameters
    ----------
    incidence : ndarray, shape (n_nodes, n_branches)
        +1 where a branch's current leaves the node, -1 where it arrives.
    r_ohm, l_h : ndarray, shape (n_branches, n_branches)
        Series matrices; the fault's legs are zero here and set by its state.
    groups : dict
        Branch indices by element.
    poles : dict
        For each thing that switches, the branches of its poles.
    capacitor_branches, capacitance_f : ndarray
        Branches in series with a capacitance, and its value. [F]
    injected : ndarray of int
        Branches whose current is prescribed.
    bus : ndarray of int, shape (3,)
        Rows of the recorder's bus.
    emf_rms_v : ndarray of complex, shape (n_branches,)
        Constant electromotive forces in the branches' direction, without the machine's. [V]
    """

    incidence: FloatArray
    r_ohm: FloatArray
    l_h: FloatArray
    groups: dict[str, NDArray[np.intp]]
    poles: dict[str, NDArray[np.intp]]
    capacitor_branches: NDArray[np.intp]
    capacitance_f: FloatArray
    injected: NDArray[np.intp]
    bus: NDArray[np.intp]
    emf_rms_v: ComplexArray


@dataclass(slots=True)
class _Draft:
    nominal_hz: float
    nodes: dict[str, int] = field(default_factory=dict)
    ends: list[tuple[str, str]] = field(default_factory=list)
    blocks: list[tuple[FloatArray, FloatArray]] = field(default_factory=list)
    emf: list[complex] = field(default_factory=list)
    groups: dict[str, NDArray[np.intp]] = field(default_factory=dict)

    def add(
        self,
        name: str,
        ends: list[tuple[str, str]],
        r_ohm: FloatArray,
        l_h: FloatArray,
        emf: ComplexArray | None = None,
    ) -> NDArray[np.intp]:
        indices = np.arange(len(self.ends), len(self.ends) + len(ends))
        for pair in ends:
            for node in pair:
                if node != GROUND:
                    self.nodes.setdefault(node, len(self.nodes))
        self.ends.extend(ends)
        self.blocks.append((r_ohm, l_h))
        self.emf.extend([0j] * len(ends) if emf is None else emf.tolist())
        self.groups[name] = indices
        return indices

    def add_source(self, name: str, source: Source, place: str) -> None:
        r_ohm, l_h = phase_matrices(
            source.z1_ohm, source.negative_ohm, source.z0_ohm, nominal_frequency_hz=self.nominal_hz
        )
        emf = source.voltage_rms_v * np.exp(1j * np.radians(source.angle_deg)) * POSITIVE
        self.add(name, _between(GROUND, place), r_ohm, l_h, emf)

    def add_line(self, name: str, line: Line, share: float, start: str, stop: str) -> NDArray[np.intp]:
        z1_ohm, z0_ohm = line.z1_ohm * share, line.z0_ohm * share
        r_ohm, l_h = phase_matrices(z1_ohm, z1_ohm, z0_ohm, nominal_frequency_hz=self.nominal_hz)
        return self.add(name, _between(start, stop), r_ohm, l_h)


def _between(start: str, stop: str) -> list[tuple[str, str]]:
    def label(node: str, phase: str) -> str:
        return node if node == GROUND or node.startswith("star") else f"{node}.{phase}"

    return [(label(start, phase), label(stop, phase)) for phase in "abc"]


def build_circuit(network: Network, fault: Fault | None) -> Circuit:
    """Lay out the branches of a network, split at the place of the fault.

    Parameters
    ----------
    network : Network
        The network.
    fault : Fault or None
        Its place decides where the line is split; its type and resistances belong to the state.

    Returns
    -------
    Circuit
        Branch currents flow out of sources, out of the bus into the line, and into loads.

    Raises
    ------
    ForgeError
        If a fault behind the bus lies on a feeder that is not there.
    """
    draft = _Draft(network.nominal_frequency_hz)
    omega = 2.0 * np.pi * network.nominal_frequency_hz
    poles: dict[str, NDArray[np.intp]] = {}
    if network.source is not None:
        draft.add_source("source", network.source, "bus")

    ahead = fault is not None and fault.side == "ahead"
    share = fault.fraction if fault is not None and ahead else 0.5
    poles["line"] = draft.add_line("near", network.line, share, "bus", "point")
    poles["remote"] = draft.add_line("far", network.line, 1.0 - share, "point", "end")
    if network.remote is not None:
        draft.add_source("remote-source", network.remote, "end")
    if fault is not None:
        poles.update(_add_fault(draft, network, fault))
    for load in network.loads:
        z_ohm = load.z_ohm
        target = GROUND if load.star == "grounded" else f"star.{load.name}"
        matrix = np.eye(3)
        poles[load.name] = draft.add(
            load.name, _between(load.place, target), matrix * z_ohm.real, matrix * (z_ohm.imag / omega)
        )
    capacitor_branches, capacitance_f = np.zeros(0, dtype=np.intp), np.zeros(0)
    if network.capacitor is not None:
        bank = network.capacitor
        target = GROUND if bank.star == "grounded" else "star.capacitor"
        capacitor_branches = draft.add(
            "capacitor", _between("bus", target), np.eye(3) * bank.r_ohm, np.eye(3) * bank.l_h
        )
        poles["capacitor"] = capacitor_branches
        capacitance_f = np.full(3, bank.capacitance_f)
    if network.transformer is not None:
        core = network.transformer
        target = GROUND if core.star == "grounded" else "star.transformer"
        poles["transformer"] = draft.add(
            "transformer", _between(core.place, target), np.eye(3) * core.r_ohm, np.eye(3) * core.air_core_h
        )
    if network.machine is not None:
        machine = network.machine
        z_ohm = complex(machine.r_ohm, machine.x_subtransient_ohm)
        grounded = machine.z0_ohm is not None
        r_ohm, l_h = phase_matrices(
            z_ohm,
            z_ohm,
            machine.z0_ohm if machine.z0_ohm is not None else z_ohm,
            nominal_frequency_hz=network.nominal_frequency_hz,
        )
        draft.add("machine", _between(GROUND if grounded else "star.machine", machine.place), r_ohm, l_h)
    injected = np.zeros(0, dtype=np.intp)
    if network.converter is not None:
        injected = draft.add("converter", _between(GROUND, "bus"), np.zeros((3, 3)), np.zeros((3, 3)))
    return _finish(draft, poles, capacitor_branches, capacitance_f, injected)


def _add_fault(draft: _Draft, network: Network, fault: Fault) -> dict[str, NDArray[np.intp]]:
    poles: dict[str, NDArray[np.intp]] = {}
    point = "point"
    if fault.side == "behind":
        point = "behind"
        if network.adjacent is None and fault.fraction > 0.0:
            raise impossible(
                "fault.fraction",
                "there is no adjacent feeder to lie on",
                hint="give network.adjacent, or fraction 0",
            )
        line = network.adjacent if network.adjacent is not None else network.line
        poles["adjacent"] = draft.add_line("adjacent", line, fault.fraction, "bus", point)
    ends = [*_between(point, "star.fault"), ("star.fault", GROUND)]
    poles["fault"] = draft.add("fault", ends, np.zeros((4, 4)), np.zeros((4, 4)))
    return poles


def _finish(
    draft: _Draft,
    poles: dict[str, NDArray[np.intp]],
    capacitor_branches: NDArray[np.intp],
    capacitance_f: FloatArray,
    injected: NDArray[np.intp],
) -> Circuit:
    n_branches = len(draft.ends)
    incidence = np.zeros((len(draft.nodes), n_branches))
    for branch, (start, stop) in enumerate(draft.ends):
        if start != GROUND:
            incidence[draft.nodes[start], branch] += 1.0
        if stop != GROUND:
            incidence[draft.nodes[stop], branch] -= 1.0
    r_ohm, l_h = np.zeros((n_branches, n_branches)), np.zeros((n_branches, n_branches))
    offset = 0
    for r_block, l_block in draft.blocks:
        span = slice(offset, offset + len(r_block))
        r_ohm[span, span], l_h[span, span] = r_block, l_block
        offset += len(r_block)
    return Circuit(
        incidence=incidence,
        r_ohm=r_ohm,
        l_h=l_h,
        groups=draft.groups,
        poles=poles,
        capacitor_branches=capacitor_branches,
        capacitance_f=capacitance_f,
        injected=injected,
        bus=np.array([draft.nodes[f"bus.{phase}"] for phase in "abc"], dtype=np.intp),
        emf_rms_v=np.array(draft.emf, dtype=np.complex128),
    )
