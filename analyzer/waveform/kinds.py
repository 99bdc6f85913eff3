"""What kind of change an event is: which phases and whether to ground, and whether it is a fault at all.

The fault's type follows from the changes of the symmetrical components at inception: on the circle of the
angle between negative and positive sequence the six faults of one or two phases sit 60 degrees apart (common
practice in distance protection); zero sequence tells the ground.
"""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import NDArray

from analyzer.theory.modes import FAULT_TYPES, PHASES, FaultType, faulted_phases, loops_of, sequences
from analyzer.waveform.phasors import degrees_of

_UNBALANCE = 0.25  # negative over positive sequence of a change, below which it is three-phase
_DEAD = 0.3
_INRUSH = 0.20
_GROUND = 0.12  # zero over positive sequence
_NO_POSITIVE = 0.02  # over the largest sequence: its angle is then rounding or noise
# Angle of negative over positive sequence to the phases it points to, for one phase or for two.
_ONE_PHASE: dict[int, FaultType] = {0: "AG", 120: "BG", -120: "CG"}
_TWO_PHASES: dict[int, tuple[FaultType, FaultType]] = {
    60: ("AB", "ABG"),
    180: ("BC", "BCG"),
    -60: ("CA", "CAG"),
}


def fault_type_of(changes: NDArray[np.complex128]) -> FaultType | None:
    """Return the fault type that the changes of the phase currents' phasors show.

    Parameters
    ----------
    changes : ndarray of complex128, shape (3,)
        Phasor of each phase current during the fault less the one carried forward from before.

    Returns
    -------
    FaultType or None
        None when the changes fit no type: negative sequence alone, say.
    """
    zero, positive, negative = sequences(changes)
    if abs(positive) <= _NO_POSITIVE * max(abs(zero), abs(negative)):
        return None
    # Two phases to ground where the zero sequence is easy have little negative, but much zero sequence.
    least = _UNBALANCE * abs(positive)
    if abs(negative) < least and not (abs(zero) > least and abs(negative) > 0.4 * least):
        return "ABC"
    to_ground = abs(zero) > _GROUND * max(abs(positive), abs(negative))
    sector = round(degrees_of(negative / positive) / 60.0) * 60
    if sector in _ONE_PHASE:
        return _ONE_PHASE[sector]
    between, grounded = _TWO_PHASES[180 if sector == -180 else sector]
    return grounded if to_ground else between


def kind_of(
    fault_type: FaultType | None,
    *,
    before: NDArray[np.complex128],
    during: NDArray[np.complex128],
    second_harmonic: float = 0.0,
) -> Literal["fault", "energisation", "switching", "unclassified"]:
    """Return whether a change is a fault, the inrush of a core, or a switching of load.

    Parameters
    ----------
    fault_type : str or None
        Type that the change fits.
    before, during : ndarray of complex128, shape (3,) or (6,)
        Phasors of the currents, and of the voltages where there are any, carried forward and during.
    second_harmonic : float
        Largest second harmonic of a phase current over the largest change of its fundamental.

    Notes
    -----
    A fault raises the current of its phases and, where voltages are known, lowers the voltage of its loop.
    Unbalanced, the current more than doubles with a fall of the voltage, or changes by half the load with one
    of 4 %; in three phases the voltage falls by 10 %, as a step of load does not. Where it is no fault and no
    voltage falls by 10 %, it is a switching; without voltages only a current that doubles is taken for a
    fault. Our choice for this version.

    A second harmonic above 20 % is that of a core driven into saturation by its own magnetising (15 to 20 %
    is common practice for telling inrush); a fault's transformers may saturate too, but then its voltage
    falls.
    """
    load = float(np.abs(before[:3]).max())
    change = float(np.abs(during[:3] - before[:3]).max())
    fault = 0.0
    if fault_type is not None:
        fault = float(np.abs(during[[PHASES.index(phase) for phase in faulted_phases(fault_type)]]).max())
    doubled = fault > 2.0 * load and change > load
    if len(before) < 6:
        return "fault" if doubled else "unclassified"
    falls = [_fall(kind, before[3:], during[3:]) for kind in FAULT_TYPES]
    if second_harmonic > _INRUSH and all(fall is not None and fall < 0.10 for fall in falls):
        return "energisation"
    if fault_type is not None:
        fall = falls[FAULT_TYPES.index(fault_type)]
        if fall is None and doubled:
            return "fault"
        if fault_type == "ABC":
            is_fault = fall is not None and fall > 0.10 and change > 0.5 * load
        else:
            is_fault = fall is not None and (
                (doubled and fall > 0.005) or (change > 0.5 * load and fall > 0.04)
            )
        if is_fault and fault > 1.1 * load:
            return "fault"
    return "switching" if all(fall is not None and fall < 0.10 for fall in falls) else "unclassified"


def _fall(
    fault_type: FaultType, before: NDArray[np.complex128], during: NDArray[np.complex128]
) -> float | None:
    """Return by which share a loop's voltage fell; None for a line that was dead: it had none to fall."""
    rows = np.array(loops_of(fault_type)[0].weights)
    voltage_before = float(np.linalg.norm(rows @ before))
    if voltage_before < _DEAD * float(np.abs(before).max()):
        return None
    return 1.0 - float(np.linalg.norm(rows @ during)) / voltage_before
