"""What the forge says is true, against independent reckoning."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq

from analyzer.forge.network import Line, Load, Network, Source
from analyzer.forge.schedule import (
    FAULT_TYPES,
    Fault,
    FaultChange,
    FaultEnd,
    FaultStart,
    FaultType,
    PolesClose,
    PolesOpen,
    Restrike,
    Schedule,
)
from analyzer.forge.solution import Solution, solve
from analyzer.forge.stretches import ModalStretch
from analyzer.forge.truth import EventTruth, FaultTruth, inception_for_angle
from tests.forge.networks import fault_loops, radial, total

REMOTE = Source(voltage_rms_v=11300.0, angle_deg=3.0, z1_ohm=0.9 + 7.0j, z0_ohm=1.5 + 10.0j)
LOAD = Load(z_ohm=45.0 + 20.0j, star="grounded")


def begun(
    network: Network, fault: Fault, *, start_s: float = 0.0413, more: tuple[object, ...] = ()
) -> Solution:
    happenings = (FaultStart(time_s=start_s, fault=fault), *more)
    return solve(network, Schedule(happenings=happenings), duration_s=0.25)  # type: ignore[arg-type]


def only_fault(solution: Solution) -> tuple[EventTruth, FaultTruth]:
    events = solution.truth().events
    assert len(events) == 1
    assert events[0].fault is not None
    return events[0], events[0].fault


def fault_of(fault_type: FaultType, **more: float) -> Fault:
    return Fault(
        type=fault_type,
        fraction=0.6,
        phase_resistance_ohm=0.2,
        ground_resistance_ohm=0.7 if fault_type.endswith("G") else 0.0,
        **more,  # type: ignore[arg-type]
    )


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_loops_of_a_radial_fault_are_those_of_the_design(fault_type: FaultType) -> None:
    network, fault = radial(), fault_of(fault_type)
    event, truth = only_fault(begun(network, fault))
    loops = fault_loops(fault, *total(network, fault))[: 1 if fault_type == "ABC" else None]
    assert len(loops) == len(truth.loops)
    for (_, z_ohm), loop in zip(loops, truth.loops, strict=True):
        assert loop.total_ohm is not None
        assert abs(loop.total_ohm - z_ohm) < 1e-9 * abs(z_ohm)
        assert loop.time_constant_s == pytest.approx(z_ohm.imag / (100 * np.pi * z_ohm.real), rel=1e-9)
        assert loop.exact
    expected_modes = 2 if len(fault.phases) == 2 and fault.grounded else 1
    assert len(truth.modes) == expected_modes
    assert truth.direction == "forward"
    assert event.cleared_s is None
    assert network.source is not None
    assert truth.behind.z1_ohm == pytest.approx(network.source.z1_ohm)
    assert truth.behind.z0_ohm == pytest.approx(network.source.z0_ohm)
    assert truth.faulted_z1_ohm == pytest.approx(0.6 * network.line.z1_ohm)
    codes = {effect.code for effect in event.effects}
    assert codes == ({"two-time-constants"} if expected_modes == 2 else set())


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_offset_is_what_continuity_demands_and_the_modes_sum_to_it(fault_type: FaultType) -> None:
    solution = begun(radial(loads=(LOAD,)), fault_of(fault_type))
    event, truth = only_fault(solution)
    before = solution.current([np.nextafter(event.inception_s, 0.0)])[:, 0]
    demanded = before - np.sqrt(2.0) * truth.symmetrical_current_a.real
    scale = np.abs(truth.symmetrical_current_a).max()
    assert np.abs(truth.offset_a - demanded).max() < 1e-9 * scale
    assert np.abs(sum(mode.amplitude_a.real for mode in truth.modes) - demanded).max() < 1e-9 * scale


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
@pytest.mark.parametrize("angle_deg", [-135.0, 0.0, 33.0, 90.0, 179.0])
def test_inception_angle_is_the_asked_one(fault_type: FaultType, angle_deg: float) -> None:
    network = radial(loads=(LOAD,))
    start_s = inception_for_angle(network, fault_type, angle_deg=angle_deg, not_before_s=0.05)
    assert 0.05 <= start_s < 0.07
    solution = begun(network, fault_of(fault_type), start_s=start_s)
    event, _ = only_fault(solution)
    assert event.inception_angle_deg == pytest.approx(angle_deg, abs=1e-7)
    # Independently, from the voltage itself: sqrt2 V sin(omega (t - t0) + alpha).
    weights = {
        "AG": [1, 0, 0],
        "BG": [0, 1, 0],
        "CG": [0, 0, 1],
        "AB": [1, -1, 0],
        "BC": [0, 1, -1],
        "CA": [-1, 0, 1],
    }
    assert event.reference == (
        "AG" if fault_type == "ABC" else fault_type if len(fault_type) == 2 else fault_type[:2]
    )
    loop = np.array(weights[event.reference], dtype=float)
    t = np.array([start_s - 0.02 + 1e-12, start_s - 0.015])
    wave = loop @ solution.voltage(t)
    assert wave[0] == pytest.approx(
        np.hypot(*wave) * np.sin(np.radians(angle_deg)), abs=1e-5 * np.hypot(*wave)
    )
    assert wave[1] == pytest.approx(
        np.hypot(*wave) * np.cos(np.radians(angle_deg)), abs=1e-5 * np.hypot(*wave)
    )


def test_peak_is_the_root_of_the_published_equation() -> None:
    # cos(u + theta - phi) = -(sin(theta - phi)/(X/R)) exp(-u R/X); at theta 0 and X/R 10 the crest lies at
    # u = 170.048 deg and is 2.45617 times the symmetrical rms (REFERENCES section 2, computed).
    network = Network(
        nominal_frequency_hz=50.0,
        line=Line(z1_ohm=0.3 + 3.0j, z0_ohm=0.9 + 9.0j),
        source=Source(voltage_rms_v=10000.0, z1_ohm=0.4 + 4.0j, z0_ohm=0.6 + 6.0j),
    )
    start_s = inception_for_angle(network, "AG", angle_deg=0.0, not_before_s=0.03)
    event, truth = only_fault(begun(network, Fault(type="AG", fraction=1.0), start_s=start_s))
    symmetrical = abs(truth.symmetrical_current_a[0])
    assert event.peaks[0].value_a / symmetrical == pytest.approx(2.45617, abs=5e-6)
    phi = np.arctan(10.0)
    root = brentq(lambda u: np.cos(u - phi) - np.sin(phi) / 10.0 * np.exp(-u / 10.0), 1.6, 3.3, xtol=1e-14)
    assert np.degrees(root) == pytest.approx(170.048, abs=5e-4)
    assert event.peaks[0].time_s - start_s == pytest.approx(root / (100.0 * np.pi), abs=1e-12)


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_peaks_bound_every_dense_sample(fault_type: FaultType) -> None:
    solution = begun(
        radial(remote=REMOTE, loads=(LOAD,)), fault_of(fault_type), more=(PolesOpen(time_s=0.15),)
    )
    event, _ = only_fault(solution)
    assert event.cleared_s is not None
    t = np.linspace(event.inception_s, event.cleared_s, 100001)
    dense = np.abs(solution.current(t)).max(axis=1)
    for phase, peak in enumerate(event.peaks):
        assert dense[phase] <= peak.value_a * (1 + 1e-12)
        assert dense[phase] == pytest.approx(peak.value_a, rel=1e-6)
        assert abs(solution.current([peak.time_s])[phase, 0]) == pytest.approx(peak.value_a, rel=1e-9)


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
def test_source_impedance_is_minus_the_change_of_voltage_over_that_of_current(fault_type: FaultType) -> None:
    # Superimposed quantities: in front of the recorder, -dV/dI per sequence is what lies behind it.
    behind_load = Load(name="house", place="bus", z_ohm=200.0 + 90.0j, star="grounded")
    network = radial(remote=REMOTE, loads=(LOAD, behind_load))
    solution = begun(network, fault_of(fault_type))
    event, truth = only_fault(solution)
    stretch = solution.stretches[1]
    assert isinstance(stretch, ModalStretch)
    turn = np.exp(2j * np.pi / 3.0)
    to_sequence = np.array([[1, turn, turn**2], [1, turn**2, turn], [1, 1, 1]]) / 3.0
    during = stretch.voltages[:, 0] / np.sqrt(2.0)
    change_v = to_sequence @ (during - event.prefault_voltage_v)
    change_i = to_sequence @ (truth.symmetrical_current_a - event.prefault_current_a)
    for k, z_ohm in enumerate((truth.behind.z1_ohm, truth.behind.z2_ohm, truth.behind.z0_ohm)):
        assert z_ohm is not None
        if abs(change_i[k]) > 1e-6 * np.abs(change_i).max():
            assert abs(-change_v[k] / change_i[k] - z_ohm) < 1e-9 * abs(z_ohm)


def test_superimposed_identity_of_the_reference_network() -> None:
    # CV456 to CV458: Zs 0.4+j5, load 60+j20, fault 0.6+j3: 5.015974482 ohm at 85.42607874 deg, X/R 12.5.
    network = Network(
        nominal_frequency_hz=50.0,
        line=Line(z1_ohm=0.6 + 3.0j, z0_ohm=0.6 + 3.0j),
        source=Source(voltage_rms_v=1000.0, z1_ohm=0.4 + 5.0j, z0_ohm=0.4 + 5.0j),
        loads=(Load(z_ohm=60.0 + 20.0j),),
    )
    solution = begun(network, Fault(type="ABC", fraction=1.0))
    event, truth = only_fault(solution)
    stretch = solution.stretches[1]
    assert isinstance(stretch, ModalStretch)
    z_ohm = -(stretch.voltages[0, 0] / np.sqrt(2.0) - event.prefault_voltage_v[0]) / (
        truth.symmetrical_current_a[0] - event.prefault_current_a[0]
    )
    assert abs(z_ohm) == pytest.approx(5.015974482, rel=1e-9)
    assert np.degrees(np.angle(z_ohm)) == pytest.approx(85.42607874, abs=1e-8)
    assert z_ohm.imag / z_ohm.real == pytest.approx(12.5, rel=1e-9)


def test_the_identity_holds_sample_by_sample_through_the_transient() -> None:
    solution = begun(radial(loads=(LOAD,)), fault_of("AG"))
    stretch, omega = solution.stretches[1], 100.0 * np.pi
    assert isinstance(stretch, ModalStretch)
    t = np.linspace(0.0413, 0.2, 97)
    cycles = np.ceil((t - 0.0413) / 0.02 + 1e-9) * 0.02
    near = solution.circuit.groups["near"]
    d_v = solution.voltage(t) - solution.voltage(t - cycles)
    d_i = solution.current(t) - solution.current(t - cycles)
    before = solution.stretches[0]
    assert isinstance(before, ModalStretch)
    d_slope = np.array([stretch.slope(int(b), t) - before.slope(int(b), t - cycles) for b in near])
    alpha, zero = np.array([2.0, -1.0, -1.0]) / 3.0, np.array([1.0, 1.0, 1.0]) / 3.0
    for weights, z_ohm in ((alpha, 0.3 + 4.0j), (zero, 0.5 + 6.0j)):
        expected = -(z_ohm.real * (weights @ d_i) + z_ohm.imag / omega * (weights @ d_slope))
        assert np.abs(weights @ d_v - expected).max() < 1e-9 * np.abs(d_v).max()


@pytest.mark.parametrize("fraction", [0.0, 0.4])
def test_behind_the_recorder_the_sign_turns(fraction: float) -> None:
    network = radial(remote=REMOTE, adjacent=Line(z1_ohm=1.0 + 4.0j, z0_ohm=3.0 + 12.0j))
    fault = Fault(type="BC", fraction=fraction, side="behind")
    solution = begun(network, fault, more=(PolesOpen(time_s=0.12, breaker="adjacent"),))
    event, truth = only_fault(solution)
    assert truth.direction == "reverse"
    assert event.cleared_s is not None
    stretch = solution.stretches[1]
    assert isinstance(stretch, ModalStretch)
    d_v = stretch.voltages[:, 0] / np.sqrt(2.0) - event.prefault_voltage_v
    d_i = truth.symmetrical_current_a - event.prefault_current_a
    ahead = network.line.z1_ohm + REMOTE.z1_ohm
    assert abs((d_v[1] - d_v[2]) / (d_i[1] - d_i[2]) - ahead) < 1e-9 * abs(ahead)
    assert truth.ahead.z1_ohm == pytest.approx(ahead)


def test_two_time_constants_are_the_eigenvalues_of_the_reference_network() -> None:
    # CV267, CV268: two parallel branches behind one source: 82.24540283 and 9.515654017 ms.
    henry = 100.0 * np.pi
    branch = 0.0025464790894703256 * henry
    network = Network(
        nominal_frequency_hz=50.0,
        line=Line(z1_ohm=complex(0.02, branch), z0_ohm=complex(0.02, branch)),
        source=Source(
            voltage_rms_v=7071.0,
            z1_ohm=complex(0.05, 0.0031830988618379067 * henry),
            z0_ohm=complex(0.05, 0.0031830988618379067 * henry),
        ),
        loads=(Load(z_ohm=complex(0.4, branch), place="bus"),),
    )
    event, truth = only_fault(begun(network, Fault(type="ABC", fraction=1.0)))
    found = sorted((mode.time_constant_s for mode in truth.modes), reverse=True)
    assert found == pytest.approx([82.24540283e-3, 9.515654017e-3], rel=1e-6)
    assert "two-time-constants" in {effect.code for effect in event.effects}


def test_dual_fed_line_keeps_the_source_behind_the_terminal() -> None:
    event, truth = only_fault(
        begun(radial(remote=REMOTE), Fault(type="AG", fraction=0.5, ground_resistance_ohm=3.0))
    )
    assert len(truth.modes) > 1
    assert not truth.loops[0].exact
    assert truth.source_time_constant_s == pytest.approx(4.0 / (100 * np.pi * 0.3))
    assert {effect.code for effect in event.effects} >= {"two-time-constants"}


def test_a_story_of_several_events_is_told_apart() -> None:
    first, second = fault_of("AG"), fault_of("ABG")
    schedule = Schedule(
        happenings=(
            FaultStart(time_s=0.04, fault=first),
            FaultChange(time_s=0.06, fault=second),
            PolesOpen(time_s=0.1),
            Restrike(time_s=0.125, poles="A"),
            PolesClose(time_s=0.2),
            PolesOpen(time_s=0.26),
        )
    )
    events = solve(radial(loads=(LOAD,)), schedule, duration_s=0.35).truth().events
    assert [event.kind for event in events] == ["fault", "fault"]
    assert events[0].fault is not None
    assert events[0].fault.changes == ((0.06, "ABG"),)
    assert {"evolving-fault", "restrike"} <= {effect.code for effect in events[0].effects}
    assert events[0].cleared_s is not None
    assert 0.125 < events[0].cleared_s < 0.145
    assert events[1].inception_s == 0.2
    assert events[1].cleared_s is not None
    assert np.abs(events[1].prefault_current_a).max() < 1e-9


def test_a_fault_that_goes_out_by_itself() -> None:
    solution = begun(radial(), fault_of("BG"), more=(FaultEnd(time_s=0.043),))
    event, _ = only_fault(solution)
    assert event.opened_s[1] == event.cleared_s
    assert {effect.code for effect in event.effects} == {"self-clearing"}
    assert abs(solution.current([event.cleared_s])[1, 0]) < 1e-6  # type: ignore[list-item]


def test_delayed_zeros_are_found() -> None:
    # A leading prefault current, from a higher voltage at the far end, lets the offset exceed the crest.
    network = Network(
        nominal_frequency_hz=50.0,
        line=Line(z1_ohm=0.01 + 3.0j, z0_ohm=0.01 + 3.0j),
        source=Source(voltage_rms_v=10000.0, z1_ohm=0.01 + 4.0j, z0_ohm=0.01 + 4.0j),
        remote=Source(voltage_rms_v=12000.0, z1_ohm=0.01 + 4.0j, z0_ohm=0.01 + 4.0j),
    )
    delayed = []
    for angle_deg in range(-180, 180, 15):
        start_s = inception_for_angle(network, "ABC", angle_deg=float(angle_deg), not_before_s=0.03)
        event, _ = only_fault(begun(network, Fault(type="ABC", fraction=0.9), start_s=start_s))
        delayed += [effect.strength for effect in event.effects if effect.code == "delayed-zeros"]
    assert delayed
    assert 0.04 < max(delayed) < 0.25
