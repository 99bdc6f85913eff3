"""Fault types as the loops they drive, and the transforms between phases, sequences and Clarke components."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

FaultType = Literal["AG", "BG", "CG", "AB", "BC", "CA", "ABG", "BCG", "CAG", "ABC"]
FAULT_TYPES: tuple[FaultType, ...] = ("AG", "BG", "CG", "AB", "BC", "CA", "ABG", "BCG", "CAG", "ABC")
Phase = Literal["A", "B", "C"]
PHASES: tuple[Phase, ...] = ("A", "B", "C")
LoopName = Literal["AG", "BG", "CG", "AB", "BC", "CA", "AB+G", "BC+G", "CA+G", "ABC"]
_REFERENCES: dict[FaultType, Literal["AG", "BG", "CG", "AB", "BC", "CA"]] = {
    **{"AG": "AG", "BG": "BG", "CG": "CG", "AB": "AB", "BC": "BC", "CA": "CA"},
    **{"ABG": "AB", "BCG": "BC", "CAG": "CA", "ABC": "AG"},
}
_PAIRS: dict[Phase, LoopName] = {"A": "AB", "B": "BC", "C": "CA"}  # by the first phase
_PLUS_GROUND: dict[LoopName, LoopName] = {"AB": "AB+G", "BC": "BC+G", "CA": "CA+G"}
A_OPERATOR = np.exp(2j * np.pi / 3)

# Rows give zero, positive and negative sequence (C. L. Fortescue, Trans. AIEE 37, 1918).
FORTESCUE = np.array([[1, 1, 1], [1, A_OPERATOR, A_OPERATOR**2], [1, A_OPERATOR**2, A_OPERATOR]]) / 3
# Amplitude-invariant (E. Clarke, Circuit Analysis of AC Power Systems, 1943): rows give alpha, beta, zero.
CLARKE = np.array([[2, -1, -1], [0, np.sqrt(3), -np.sqrt(3)], [1, 1, 1]]) / 3


@dataclass(frozen=True, slots=True, kw_only=True)
class Loop:
    """A driving loop of a fault: its currents share one time constant.

    Attributes
    ----------
    name : str
        As in the findings: ``AG``, ``BC``, ``BC+G``, ``ABC``.
    weights : tuple of tuple of float
        Each row takes phase quantities (A, B, C) to one of the loop's currents or driving voltages.
    """

    name: LoopName
    weights: tuple[tuple[float, float, float], ...]

    def of(self, phase_values: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the loop's quantities of phase quantities (3, n), shape (len(weights), n)."""
        return np.array(self.weights) @ phase_values


def faulted_phases(fault_type: FaultType) -> tuple[Phase, ...]:
    """Return the phases that carry the fault, in the order of the type's name."""
    order = {letter: fault_type.index(letter) for letter in PHASES if letter in fault_type}
    return tuple(sorted(order, key=order.__getitem__))


def is_ground_fault(fault_type: FaultType) -> bool:
    """Whether the fault involves the ground."""
    return fault_type.endswith("G")


def loops_of(fault_type: FaultType) -> tuple[Loop, ...]:
    """Return the loops that a fault drives, each an RL circuit of its own on a transposed network.

    A double-phase-to-ground fault drives two, with time constants of their own; every other type one.
    """
    phases = faulted_phases(fault_type)
    if fault_type == "ABC":
        alpha, beta = (tuple(float(x) for x in row) for row in CLARKE[:2])
        return (Loop(name="ABC", weights=(_triple(alpha), _triple(beta))),)
    first = _unit(phases[0])
    if fault_type in ("AG", "BG", "CG"):
        return (Loop(name=fault_type, weights=(_triple(first),)),)
    second = _unit(phases[1])
    pair = _PAIRS[phases[0]]
    between = Loop(name=pair, weights=(_triple(first - second),))
    if not is_ground_fault(fault_type):
        return (between,)
    return (between, Loop(name=_PLUS_GROUND[pair], weights=(_triple(first + second),)))


def reference_loop(fault_type: FaultType) -> Loop:
    """Return the loop whose prefault voltage the inception angle is stated against.

    The faulted phase's for a ground fault of one phase, the phase pair's for two phases with or without
    ground, and phase A's for three phases.
    """
    name = reference_name(fault_type)
    return loops_of(name)[0]


def reference_name(fault_type: FaultType) -> Literal["AG", "BG", "CG", "AB", "BC", "CA"]:
    """Return the name of the reference loop."""
    return _REFERENCES[fault_type]


def loop_impedance(
    fault_type: FaultType,
    loop: str,
    *,
    z1_ohm: complex,
    z0_ohm: complex,
    rp_ohm: float = 0.0,
    rg_ohm: float = 0.0,
) -> complex:
    """Return the impedance that a loop's driving voltage sees.

    Parameters
    ----------
    fault_type : str
        Fault type.
    loop : str
        Name of one of its loops.
    z1_ohm, z0_ohm : complex
        Positive- and zero-sequence impedance from the driving voltage to the fault. [ohm]
    rp_ohm, rg_ohm : float
        Resistance in each faulted phase, and to ground. [ohm]

    Raises
    ------
    ValueError
        If the fault type has no such loop.

    Notes
    -----
    On a transposed network with self impedance (Z0 + 2 Z1)/3 and mutual impedance (Z0 - Z1)/3 per phase:
    (2 Z1 + Z0)/3 + Rp + Rg for one phase to ground; Z1 + Rp between phases and for three phases;
    (Z1 + 2 Z0)/3 + Rp + 2 Rg for the sum current of two phases to ground.
    """
    if loop not in [candidate.name for candidate in loops_of(fault_type)]:
        raise ValueError(f"a fault {fault_type} has no loop {loop}")
    if loop.endswith("+G"):
        return (z1_ohm + 2 * z0_ohm) / 3 + rp_ohm + 2 * rg_ohm
    if len(loop) == 2 and loop.endswith("G"):
        return (2 * z1_ohm + z0_ohm) / 3 + rp_ohm + rg_ohm
    return z1_ohm + rp_ohm


def sequences(phase_phasors: ArrayLike) -> NDArray[np.complex128]:
    """Return zero, positive and negative sequence of phase phasors, shape (3, ...)."""
    return np.asarray(FORTESCUE @ np.asarray(phase_phasors), dtype=np.complex128)


def _unit(phase: str) -> NDArray[np.float64]:
    row: NDArray[np.float64] = np.eye(3)[PHASES.index(phase)]
    return row


def _triple(row: ArrayLike) -> tuple[float, float, float]:
    a, b, c = np.asarray(row, dtype=np.float64)
    return float(a), float(b), float(c)
