"""The linear core against the closed form of every fault loop."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.forge.network import Line, Load, Network, Source
from analyzer.forge.schedule import FAULT_TYPES, Fault, FaultStart, FaultType, PolesOpen, Schedule
from analyzer.forge.solution import solve
from tests.forge.networks import emf, fault_loops, radial, rl_current, total

ohms = st.floats(0.01, 20.0)


@settings(deadline=None, derandomize=True, max_examples=120)
@given(
    fault_type=st.sampled_from(FAULT_TYPES),
    r1=ohms,
    x1=ohms,
    r0=ohms,
    x0=ohms,
    rp=st.one_of(st.just(0.0), ohms),
    rg=st.one_of(st.just(0.0), ohms),
    fraction=st.floats(0.0, 1.0),
    start_s=st.floats(0.001, 0.1),
    frequency_hz=st.sampled_from([50.0, 60.0]),
)
def test_every_fault_loop_follows_the_closed_form(
    fault_type: FaultType,
    r1: float,
    x1: float,
    r0: float,
    x0: float,
    rp: float,
    rg: float,
    fraction: float,
    start_s: float,
    frequency_hz: float,
) -> None:
    fault = Fault(
        type=fault_type,
        fraction=fraction,
        phase_resistance_ohm=rp,
        ground_resistance_ohm=rg if fault_type.endswith("G") else 0.0,
    )
    network = Network(
        nominal_frequency_hz=frequency_hz,
        line=Line(z1_ohm=complex(r1, x1), z0_ohm=complex(r0, x0)),
        source=Source(
            voltage_rms_v=20000.0, angle_deg=-40.0, z1_ohm=complex(r0, x1) / 3, z0_ohm=complex(r1, x0) / 2
        ),
    )
    solution = solve(
        network, Schedule(happenings=(FaultStart(time_s=start_s, fault=fault),)), duration_s=0.25
    )
    t = np.linspace(start_s, 0.25, 400)
    current = solution.current(t)
    for weights, z_ohm in fault_loops(fault, *total(network, fault)):
        expected = rl_current(
            t, e_rms=weights @ emf(network), z_ohm=z_ohm, omega=2 * np.pi * frequency_hz, start_s=start_s
        )
        assert np.abs(weights @ current - expected).max() <= 1e-9 * np.abs(expected).max()
    sound = [p for p in range(3) if p not in fault.phases]
    assert np.abs(current[sound]).max(initial=0.0) <= 1e-9 * np.abs(current).max()


@pytest.mark.parametrize("fault_type", ["ABC", "AB", "BC", "CA", "ABG", "BCG", "CAG"])
@pytest.mark.parametrize("star", ["open", "grounded"])
def test_load_current_is_carried_over_where_the_loop_is_closed(fault_type: FaultType, star: str) -> None:
    # A bolted fault cuts the phase-to-phase (or three-phase) loop off from what lies beyond it.
    network = radial(loads=(Load(z_ohm=40.0 + 15.0j, star=star),))  # type: ignore[arg-type]
    fault = Fault(type=fault_type, fraction=0.4)
    start_s, omega = 0.0386, 2 * np.pi * 50.0
    solution = solve(network, Schedule(happenings=(FaultStart(time_s=start_s, fault=fault),)), duration_s=0.2)
    t = np.linspace(start_s, 0.2, 300)
    assert network.source is not None
    load_z = network.source.z1_ohm + network.line.z1_ohm + 40.0 + 15.0j
    load_now = np.sqrt(2.0) * (emf(network) / load_z * np.exp(1j * omega * start_s)).real
    weights, z_ohm = fault_loops(fault, *total(network, fault))[0]
    expected = rl_current(
        t,
        e_rms=weights @ emf(network),
        z_ohm=z_ohm,
        omega=omega,
        start_s=start_s,
        before=float(weights @ load_now),
    )
    assert abs(weights @ load_now) > 50.0
    assert np.abs(weights @ solution.current(t) - expected).max() <= 1e-9 * np.abs(expected).max()


def test_record_begins_in_the_load_flow() -> None:
    network = radial(
        loads=(Load(z_ohm=40.0 + 15.0j), Load(name="house", place="bus", z_ohm=300.0 + 0j, star="grounded"))
    )
    solution = solve(network, Schedule(), duration_s=0.1)
    source = network.source
    assert source is not None
    beyond = network.line.z1_ohm + 40.0 + 15.0j
    bus = emf(network) / (1.0 + source.z1_ohm * (1.0 / beyond + 1.0 / 300.0))
    t = np.linspace(0.0, 0.1, 200)
    turn = np.exp(2j * np.pi * 50.0 * t)
    voltage = np.sqrt(2.0) * (bus[:, None] * turn).real
    current = np.sqrt(2.0) * (bus[:, None] / beyond * turn).real
    assert np.abs(solution.voltage(t) - voltage).max() < 1e-9 * np.abs(voltage).max()
    assert np.abs(solution.current(t) - current).max() < 1e-9 * np.abs(current).max()


def test_sequence_impedances_of_the_source_may_differ() -> None:
    z2 = 0.45 + 5.1j
    network = Network(
        nominal_frequency_hz=60.0,
        line=Line(z1_ohm=1.0 + 4.0j, z0_ohm=3.0 + 11.0j),
        source=Source(voltage_rms_v=8000.0, z1_ohm=0.3 + 4.0j, z2_ohm=z2, z0_ohm=0.5 + 2.0j),
    )
    fault = Fault(type="AG", fraction=1.0, phase_resistance_ohm=1.0)
    solution = solve(network, Schedule(happenings=(FaultStart(time_s=0.01, fault=fault),)), duration_s=3.0)
    t = np.linspace(2.9, 3.0, 100)
    z_sum = (0.3 + 4.0j) + z2 + (0.5 + 2.0j) + (2 * (1.0 + 4.0j) + (3.0 + 11.0j)) + 3.0
    expected = np.sqrt(2.0) * (3 * 8000.0 / z_sum * np.exp(2j * np.pi * 60.0 * t)).real
    assert np.abs(solution.current(t)[0] - expected).max() < 1e-9 * np.abs(expected).max()


@pytest.mark.parametrize("frequency_hz", [48.7, 50.9])
def test_off_nominal_frequency_changes_reactance_not_inductance(frequency_hz: float) -> None:
    network = radial()
    fault = Fault(type="BC", fraction=0.5)
    schedule = Schedule(happenings=(FaultStart(time_s=0.03, fault=fault),), frequency_hz=frequency_hz)
    t = np.linspace(0.03, 0.2, 300)
    current = solve(network, schedule, duration_s=0.2).current(t)
    z1, _ = total(network, fault)
    z_ohm = complex(z1.real, z1.imag * frequency_hz / 50.0)
    drive = emf(network)[1] - emf(network)[2]
    expected = rl_current(t, e_rms=drive, z_ohm=z_ohm, omega=2 * np.pi * frequency_hz, start_s=0.03)
    assert np.abs(current[1] - current[2] - expected).max() < 1e-9 * np.abs(expected).max()


def test_each_pole_opens_at_its_own_zero_of_the_closed_form() -> None:
    network = radial()
    fault = Fault(type="AG", fraction=0.8, ground_resistance_ohm=0.3)
    order_s = 0.1005
    schedule = Schedule(happenings=(FaultStart(time_s=0.021, fault=fault), PolesOpen(time_s=order_s)))
    solution = solve(network, schedule, duration_s=0.2)
    opened = {mark.phase: mark.time_s for mark in solution.marks if mark.what == "opened"}
    assert opened[1] == opened[2] == order_s  # nothing flowed there
    (weights, z_ohm) = fault_loops(fault, *total(network, fault))[0]

    def closed_form(t: np.ndarray) -> np.ndarray:
        return rl_current(t, e_rms=weights @ emf(network), z_ohm=z_ohm, omega=100 * np.pi, start_s=0.021)

    around = opened[0] + np.array([-1e-9, 0.0, 1e-9])
    before, at, after = closed_form(around)
    assert before * after < 0.0
    assert abs(at) < 1e-9 * np.abs(closed_form(np.linspace(0.021, 0.1, 500))).max()
    between = closed_form(np.linspace(order_s, opened[0] - 1e-9, 200))
    assert np.all(between * between[0] > 0.0)
    assert np.abs(solution.current(np.linspace(opened[0], 0.2, 100))).max() < 1e-9
