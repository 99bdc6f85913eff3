"""Loops and transforms: against a circuit solved phase by phase, and against their own inverses."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.forge.schedule import Fault
from analyzer.theory.modes import (
    CLARKE,
    FAULT_TYPES,
    FORTESCUE,
    PHASES,
    faulted_phases,
    is_ground_fault,
    loop_impedance,
    loops_of,
    reference_loop,
    reference_name,
    sequences,
)
from tests.forge.networks import fault_loops

Z1, Z0 = 0.7 + 4.4j, 1.1 + 9.6j
EMF = 11.0e3 * np.exp(1j * np.radians(33.0)) * np.exp(-2j * np.pi / 3 * np.arange(3))
quiet = settings(deadline=None, derandomize=True, max_examples=60)
parts = st.floats(-1e4, 1e4)
phasors = st.lists(st.builds(complex, parts, parts), min_size=3, max_size=3).map(np.array)


def solved_currents(fault_type: str, *, rp_ohm: float, rg_ohm: float) -> np.ndarray:
    """Phase currents of a bolted or resistive fault, from the phase impedance matrix and nothing else."""
    z_self, z_mutual = (Z0 + 2 * Z1) / 3, (Z0 - Z1) / 3
    matrix = np.full((3, 3), z_mutual) + np.eye(3) * (z_self - z_mutual)
    on = [PHASES.index(letter) for letter in PHASES if letter in fault_type]
    network = matrix[np.ix_(on, on)] + rp_ohm * np.eye(len(on))
    currents = np.zeros(3, dtype=complex)
    if is_ground_fault(fault_type):
        currents[on] = np.linalg.solve(network + rg_ohm, EMF[on])
        return currents
    # No ground: the star point's voltage is one more unknown, and the currents add to nothing.
    n = len(on)
    bordered = np.block([[network, np.ones((n, 1))], [np.ones((1, n)), np.zeros((1, 1))]])
    currents[on] = np.linalg.solve(bordered, np.append(EMF[on], 0.0))[:n]
    return currents


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
@pytest.mark.parametrize(("rp_ohm", "rg_ohm"), [(0.0, 0.0), (1.3, 4.2)])
def test_each_loop_is_a_circuit_of_its_own(fault_type, rp_ohm, rg_ohm):
    currents = solved_currents(fault_type, rp_ohm=rp_ohm, rg_ohm=rg_ohm)
    for loop in loops_of(fault_type):
        impedance = loop_impedance(fault_type, loop.name, z1_ohm=Z1, z0_ohm=Z0, rp_ohm=rp_ohm, rg_ohm=rg_ohm)
        rows = np.array(loop.weights)
        np.testing.assert_allclose(rows @ EMF, impedance * (rows @ currents), rtol=1e-12)


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_loops_and_impedances_are_those_of_the_simulated_networks(fault_type):
    rg_ohm = 2.5 if is_ground_fault(fault_type) else 0.0
    fault = Fault(type=fault_type, fraction=0.5, phase_resistance_ohm=0.8, ground_resistance_ohm=rg_ohm)
    ours = loops_of(fault_type)
    for loop, (weights, impedance) in zip(ours, fault_loops(fault, Z1, Z0), strict=False):
        found = loop_impedance(fault_type, loop.name, z1_ohm=Z1, z0_ohm=Z0, rp_ohm=0.8, rg_ohm=rg_ohm)
        assert found == pytest.approx(impedance, rel=1e-14)
        if fault_type != "ABC":  # which has its three phases there and alpha and beta here
            assert loop.weights in ((tuple(weights),), (tuple(-weights),))  # a loop may be run either way
    assert len(ours) == (2 if len(fault_type) == 3 and fault_type.endswith("G") else 1)


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_loops_hold_all_that_the_faulted_phases_carry(fault_type):
    currents = solved_currents(fault_type, rp_ohm=0.4, rg_ohm=1.0)
    rows = np.vstack([loop.weights for loop in loops_of(fault_type)])
    seen = [PHASES.index(phase) for phase in faulted_phases(fault_type)]
    # Without ground the sum is nothing, which is the row that a pair and three phases lack.
    if not is_ground_fault(fault_type):
        rows = np.vstack([rows, np.ones(3)])
    restored = np.linalg.lstsq(rows[:, seen], rows @ currents, rcond=None)[0]
    np.testing.assert_allclose(restored, currents[seen], rtol=1e-12)


def test_phases_and_references_of_each_type():
    # The convention of the findings: the pair's voltage is va - vb, vb - vc, vc - va.
    expected = {
        **{"AG": ("A", "AG"), "BG": ("B", "BG"), "CG": ("C", "CG"), "ABC": ("ABC", "AG")},
        **{"AB": ("AB", "AB"), "BC": ("BC", "BC"), "CA": ("CA", "CA")},
        **{"ABG": ("AB", "AB"), "BCG": ("BC", "BC"), "CAG": ("CA", "CA")},
    }
    assert set(expected) == set(FAULT_TYPES)
    for fault_type, (phases, reference) in expected.items():
        assert "".join(faulted_phases(fault_type)) == phases
        assert reference_name(fault_type) == reference
        assert reference_loop(fault_type).name == reference
        assert is_ground_fault(fault_type) == fault_type.endswith("G")
    assert reference_loop("CAG").weights == ((-1.0, 0.0, 1.0),)
    assert reference_loop("BC").weights == ((0.0, 1.0, -1.0),)
    assert reference_loop("ABC").weights == ((1.0, 0.0, 0.0),)
    assert [loop.name for loop in loops_of("CAG")] == ["CA", "CA+G"]
    assert loops_of("CAG")[1].weights == ((1.0, 0.0, 1.0),)


def test_a_loop_that_a_type_does_not_drive_is_refused():
    for fault_type, loop in [("AG", "AB"), ("AB", "AB+G"), ("ABC", "AG"), ("BCG", "AB+G")]:
        with pytest.raises(ValueError, match=f"{fault_type} has no loop"):
            loop_impedance(fault_type, loop, z1_ohm=Z1, z0_ohm=Z0)


def test_a_loop_takes_waveforms_of_phases_to_its_own():
    waves = np.arange(12.0).reshape(3, 4)
    (loop,) = loops_of("CA")
    np.testing.assert_array_equal(loop.of(waves), [waves[2] - waves[0]])
    (loop,) = loops_of("ABC")
    assert loop.of(waves).shape == (2, 4)


@quiet
@given(values=phasors)
def test_sequence_components_are_undone_by_their_inverse(values):
    turn = np.exp(2j * np.pi / 3)
    zero, positive, negative = sequences(values)
    rebuilt = [
        zero + positive + negative,
        zero + turn**2 * positive + turn * negative,
        zero + turn * positive + turn**2 * negative,
    ]
    np.testing.assert_allclose(rebuilt, values, atol=1e-9 * (1 + np.abs(values).max()))
    # Parseval: the components hold a third of the phases' power each.
    power = np.sum(np.abs([zero, positive, negative]) ** 2)
    assert 3 * power == pytest.approx(np.sum(np.abs(values) ** 2), rel=1e-9, abs=1e-9)


@quiet
@given(values=st.lists(parts, min_size=3, max_size=3).map(np.array))
def test_clarke_components_are_undone_by_their_inverse(values):
    alpha, beta, zero = CLARKE @ values
    root = np.sqrt(3.0) / 2
    rebuilt = [alpha + zero, -alpha / 2 + root * beta + zero, -alpha / 2 - root * beta + zero]
    np.testing.assert_allclose(rebuilt, values, atol=1e-9 * (1 + np.abs(values).max()))


def test_a_balanced_set_has_one_sequence_and_its_own_amplitude():
    np.testing.assert_allclose(sequences(EMF), [0, EMF[0], 0], atol=1e-9)
    np.testing.assert_allclose(sequences(EMF[[0, 2, 1]]), [0, 0, EMF[0]], atol=1e-9)
    np.testing.assert_allclose(sequences(np.full(3, EMF[0])), [EMF[0], 0, 0], atol=1e-9)
    # Clarke's alpha is phase A's wave, beta lags it by 90 degrees.
    np.testing.assert_allclose(CLARKE @ EMF, [EMF[0], -1j * EMF[0], 0], atol=1e-9)
    many = np.stack([EMF, 2 * EMF], axis=1)
    np.testing.assert_allclose(sequences(many)[1], [EMF[0], 2 * EMF[0]], atol=1e-9)


def test_positive_sequence_is_that_of_alpha_and_beta():
    values = np.array([3 + 4j, -1 + 2j, 5 - 6j])
    alpha, beta, _ = CLARKE @ values
    assert (alpha + 1j * beta) / 2 == pytest.approx(FORTESCUE[1] @ values)
