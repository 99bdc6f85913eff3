"""Machine, converter, core, arc and moving frequency, each against something reckoned independently."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import brentq

from analyzer.forge.drives import machine_decrement
from analyzer.forge.network import Converter, Line, Load, Machine, Network, Source, Transformer
from analyzer.forge.nonlinear import OdeStretch, core_flux
from analyzer.forge.schedule import Arc, Connect, Fault, FaultStart, FrequencyRamp, PolesOpen, Schedule
from analyzer.forge.solution import Solution, solve
from tests.forge.networks import emf, radial

OMEGA = 100.0 * np.pi
# P. C. Sen, Principles of Electric Machines and Power Electronics, 3rd ed., p. 458 (CV469 to CV474), on a
# base of 1 ohm: Xd 1, X'd 0.3, X''d 0.2, T'd0 6 s, T''d0 0.06 s.
SALIENT = Machine(
    kind="synchronous",
    emf_rms_v=1.0,
    r_ohm=0.0,
    x_subtransient_ohm=0.2,
    x_transient_ohm=0.3,
    x_synchronous_ohm=1.0,
    subtransient_open_s=0.06,
    transient_open_s=6.0,
)
MACHINE = Machine(
    kind="synchronous",
    emf_rms_v=11547.0,
    r_ohm=0.05,
    x_subtransient_ohm=2.0,
    x_transient_ohm=3.0,
    x_synchronous_ohm=15.0,
    subtransient_open_s=0.06,
    transient_open_s=6.0,
    z0_ohm=0.1 + 1.0j,
)


def started(network: Network, fault: Fault, *more: object, duration_s: float = 0.25) -> Solution:
    happenings = (FaultStart(time_s=0.05, fault=fault), *more)
    return solve(network, Schedule(happenings=happenings), duration_s=duration_s)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("t_s", "envelope"),
    [(0.0, 5.0), (0.02, 4.318435341), (0.05, 3.746918441), (0.1, 3.344047092), (0.25, 3.033975117)],
)
def test_envelope_at_the_terminals_is_the_published_one(t_s: float, envelope: float) -> None:
    # CV475 to CV479: rms alternating current per unit at t after a terminal fault without load.
    parts = machine_decrement(SALIENT, load_current_a=0j, external_x_ohm=0.0)
    emf_now = sum(phasor * np.exp(sigma * t_s) for sigma, phasor in parts)
    assert abs(emf_now) / 0.2 == pytest.approx(envelope, rel=1e-9)


def test_a_fault_near_a_machine_carries_that_envelope_through_the_network() -> None:
    network = Network(
        nominal_frequency_hz=50.0,
        line=Line(z1_ohm=0.01 + 1.0j, z0_ohm=0.03 + 3.0j),
        source=None,
        machine=MACHINE,
    )
    solution = started(network, Fault(type="ABC", fraction=0.8))
    event = solution.truth().events[0]
    assert event.fault is not None
    xe = 0.8
    tpp, tp = 0.06 * (2 + xe) / (3 + xe), 6.0 * (3 + xe) / (15 + xe)
    t = np.linspace(0.0, 0.2, 50)
    envelope = 11547.0 * (
        (1 / (2 + xe) - 1 / (3 + xe)) * np.exp(-t / tpp)
        + (1 / (3 + xe) - 1 / (15 + xe)) * np.exp(-t / tp)
        + 1 / (15 + xe)
    )
    # The mean of the three phases' squares is the envelope squared once the offset is taken out; here the
    # offset is removed with the network's own mode.
    (mode,) = event.fault.modes
    current = solution.current(0.05 + t)
    offset = mode.amplitude_a.real[:, None] * np.exp(-t / mode.time_constant_s)
    size = np.sqrt(((current - offset) ** 2).sum(axis=0) / 3.0)
    # The decaying voltage meets R + jX + L d/dt; the published envelope neglects R and the decay's own rate.
    assert np.abs(size / envelope - 1.0).max() < 0.002
    effect = next(effect for effect in event.effects if effect.code == "ac-decrement")
    assert effect.strength == pytest.approx(1 - (1 / (15 + xe)) / (1 / (2 + xe)), rel=1e-3)


def test_loaded_machine_begins_without_a_step_of_its_voltage() -> None:
    network = radial(
        machine=replace(MACHINE, emf_angle_deg=25.0, place="end"), loads=(Load(z_ohm=30.0 + 10.0j),)
    )
    solution = started(network, Fault(type="BC", fraction=0.4, phase_resistance_ohm=0.2))
    parts = machine_decrement(MACHINE, load_current_a=300.0 - 100.0j, external_x_ohm=1.7)
    assert sum(phasor for _, phasor in parts) == pytest.approx(11547.0 + 0j, rel=1e-12)
    around = solution.current([0.05 - 1e-9, 0.05])
    assert np.abs(around[:, 1] - around[:, 0]).max() < 1e-2


def test_induction_machine_feeds_the_fault_and_dies_away() -> None:
    motor = Machine(
        kind="induction",
        emf_rms_v=11000.0,
        r_ohm=0.5,
        x_subtransient_ohm=20.0,
        x_rotor_open_ohm=300.0,
        subtransient_open_s=0.6,
        place="end",
    )
    solution = started(radial(machine=motor), Fault(type="ABC", fraction=0.5), duration_s=0.6)
    t = np.linspace(0.5, 0.6, 300)
    # Between the bolted fault and the machine only the machine drives: T'' = T0 (X''+Xe)/(X0+Xe).
    xe = 1.5
    tau = 0.6 * (20 + xe) / (300 + xe)
    machine = np.abs(solution.branch_current("machine", t)).max()
    begun = np.abs(solution.branch_current("machine", np.linspace(0.05, 0.07, 300))).max()
    assert begun > 400.0
    slow = 21.5 / (OMEGA * (0.5 + 0.25))
    assert machine < 1.2 * begun * (np.exp(-0.45 / tau) + np.exp(-0.45 / slow))


CONVERTER = Converter(
    current_rms_a=300.0,
    angle_deg=5.0,
    limit_rms_a=400.0,
    limit_angle_deg=-80.0,
    response_s=0.005,
    delay_s=0.003,
)


def test_converter_alone_holds_its_current_into_the_fault() -> None:
    network = Network(
        nominal_frequency_hz=50.0,
        line=Line(z1_ohm=0.5 + 3.0j, z0_ohm=1.2 + 9.0j),
        source=None,
        converter=CONVERTER,
        loads=(Load(z_ohm=40.0 + 5.0j, place="bus", star="grounded"),),
    )
    solution = started(network, Fault(type="ABC", fraction=0.3), PolesOpen(time_s=0.2), duration_s=0.4)
    t = np.linspace(0.053, 0.2, 500)
    shift = np.exp(-2j * np.pi / 3 * np.arange(3))[:, None]
    before, limit = 300.0 * np.exp(1j * np.radians(5.0)), 400.0 * np.exp(-1j * np.radians(80.0))
    phasor = limit + (before - limit) * np.exp(-(t - 0.053) / 0.005)
    law = np.sqrt(2.0) * (phasor * shift * np.exp(1j * OMEGA * t)).real
    found = solution.branch_current("converter", t)
    assert np.abs(found - law).max() < 1e-9 * np.abs(law).max()
    # Kirchhoff at the bus: what the converter gives goes into load and line.
    parts = solution.current(t) + solution.branch_current("load", t)
    assert np.abs(found - parts).max() < 1e-9 * np.abs(law).max()
    event = solution.truth().events[0]
    assert event.fault is not None
    assert {"limited-source"} <= {effect.code for effect in event.effects}
    assert event.cleared_s is not None
    later = np.linspace(event.cleared_s + 0.1, 0.4, 200)
    assert np.abs(solution.branch_current("converter", later)).max() == pytest.approx(
        np.sqrt(2) * 300.0, rel=1e-3
    )


def test_converter_spoils_the_superimposed_identity() -> None:
    # Known limit of -dV/dI: it holds only while the current of a converter behind the terminal stays.
    solution = started(radial(converter=CONVERTER), Fault(type="ABC", fraction=0.5))
    event = solution.truth().events[0]
    assert event.fault is not None
    settled = event.fault.steady_current_a - event.prefault_current_a
    v_settled = 0.5 * (0.5 + 3.0j) * event.fault.steady_current_a
    apparent = -(v_settled - event.prefault_voltage_v)[0] / settled[0]
    assert abs(apparent / (0.3 + 4.0j) - 1.0) > 0.05


CORE = Transformer(
    r_ohm=1.0,
    air_core_h=0.05,
    knee_flux_vs=50.0,
    knee_current_a=2.0,
    remanence_vs=(30.0, -20.0, -10.0),
    place="bus",
)


def test_inrush_follows_a_single_phase_integration_of_the_flux() -> None:
    # Equal sequence impedances and a grounded star decouple the phases: d(flux)/dt = e - R i(flux), stepped
    # here with a plain fourth-order Runge-Kutta method of 10 us, the current bracketed from the flux.
    source = Source(voltage_rms_v=11547.0, angle_deg=17.0, z1_ohm=0.3 + 4.0j, z0_ohm=0.3 + 4.0j)
    network = Network(
        nominal_frequency_hz=50.0, line=Line(z1_ohm=1j, z0_ohm=1j), source=source, transformer=CORE
    )
    schedule = Schedule(happenings=(Connect(time_s=0.01, element="transformer"),))
    solution = solve(network, schedule, duration_s=0.06)
    resistance, inductance = 1.3, 0.05 + 4.0 / OMEGA

    def current_of(flux: float) -> float:
        return float(
            brentq(
                lambda i: inductance * i + 50.0 * np.tanh(i / 2.0) - flux, -5e4, 5e4, xtol=1e-12, rtol=1e-14
            )
        )

    step, count = 1e-5, 5000
    phase = 1
    flux = CORE.remanence_vs[phase]
    angle = np.radians(17.0) - 2 * np.pi / 3 * phase
    found = [current_of(flux)]

    def rise(t: float, value: float) -> float:
        return float(np.sqrt(2.0) * 11547.0 * np.cos(OMEGA * t + angle) - resistance * current_of(value))

    for k in range(count - 1):
        t = 0.01 + k * step
        k1 = rise(t, flux)
        k2 = rise(t + step / 2, flux + step / 2 * k1)
        k3 = rise(t + step / 2, flux + step / 2 * k2)
        k4 = rise(t + step, flux + step * k3)
        flux += step / 6 * (k1 + 2 * k2 + 2 * k3 + k4)
        found.append(current_of(flux))
    t = 0.01 + step * np.arange(count)
    current = solution.branch_current("transformer", t)[phase]
    assert np.abs(current).max() > 200.0
    assert np.abs(current - np.array(found)).max() < 1e-7 * np.abs(current).max()
    event = solution.truth().events[0]
    assert event.kind == "energisation"
    # The transformer hangs on the bus, so none of its inrush is in the protected line.
    assert [effect.code for effect in event.effects] == ["inrush"]
    assert event.peaks[1].value_a < 1e-6


def test_core_flux_is_conserved_when_the_poles_close() -> None:
    solution = solve(
        radial(transformer=replace(CORE, place="end")),
        Schedule(happenings=(Connect(time_s=0.013, element="transformer"),)),
        duration_s=0.05,
    )
    start = solution.branch_current("transformer", [0.013])[:, 0]
    total = radial()
    assert total.source is not None
    z0 = total.source.z0_ohm + total.line.z0_ohm
    z1 = total.source.z1_ohm + total.line.z1_ohm
    l_h = np.eye(3) * z1.imag / OMEGA + (z0 - z1).imag / 3 / OMEGA + np.eye(3) * CORE.air_core_h
    assert l_h @ start + core_flux(CORE, start) == pytest.approx(np.array(CORE.remanence_vs), rel=1e-9)
    events = solution.truth().events
    assert events[0].effects[0].strength == pytest.approx(
        np.abs(solution.current(np.linspace(0.013, 0.05, 8001))).max(), rel=1e-5
    )


def test_arc_voltage_stands_against_the_current_and_has_odd_harmonics() -> None:
    arc = Arc(voltage_v=1500.0, ignition_a=20.0)
    fault = Fault(type="AG", fraction=0.6, arc=arc)
    solution = started(radial(), fault, PolesOpen(time_s=0.4), duration_s=0.5)
    assert isinstance(solution.stretches[1], OdeStretch)
    t = 0.36 + 0.02 * np.arange(4096) / 4096
    current = solution.current(t)[0]
    # At the fault: v - (R i + L di/dt of the line's part) = arc voltage. Over a cycle in the steady state the
    # inductances do no work, so power from the bus less the line's losses is the arc's.
    volts = solution.voltage(t)[0]
    line_r = 0.6 * (2 * 0.5 + 1.2) / 3
    power = np.mean(volts * current) - line_r * np.mean(current**2)
    expected = np.mean(1500.0 * np.tanh(current / 20.0) * current)
    assert power == pytest.approx(expected, rel=1e-5)
    spectrum = np.abs(np.fft.rfft(current)) / 2048
    assert spectrum[3] > 0.005 * spectrum[1]
    assert spectrum[2] < 1e-3 * spectrum[3]
    event = solution.truth().events[0]
    assert event.fault is not None
    assert abs(event.fault.symmetrical_current_a[0]) * np.sqrt(2.0) == pytest.approx(spectrum[1], rel=1e-4)
    assert {effect.code for effect in event.effects} == {"arcing"}


def test_a_vanishing_arc_is_the_linear_network() -> None:
    plain = Fault(type="ABG", fraction=0.6, phase_resistance_ohm=0.1)
    thin = replace(plain, arc=Arc(voltage_v=1e-6, ignition_a=10.0))
    network = radial(loads=(Load(z_ohm=45.0 + 20.0j),))
    t = np.linspace(0.05, 0.2, 500)
    exact = started(network, plain).current(t)
    assert np.abs(started(network, thin).current(t) - exact).max() < 1e-6 * np.abs(exact).max()


def test_moving_frequency_is_quasi_stationary_at_a_slow_rate_and_exact_after_it() -> None:
    schedule = Schedule(
        happenings=(
            FrequencyRamp(time_s=0.02, end_s=0.12, rate_hz_per_s=-8.0),
            FaultStart(time_s=0.05, fault=Fault(type="ABC", fraction=0.5)),
        ),
        frequency_hz=50.4,
    )
    solution = solve(radial(), schedule, duration_s=1.2)
    kinds = [type(stretch).__name__ for stretch in solution.stretches]
    assert kinds == ["ModalStretch", "OdeStretch", "OdeStretch", "ModalStretch"]
    # Long after, the frequency is 49.6 Hz and the angle is the integral of its course.
    t = np.linspace(1.0, 1.2, 400)
    turns = 50.4 * 0.02 + 0.5 * (50.4 + 49.6) * 0.1 + 49.6 * (t - 0.12)
    z_ohm = complex(0.3 + 0.25, (4.0 + 1.5) * 49.6 / 50.0)
    expected = np.sqrt(2.0) * ((emf(radial()) / z_ohm)[:, None] * np.exp(2j * np.pi * turns)).real
    assert np.abs(solution.current(t) - expected).max() < 1e-7 * np.abs(expected).max()
    # During the ramp, without fault and load, the bus shows the source's voltage itself.
    early = np.linspace(0.02, 0.0499, 100)
    travelled = 50.4 * early - 4.0 * (early - 0.02) ** 2
    bus = np.sqrt(2.0) * (emf(radial())[:, None] * np.exp(2j * np.pi * travelled)).real
    assert np.abs(solution.voltage(early) - bus).max() < 1e-9 * np.abs(bus).max()
    event = solution.truth().events[0]
    assert event.frequency_hz == pytest.approx(50.4 - 8.0 * 0.03)
    excursion = next(effect for effect in event.effects if effect.code == "frequency-excursion")
    assert excursion.strength == pytest.approx(-0.56)


def test_phasors_beside_a_core_are_those_of_its_unsaturated_inductance() -> None:
    solution = solve(
        radial(transformer=CORE),
        Schedule(
            happenings=(
                Connect(time_s=0.01, element="transformer"),
                FaultStart(time_s=0.06, fault=Fault(type="ABC", fraction=0.5)),
            )
        ),
        duration_s=0.1,
    )
    event = solution.truth().events[-1]
    assert event.fault is not None
    core_z = 1.0 + 1j * OMEGA * (CORE.air_core_h + CORE.knee_flux_vs / CORE.knee_current_a)
    bus = emf(radial()) * np.exp(1j * OMEGA * 0.06) * core_z / (core_z + 0.3 + 4.0j)
    assert event.prefault_voltage_v == pytest.approx(bus, rel=1e-9)
    fault_z = 0.5 * (0.5 + 3.0j)
    behind = 1.0 / (1.0 / core_z + 1.0 / fault_z)
    shared = emf(radial()) * np.exp(1j * OMEGA * 0.06) / (behind + 0.3 + 4.0j) * behind / fault_z
    assert event.fault.symmetrical_current_a == pytest.approx(shared, rel=1e-9)
