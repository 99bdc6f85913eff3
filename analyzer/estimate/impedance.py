"""Impedances from the change of phasors at inception.

In the circuit of the changes alone the source is dead, so behind the terminal Z = -dV/dI, by sequence
(M. Chamia and S. Liberman, IEEE Trans. PAS-97, 1978; from memory). In front of it the same quotient has the
opposite sign, which tells the direction.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np

from analyzer.estimate.phases import ChannelFit
from analyzer.estimate.rlfit import LoopFit
from analyzer.theory.modes import FORTESCUE, FaultType, Loop, is_ground_fault, loops_of
from analyzer.waveform.phasors import Phasor, combine
from analyzer.waveform.prefault import Prefault

Direction = Literal["forward", "reverse", "undetermined"]
ZeroSequence = Literal["known", "unknown"]
_SIGMAS = 5.0
_SHARE = 0.03  # of the largest change of current: less of a sequence tells no impedance


@dataclass(frozen=True, slots=True, kw_only=True)
class Impedances:
    """What the changes tell; None where they tell nothing.

    Attributes
    ----------
    direction : {"forward", "reverse", "undetermined"}
    z1, z2, z0 : Phasor or None
        Behind the terminal. [ohm]
    faulted_loop : Phasor or None
        Loop voltage over loop current at the terminal during the fault. [ohm]
    faulted : Phasor or None
        From the terminal to the fault, positive sequence; for a ground fault of one phase it needs the
        line's k0, and a forward direction. [ohm]
    total : Phasor or None
        Driving voltage, the loop's at the terminal before the fault, over loop current. [ohm]
    driven : Phasor or None
        Electromotive force behind the terminal over loop current: the same without what the load current
        drops behind the terminal, and so the impedance whose angle is that of the loop. [ohm]
    driving : tuple of Phasor
        That electromotive force, of each of the loop's currents, at inception. [V]
    """

    direction: Direction
    z1: Phasor | None
    z2: Phasor | None
    z0: Phasor | None
    faulted_loop: Phasor | None
    faulted: Phasor | None
    total: Phasor | None
    driven: Phasor | None
    driving: tuple[Phasor, ...]


def estimate_impedances(
    fault_type: FaultType,
    prefault: Prefault,
    fits: tuple[ChannelFit, ...],
    loop_fit: LoopFit,
    *,
    inception_s: float,
    k0: complex | None = None,
    zero_sequence_voltage: ZeroSequence = "known",
) -> Impedances:
    """Return the impedances of a fault.

    Parameters
    ----------
    fault_type : str
    prefault : Prefault
        Channels: three currents, three voltages.
    fits : tuple of ChannelFit
        The same channels during the fault, their origin at `inception_s`.
    loop_fit : LoopFit
        The first loop's fit, of the same origin.
    inception_s : float
        [s]
    k0 : complex, optional
        The line's factor of 3 I0 in a loop to ground, ``(Z0 - Z1) / (3 Z1)``.
    zero_sequence_voltage : {"known", "unknown"}
        Unknown where the phase voltages were formed from voltages between phases: what needs it is then
        None. Before the fault it is taken to be zero.

    Returns
    -------
    Impedances
    """
    before = [prefault.phasor_at(k, inception_s) for k in range(6)]
    during = [fit.phasor for fit in fits]
    changes = [combine([1, -1], [d, b]) for d, b in zip(during, before, strict=True)]
    current_changes = [combine(list(row), changes[:3]) for row in FORTESCUE]  # zero, positive, negative
    voltage_changes = [combine(list(row), changes[3:]) for row in FORTESCUE]
    largest = max(phasor.magnitude for phasor in current_changes)

    def quotient(sequence: int) -> Phasor | None:
        current, voltage = current_changes[sequence], voltage_changes[sequence]
        if not current.is_significant(_SIGMAS) or current.magnitude < _SHARE * largest:
            return None
        return combine([-1], [voltage.over(current)])

    z0, z1, z2 = quotient(0), quotient(1), quotient(2)
    direction = _direction(z1)
    if direction == "reverse":
        # The quotient is then that of line and remote source, which is not behind the terminal.
        z0 = z1 = z2 = None
    emf = [combine([1, z1.value if z1 else 0], [before[3 + k], before[k]]) for k in range(3)]
    loop = loops_of(fault_type)[0]
    current, voltage = _loop_current(loop_fit), _of_loop(loop, during[3:])
    driving, forced = _of_loop(loop, before[3:]), _of_loop(loop, emf)
    flows = current.is_significant(_SIGMAS)
    to_ground = is_ground_fault(fault_type) and len(fault_type) == 2
    if zero_sequence_voltage == "unknown":
        z0 = None
    faulted_loop = voltage.over(current) if flows else None
    if to_ground and zero_sequence_voltage == "unknown":
        faulted_loop = None
    faulted = faulted_loop
    if to_ground:
        faulted = None
        if k0 is not None and faulted_loop is not None and direction != "reverse":
            faulted = voltage.over(_compensated(loop, during[:3], k0))
    return Impedances(
        direction=direction,
        z1=z1,
        z2=z2,
        z0=z0,
        faulted_loop=faulted_loop,
        faulted=faulted,
        total=driving.over(current) if flows else None,
        driven=forced.over(current) if flows else None,
        driving=tuple(combine(list(row), emf) for row in loop.weights),
    )


def _loop_current(fit: LoopFit) -> Phasor:
    """The loop's own fit: what its currents share, the decay's uncertainty above all, is counted once."""
    if fit.coefficients.shape[1] == 1:
        return fit.phasor(0)
    return combine([0.5, 0.5j], [fit.phasor(0), fit.phasor(1)])  # positive sequence of alpha and beta


def _compensated(loop: Loop, currents: list[Phasor], k0: complex) -> Phasor:
    """``I + k0 3 I0`` of a loop to ground (common practice in distance protection)."""
    return combine([own + k0 for own in loop.weights[0]], currents)


def _of_loop(loop: Loop, phasors: list[Phasor]) -> Phasor:
    if len(loop.weights) == 1:
        return combine(list(loop.weights[0]), phasors)
    return combine(list(FORTESCUE[1]), phasors)  # three phases: the positive sequence


def _direction(z1: Phasor | None) -> Direction:
    if z1 is None or not z1.is_significant(_SIGMAS):
        return "undetermined"
    # Impedances of networks lie between 0 and 90 degrees; the quadrants beside are left to uncertainty.
    if -30.0 < z1.angle_deg < 120.0:
        return "forward"
    if z1.angle_deg > 150.0 or z1.angle_deg < -60.0:
        return "reverse"
    return "undetermined"


def x_over_r(impedance: Phasor | None) -> tuple[float, float] | None:
    """Return X/R of an impedance and its standard uncertainty; None without a resistance to speak of."""
    if impedance is None or impedance.value.real <= 0 or impedance.value.imag <= 0:
        return None
    r_ohm, x_ohm = impedance.value.real, impedance.value.imag
    gradient = np.array([-x_ohm / r_ohm**2, 1.0 / r_ohm])
    std = math.sqrt(max(float(gradient @ impedance.covariance @ gradient), 0.0))
    return x_ohm / r_ohm, std
