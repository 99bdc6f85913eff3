"""Switchings: continuity, poles, flux and charge, loads, restrikes, reclosing, samples."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.forge.circuit import build_circuit
from analyzer.forge.network import Capacitor, Line, Load, Network, Source
from analyzer.forge.reduction import SwitchState, reduce_circuit
from analyzer.forge.schedule import (
    FAULT_TYPES,
    Connect,
    Disconnect,
    Fault,
    FaultChange,
    FaultStart,
    FaultType,
    PolesClose,
    PolesOpen,
    Restrike,
    Schedule,
)
from analyzer.forge.solution import Solution, solve
from analyzer.forge.stretches import ExpmStretch, carried_state
from tests.forge.networks import emf, radial, rl_current

REMOTE = Source(voltage_rms_v=11300.0, angle_deg=3.0, z1_ohm=0.9 + 7.0j, z0_ohm=1.5 + 10.0j)
LOAD = Load(z_ohm=45.0 + 20.0j, star="grounded")
BANK = Capacitor(capacitance_f=15e-6, r_ohm=0.4, l_h=1.2e-3)


def largest_jump(solution: Solution) -> float:
    """Largest step of a line current at any switching, over its peak."""
    edges = np.array([stretch.start_s for stretch in solution.stretches[1:]])
    step = 1e-9
    before, after = solution.current(edges - step), solution.current(edges)
    t = np.linspace(0.0, solution.duration_s, 2000)
    slope = np.abs(np.gradient(solution.current(t), t, axis=1)).max() * 3.0
    return float((np.abs(after - before).max() - slope * step) / np.abs(solution.current(t)).max())


@settings(deadline=None, derandomize=True, max_examples=60)
@given(
    fault_type=st.sampled_from(FAULT_TYPES),
    later=st.sampled_from(FAULT_TYPES),
    fraction=st.sampled_from([0.0, 0.3, 1.0]),
    start_s=st.floats(0.03, 0.05),
    rp=st.sampled_from([0.0, 0.4]),
    remote=st.booleans(),
    load=st.booleans(),
    bank=st.booleans(),
)
def test_no_current_ever_jumps(
    fault_type: FaultType,
    later: FaultType,
    fraction: float,
    start_s: float,
    rp: float,
    remote: bool,
    load: bool,
    bank: bool,
) -> None:
    network = radial(
        remote=REMOTE if remote else None, loads=(LOAD,) if load else (), capacitor=BANK if bank else None
    )
    schedule = Schedule(
        happenings=(
            FaultStart(
                time_s=start_s, fault=Fault(type=fault_type, fraction=fraction, phase_resistance_ohm=rp)
            ),
            FaultChange(time_s=0.07, fault=Fault(type=later, fraction=fraction, phase_resistance_ohm=rp)),
            PolesOpen(time_s=0.1),
            PolesOpen(time_s=0.102, breaker="remote"),
            PolesClose(time_s=0.15),
        )
    )
    solution = solve(network, schedule, duration_s=0.2)
    assert largest_jump(solution) < 1e-6
    edges = [stretch.start_s for stretch in solution.stretches] + [solution.duration_s]
    assert edges == sorted(edges)
    assert all(
        a.stop_s == b.start_s for a, b in zip(solution.stretches, solution.stretches[1:], strict=False)
    )


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_poles_open_at_zeros_not_before_the_order(fault_type: FaultType) -> None:
    fault = Fault(type=fault_type, fraction=0.7, phase_resistance_ohm=0.1)
    schedule = Schedule(happenings=(FaultStart(time_s=0.04, fault=fault), PolesOpen(time_s=0.1)))
    solution = solve(radial(remote=REMOTE, loads=(LOAD,)), schedule, duration_s=0.25)
    opened = {mark.phase: mark.time_s for mark in solution.marks if mark.what == "opened"}
    assert sorted(opened) == [0, 1, 2]  # type: ignore[type-var]
    scale = np.abs(solution.current(np.linspace(0.04, 0.1, 500))).max()
    for phase, time_s in opened.items():
        assert 0.1 <= time_s < 0.125
        assert abs(solution.current([time_s - 1e-12])[phase, 0]) < 1e-8 * scale
        assert np.abs(solution.current(np.linspace(time_s, 0.25, 50))[phase]).max() < 1e-9 * scale
        # It is the first zero: the current keeps its sign between the order and the opening.
        between = solution.current(np.linspace(0.1, time_s - 1e-7, 400))[phase]
        assert np.all(between > 0.0) or np.all(between < 0.0)


def test_a_pole_forced_open_leaves_the_flux_of_the_loops_that_remain() -> None:
    # Two star loads at the bus; the far pole of phase A is taken out under current. What remains is found by
    # hand: each loop that does not contain the opened pole keeps its flux.
    network = radial(loads=(LOAD,))
    circuit = build_circuit(network, None)
    all_closed = reduce_circuit(circuit, SwitchState(open_branches=frozenset()))
    pole = int(circuit.poles["line"][0])
    opened = reduce_circuit(circuit, SwitchState(open_branches=frozenset({pole})))
    rng = np.random.default_rng(5)
    before = all_closed.i_w @ rng.normal(size=all_closed.n)
    fluxes = circuit.l_h @ before
    state = carried_state(
        opened, fluxes=fluxes, capacitor_voltages=np.zeros(0), prescribed=np.zeros(len(circuit.emf_rms_v))
    )
    after = opened.i_w @ state
    assert abs(after[pole]) < 1e-12 * np.abs(before).max()
    assert np.abs(circuit.incidence @ after).max() < 1e-9 * np.abs(before).max()
    # Phases B and C each form a loop source-line-load-ground; compare with the mutual-coupled flux balance.
    omega = 100.0 * np.pi
    assert network.source is not None
    z1 = network.source.z1_ohm + network.line.z1_ohm
    z0 = network.source.z0_ohm + network.line.z0_ohm
    own = ((z0 + 2 * z1) / 3).imag / omega + LOAD.z_ohm.imag / omega
    mutual = ((z0 - z1) / 3).imag / omega
    matrix = np.full((3, 3), mutual) + np.eye(3) * (own - mutual)
    near = circuit.groups["near"]
    wanted = (matrix @ before[near])[1:]
    assert after[near][1:] == pytest.approx(np.linalg.solve(matrix[1:, 1:], wanted), rel=1e-9)


def test_load_is_switched_at_its_current_zeros() -> None:
    schedule = Schedule(
        happenings=(Connect(time_s=0.05, element="load"), Disconnect(time_s=0.15, element="load"))
    )
    solution = solve(radial(loads=(Load(z_ohm=45.0 + 20.0j),)), schedule, duration_s=0.25)
    assert np.abs(solution.current(np.linspace(0.0, 0.0499, 50))).max() == pytest.approx(0.0, abs=1e-9)
    out = [mark.time_s for mark in solution.marks if mark.what == "disconnected"]
    assert len(out) == 3
    assert out[1] == out[2]  # with an open star the last two poles interrupt together
    events = solution.truth().events
    assert [event.kind for event in events] == ["switching", "switching"]
    assert np.abs(solution.current(np.linspace(out[2], 0.25, 50))).max() < 1e-9
    # Between, the current is that of the closed form with the network's own time constant.
    t = np.linspace(0.05, 0.149, 200)
    network = radial()
    assert network.source is not None
    z_ohm = network.source.z1_ohm + network.line.z1_ohm + 45.0 + 20.0j
    phasors = emf(network) / z_ohm
    turn = np.exp(100j * np.pi * t)
    steady = np.sqrt(2.0) * (phasors[:, None] * turn).real
    offset = -np.sqrt(2.0) * (phasors * np.exp(100j * np.pi * 0.05)).real
    expected = steady + offset[:, None] * np.exp(-(t - 0.05) * 100 * np.pi * z_ohm.real / z_ohm.imag)
    assert np.abs(solution.current(t) - expected).max() < 1e-9 * np.abs(expected).max()


def test_capacitor_discharges_into_a_fault_at_the_bus() -> None:
    # Bolted three-phase fault at the bus: the bank rings by itself with its own R, L and C.
    schedule = Schedule(happenings=(FaultStart(time_s=0.045, fault=Fault(type="ABC", fraction=0.0)),))
    solution = solve(radial(capacitor=BANK), schedule, duration_s=0.06)
    omega = 100.0 * np.pi
    start = solution.branch_current("capacitor", [0.045])[:, 0]
    volts = solution.stretches[0].capacitor_voltages(0.045)
    alpha, natural = BANK.r_ohm / (2 * BANK.l_h), 1.0 / (BANK.l_h * BANK.capacitance_f)
    ring = np.sqrt(natural - alpha**2)
    t = np.linspace(0.045, 0.06, 400)
    s = t - 0.045
    slope = (-volts - BANK.r_ohm * start) / BANK.l_h
    decay = np.exp(-alpha * s)
    expected = decay * (
        start[:, None] * np.cos(ring * s) + ((slope + alpha * start) / ring)[:, None] * np.sin(ring * s)
    )
    found = solution.branch_current("capacitor", t)
    assert np.abs(found - expected).max() < 1e-8 * np.abs(expected).max()
    event = solution.truth().events[0]
    assert event.fault is not None
    ringing = next(mode for mode in event.fault.modes if mode.frequency_hz > 0.0)
    assert ringing.frequency_hz == pytest.approx(ring / (2 * np.pi), rel=1e-9)
    assert ringing.time_constant_s == pytest.approx(1 / alpha, rel=1e-9)
    assert "oscillatory-start" in {effect.code for effect in event.effects}
    assert omega < ring


def test_critically_damped_discharge_needs_the_matrix_exponential() -> None:
    bank = Capacitor(capacitance_f=10e-6, r_ohm=2.0 * np.sqrt(1e-3 / 10e-6), l_h=1e-3)
    schedule = Schedule(happenings=(FaultStart(time_s=0.045, fault=Fault(type="ABC", fraction=0.0)),))
    solution = solve(radial(capacitor=bank), schedule, duration_s=0.06)
    assert isinstance(solution.stretches[1], ExpmStretch)
    t = np.linspace(0.045, 0.06, 200)
    s, alpha = t - 0.045, bank.r_ohm / (2 * bank.l_h)
    start = solution.branch_current("capacitor", [0.045])[:, 0]
    slope = (-solution.stretches[0].capacitor_voltages(0.045) - bank.r_ohm * start) / bank.l_h
    expected = np.exp(-alpha * s) * (start[:, None] + (slope + alpha * start)[:, None] * s)
    assert np.abs(solution.branch_current("capacitor", t) - expected).max() < 1e-8 * np.abs(expected).max()
    # The source is shorted at the bus and follows the closed form of its own R and L.
    network = radial()
    assert network.source is not None
    for phase, e_rms in enumerate(emf(network)):
        before = float(solution.branch_current("source", [0.045])[phase, 0])
        alone = rl_current(
            t, e_rms=e_rms, z_ohm=network.source.z1_ohm, omega=100 * np.pi, start_s=0.045, before=before
        )
        found = solution.branch_current("source", t)[phase]
        assert np.abs(found - alone).max() < 1e-9 * np.abs(alone).max()
    # Phasors of such a stretch: power-frequency part and offset add up to the line current.
    event = solution.truth().events[0]
    assert event.fault is not None
    total = np.sqrt(2.0) * event.fault.symmetrical_current_a.real + event.fault.offset_a
    assert total == pytest.approx(solution.current([0.045])[:, 0], rel=1e-9)
    settled = emf(network) / network.source.z1_ohm * np.exp(100j * np.pi * 0.045)
    assert event.fault.symmetrical_current_a == pytest.approx(settled, rel=1e-9)


def test_reclosing_onto_the_fault_starts_a_second_event_without_load() -> None:
    fault = Fault(type="CA", fraction=0.5)
    schedule = Schedule(
        happenings=(FaultStart(time_s=0.04, fault=fault), PolesOpen(time_s=0.1), PolesClose(time_s=0.2))
    )
    solution = solve(radial(loads=(LOAD,)), schedule, duration_s=0.3)
    first, second = solution.truth().events
    assert first.fault is not None
    assert second.fault is not None
    # Both settle at the same current; the closed form is the same, only the beginning differs.
    assert np.abs(second.fault.steady_current_a[[0, 2]]) == pytest.approx(
        np.abs(first.fault.steady_current_a[[0, 2]]), rel=1e-9
    )
    assert np.abs(solution.current([0.2])).max() < 1e-6


def test_restrike_lasts_to_the_next_zero() -> None:
    schedule = Schedule(
        happenings=(
            FaultStart(time_s=0.04, fault=Fault(type="BG", fraction=0.5)),
            PolesOpen(time_s=0.1),
            Restrike(time_s=0.125, poles="B"),
        )
    )
    solution = solve(radial(), schedule, duration_s=0.2)
    struck = [mark for mark in solution.marks if mark.what == "restruck"]
    again = [mark for mark in solution.marks if mark.what == "opened" and mark.time_s > 0.125]
    assert [mark.phase for mark in struck] == [1]
    assert len(again) == 1
    t = np.linspace(0.125 + 1e-6, again[0].time_s - 1e-6, 200)
    wave = solution.current(t)[1]
    assert np.all(wave > 0.0) or np.all(wave < 0.0)
    assert np.abs(wave).max() > 100.0


def test_samples_are_the_solution_and_skew_moves_channels() -> None:
    solution = solve(
        radial(loads=(LOAD,)),
        Schedule(happenings=(FaultStart(time_s=0.0437, fault=Fault(type="AG", fraction=0.5)),)),
        duration_s=0.1,
    )
    plain = solution.sample(4800.0, start_s=0.01)
    assert plain.time_s[0] == 0.01
    assert len(plain.time_s) == 433
    assert np.array_equal(plain.current_a, solution.current(plain.time_s))
    skewed = solution.sample(4800.0, start_s=0.01, delay_s=np.arange(6) * 1e-5)
    inside = plain.time_s < 0.0999
    for phase in range(3):
        later = plain.time_s[inside]
        assert np.array_equal(skewed.voltage_v[phase, inside], solution.voltage(later + phase * 1e-5)[phase])
        assert np.array_equal(
            skewed.current_a[phase, inside], solution.current(later + (3 + phase) * 1e-5)[phase]
        )
    with pytest.raises(ValueError, match="read-only"):
        plain.current_a[0, 0] = 1.0


def test_purely_resistive_parts_are_no_special_case() -> None:
    network = Network(
        nominal_frequency_hz=60.0,
        line=Line(z1_ohm=0.5 + 0j, z0_ohm=0.9 + 0j),
        source=Source(voltage_rms_v=8000.0, z1_ohm=0.2 + 2.0j, z0_ohm=0.3 + 3.0j),
        loads=(Load(z_ohm=50.0 + 0j), Load(name="house", z_ohm=90.0 + 0j, place="bus", star="grounded")),
    )
    fault = Fault(type="ABG", fraction=0.5, phase_resistance_ohm=0.1)
    schedule = Schedule(happenings=(FaultStart(time_s=0.03, fault=fault), PolesOpen(time_s=0.08)))
    solution = solve(network, schedule, duration_s=0.15)
    t = np.linspace(0.0, 0.15, 700)
    # Ohm's law at the resistive load beside the bus, at every instant.
    assert np.abs(solution.branch_current("house", t) * 90.0 - solution.voltage(t)).max() < 1e-6
    # The source's branch equation, with the exact slope of its current.
    assert np.abs(solution.branch_current("source", t).sum(axis=0)).max() > 1.0
