"""Fault loops and impedances of a network as its parameters give them, sequence by sequence."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from analyzer.forge.circuit import FloatArray
from analyzer.forge.network import Network, Place
from analyzer.forge.schedule import Fault, FaultType

_PAIR_OF: dict[str, tuple[int, int]] = {"AB": (0, 1), "BC": (1, 2), "CA": (2, 0)}


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Loop:
    """A loop that a fault type drives.

    Parameters
    ----------
    name : str
        'AG', 'BC', 'BC+G' or 'ABC', and alike for the other phases.
    weights : ndarray, shape (3,)
        Of the phase currents and voltages in it.
    """

    name: str
    weights: FloatArray


def reference_loop(fault_type: FaultType) -> Loop:
    """Return the loop that inception angles refer to: phase, pair (va-vb, vb-vc, vc-va), or phase A."""
    loop = driven_loops(fault_type)[0]
    return Loop(name="AG", weights=loop.weights) if fault_type == "ABC" else loop


def driven_loops(fault_type: FaultType) -> tuple[Loop, ...]:
    """Return the loops of a fault type: one, or two for a double-phase-to-ground fault."""
    unit = np.eye(3)
    if fault_type == "ABC":
        return (Loop(name="ABC", weights=unit[0]),)
    phases = fault_type.removesuffix("G")
    if len(phases) == 1:
        return (Loop(name=fault_type, weights=unit["ABC".index(phases)]),)
    a, b = _PAIR_OF[phases]
    pair = Loop(name=phases, weights=unit[a] - unit[b])
    if not fault_type.endswith("G"):
        return (pair,)
    return (pair, Loop(name=f"{phases}+G", weights=unit[a] + unit[b]))


def loop_impedance(loop: Loop, fault: Fault, *, z1_ohm: complex, z0_ohm: complex) -> complex:
    """Return what a loop's driving voltage sees when one transposed source feeds the fault. [ohm].

    Phase: (2 Z1 + Z0)/3 + Rp + Rg; pair and three-phase: Z1 + Rp; pair to ground: (Z1 + 2 Z0)/3 + Rp + 2 Rg.
    """
    rp, rg = fault.phase_resistance_ohm, fault.ground_resistance_ohm
    if loop.name.endswith("+G"):
        return (z1_ohm + 2.0 * z0_ohm) / 3.0 + rp + 2.0 * rg
    if loop.name.endswith("G"):
        return (2.0 * z1_ohm + z0_ohm) / 3.0 + rp + rg
    return z1_ohm + rp


@dataclass(frozen=True, slots=True, kw_only=True)
class SequenceImpedances:
    """Positive-, negative- and zero-sequence impedance; None where nothing conducts. [ohm]."""

    z1_ohm: complex | None
    z2_ohm: complex | None
    z0_ohm: complex | None


def impedances_at(
    network: Network, place: Place, *, frequency_hz: float, open_elements: frozenset[str] = frozenset()
) -> SequenceImpedances:
    """Return the parallel of everything connected to ground at the bus or at the line's end.

    Parameters
    ----------
    network : Network
        The network; a converter counts as an open circuit, a transformer is left out, a machine is
        sub-transient.
    place : {'bus', 'end'}
        'bus' is what lies behind the recorder's terminal.
    frequency_hz : float
        Actual frequency, to which reactances are converted. [Hz]
    open_elements : frozenset of str
        Loads by name, or 'capacitor', that are switched out.
    """
    ratio = frequency_hz / network.nominal_frequency_hz
    admittance = np.zeros(3, dtype=np.complex128)

    def add(z1: complex, z2: complex, z0: complex | None) -> None:
        for k, z in enumerate((z1, z2, z0)):
            if z is not None:
                admittance[k] += 1.0 / complex(z.real, z.imag * ratio)

    source = network.source if place == "bus" else network.remote
    if source is not None:
        add(source.z1_ohm, source.negative_ohm, source.z0_ohm)
    for load in network.loads:
        if load.place == place and load.name not in open_elements:
            add(load.z_ohm, load.z_ohm, load.z_ohm if load.star == "grounded" else None)
    machine = network.machine
    if machine is not None and machine.place == place:
        z_ohm = complex(machine.r_ohm, machine.x_subtransient_ohm)
        add(z_ohm, z_ohm, machine.z0_ohm)
    bank = network.capacitor
    if bank is not None and place == "bus" and "capacitor" not in open_elements:
        omega = 2.0 * np.pi * frequency_hz
        z_ohm = complex(bank.r_ohm, omega * bank.l_h - 1.0 / (omega * bank.capacitance_f))
        admittance[: 3 if bank.star == "grounded" else 2] += 1.0 / z_ohm
    z = [complex(1.0 / y) if y != 0.0 else None for y in admittance]
    return SequenceImpedances(z1_ohm=z[0], z2_ohm=z[1], z0_ohm=z[2])


def line_impedance(z_ohm: complex, *, fraction: float, frequency_ratio: float) -> complex:
    """Return a share of a line's impedance at another than nominal frequency. [ohm]."""
    return complex(z_ohm.real, z_ohm.imag * frequency_ratio) * fraction
