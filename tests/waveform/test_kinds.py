"""Fault types from the changes of currents, and what is a fault at all."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.theory.modes import FAULT_TYPES, PHASES, is_ground_fault
from analyzer.waveform.kinds import fault_type_of, kind_of

TURN = np.exp(2j * np.pi / 3)
FROM_SEQUENCES = np.array([[1, 1, 1], [1, TURN**2, TURN], [1, TURN, TURN**2]])  # zero, positive, negative
# By the faulted phases: the turn of the sequences that brings a fault of phase A, or of B and C, onto them.
TURNS = {"AG": 0, "BG": 1, "CG": 2, "BC": 0, "CA": 1, "AB": 2, "BCG": 0, "CAG": 1, "ABG": 2, "ABC": 0}
ANGLES = st.floats(-20.0, 20.0)
FACTORS = st.floats(0.7, 1.3)


def changes(
    fault_type: str,
    *,
    amount: complex = 1000.0 + 0j,
    z0_over_z1: float = 1.5,
    shares: tuple[complex, complex, complex] = (1, 1, 1),
) -> np.ndarray:
    """Phase currents of the sequence networks of a fault, each sequence split by its distribution factor.

    Series for one phase to ground, Z1 against Z2 between phases, Z2 and Z0 side by side for two phases to
    ground, as textbooks join them (from memory); equal positive and negative impedance.
    """
    if fault_type == "ABC":
        sequences = np.array([0, 1, 0], dtype=complex)
    elif len(fault_type) == 2 and fault_type.endswith("G"):
        sequences = np.array([1, 1, 1], dtype=complex) / (2 + z0_over_z1) * 3
    elif not is_ground_fault(fault_type):
        sequences = np.array([0, 1, -1], dtype=complex) / 2
    else:
        both = z0_over_z1 / (1 + z0_over_z1)
        sequences = np.array([-both / z0_over_z1, 1, -both], dtype=complex) / (1 + both)
    zero, positive, negative = amount * sequences * np.array(shares)
    turns = TURNS[fault_type]
    return FROM_SEQUENCES @ np.array([zero, positive * TURN**turns, negative * TURN**-turns])


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_the_sequences_used_here_put_current_where_the_fault_is(fault_type):
    phases = changes(fault_type)
    carried = {phase for phase, current in zip(PHASES, phases, strict=True) if abs(current) > 1.0}
    assert carried == {letter for letter in fault_type if letter in PHASES}
    if not is_ground_fault(fault_type):
        assert abs(phases.sum()) < 1e-6


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
@settings(deadline=None, derandomize=True, max_examples=40)
@given(
    angle_deg=st.floats(-180.0, 180.0),
    apart_deg=st.tuples(ANGLES, ANGLES),
    sizes=st.tuples(FACTORS, FACTORS),
    z0_over_z1=st.floats(0.4, 4.0),
)
def test_each_type_is_told_with_what_networks_do_to_the_sequences(
    fault_type, angle_deg, apart_deg, sizes, z0_over_z1
):
    # Shares of up to 30 % and 20 degrees apart: remote infeed, loads, a source's own negative sequence.
    negative = sizes[0] * np.exp(1j * np.radians(apart_deg[0]))
    zero = sizes[1] * np.exp(1j * np.radians(apart_deg[1]))
    found = fault_type_of(
        changes(
            fault_type,
            amount=1000.0 * np.exp(1j * np.radians(angle_deg)),
            z0_over_z1=z0_over_z1,
            shares=(zero, 1.0, negative),
        )
    )
    assert found == fault_type


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_less_than_half_of_the_zero_sequence_still_tells_the_ground(fault_type):
    found = fault_type_of(changes(fault_type, shares=(0.4, 1, 1)))
    assert found == fault_type


def test_nothing_is_no_type():
    assert fault_type_of(np.zeros(3, dtype=complex)) is None
    for alone in (0, 2):
        assert fault_type_of(FROM_SEQUENCES @ np.eye(3)[alone]) is None


def test_three_phases_may_be_unbalanced_a_little():
    for share, angle in [(0.1, 40.0), (0.2, 200.0)]:
        assert fault_type_of(FROM_SEQUENCES @ [0, 1000.0, share * 1000.0 * np.exp(1j * angle)]) == "ABC"


LOAD = 100.0 * TURN ** -np.arange(3)
VOLTAGE = 11e3 * np.exp(0.3j) * TURN ** -np.arange(3)


def kind(
    fault_type: str | None,
    *,
    current: float = 1000.0,
    fall: float = 0.3,
    load: np.ndarray = LOAD,
    with_voltages: bool = True,
) -> str:
    during = load + (changes(fault_type, amount=current) if fault_type else 0)
    voltage = VOLTAGE * (1 - fall)
    before = np.concatenate([load, VOLTAGE]) if with_voltages else load
    after = np.concatenate([during, voltage]) if with_voltages else during
    return kind_of(fault_type, before=before, during=after)


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_much_more_current_and_less_voltage_is_a_fault(fault_type):
    assert kind(fault_type, current=1500.0) == "fault"
    assert kind(fault_type, current=1500.0, with_voltages=False) == "fault"


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_currents_without_load_before_them_are_a_fault_too(fault_type):
    assert kind(fault_type, load=np.zeros(3, dtype=complex)) == "fault"


def test_a_step_of_load_is_a_switching():
    assert kind("ABC", current=150.0, fall=0.01) == "switching"
    assert kind("ABC", current=-100.0, fall=-0.01) == "switching"  # load that goes
    assert kind("AB", current=30.0, fall=0.01) == "switching"


def test_without_voltages_what_does_not_double_is_left_open():
    assert kind("ABC", current=80.0, with_voltages=False) == "unclassified"
    assert kind(None, with_voltages=False) == "unclassified"


def test_a_fall_of_voltage_without_a_fitting_current_is_left_open():
    assert kind(None, fall=0.4) == "unclassified"
    assert kind("ABC", current=20.0, fall=0.4) == "unclassified"


def test_a_line_that_was_dead_may_be_faulted():
    before = np.zeros(6, dtype=complex)
    before[3:] = VOLTAGE * [0, 1, 1]  # phase A dead: nothing to fall
    during = before.copy()
    during[0] = 900.0
    assert kind_of("AG", before=before, during=during) == "fault"
