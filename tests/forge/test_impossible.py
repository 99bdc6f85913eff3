"""Networks and schedules that cannot exist are refused, by the parameter's name."""

from __future__ import annotations

import pickle
from collections.abc import Callable
from dataclasses import replace

import pytest

from analyzer.errors import FaultassayError
from analyzer.forge.circuit import build_circuit
from analyzer.forge.errors import ForgeError
from analyzer.forge.network import Capacitor, Converter, Line, Load, Machine, Network, Source, Transformer
from analyzer.forge.reduction import SwitchState, reduce_circuit
from analyzer.forge.schedule import (
    Arc,
    Fault,
    FaultChange,
    FaultEnd,
    FaultStart,
    FrequencyRamp,
    PolesOpen,
    Schedule,
)
from analyzer.forge.solution import solve
from tests.forge.networks import radial

AG = Fault(type="AG", fraction=0.5)
CASES: list[tuple[str, Callable[[], object]]] = [
    ("source.z1_ohm", lambda: Source(voltage_rms_v=1.0, z1_ohm=0j, z0_ohm=1j)),
    ("source.z0_ohm", lambda: Source(voltage_rms_v=1.0, z1_ohm=1j, z0_ohm=-1 + 1j)),
    ("source.z2_ohm", lambda: Source(voltage_rms_v=1.0, z1_ohm=1j, z2_ohm=1 + 0j, z0_ohm=1j)),
    ("source.voltage_rms_v", lambda: Source(voltage_rms_v=float("nan"), z1_ohm=1j, z0_ohm=1j)),
    ("line.z1_ohm", lambda: Line(z1_ohm=0j, z0_ohm=1j)),
    ("line.length_km", lambda: Line(z1_ohm=1j, z0_ohm=1j, length_km=0.0)),
    ("feeder.z_ohm", lambda: Load(z_ohm=-5 + 1j, name="feeder")),
    ("load.name", lambda: Load(z_ohm=1j, name="capacitor")),
    ("capacitor.l_h", lambda: Capacitor(capacitance_f=1e-5, r_ohm=0.0, l_h=0.0)),
    (
        "machine.x_transient_ohm",
        lambda: Machine(
            kind="synchronous", emf_rms_v=1.0, r_ohm=0.0, x_subtransient_ohm=1.0, subtransient_open_s=0.1
        ),
    ),
    (
        "machine.x_subtransient_ohm",
        lambda: Machine(
            kind="induction",
            emf_rms_v=1.0,
            r_ohm=0.0,
            x_subtransient_ohm=2.0,
            subtransient_open_s=0.1,
            x_rotor_open_ohm=1.0,
        ),
    ),
    (
        "converter.response_s",
        lambda: Converter(current_rms_a=1.0, limit_rms_a=1.2, limit_angle_deg=0.0, response_s=0.0),
    ),
    (
        "transformer.remanence_vs",
        lambda: Transformer(
            r_ohm=1.0, air_core_h=0.1, knee_flux_vs=30.0, knee_current_a=1.0, remanence_vs=(40.0, 0.0, 0.0)
        ),
    ),
    (
        "network.source",
        lambda: Network(nominal_frequency_hz=50.0, line=Line(z1_ohm=1j, z0_ohm=1j), source=None),
    ),
    ("network.nominal_frequency_hz", lambda: radial(frequency_hz=0.0)),
    ("network.loads", lambda: radial(loads=(Load(z_ohm=1j), Load(z_ohm=2j)))),
    ("fault.fraction", lambda: Fault(type="AG", fraction=1.2)),
    ("fault.type", lambda: Fault(type="AC", fraction=0.2)),  # type: ignore[arg-type]
    ("fault.phase_resistance_ohm", lambda: Fault(type="AB", fraction=0.2, phase_resistance_ohm=-1.0)),
    ("fault.ground_resistance_ohm", lambda: Fault(type="AB", fraction=0.2, ground_resistance_ohm=1.0)),
    ("schedule.time_s", lambda: Schedule(happenings=(FaultStart(time_s=-1.0, fault=AG),))),
    ("schedule.fault", lambda: Schedule(happenings=(FaultChange(time_s=1.0, fault=AG),))),
    ("schedule.fault", lambda: Schedule(happenings=(FaultEnd(time_s=1.0),))),
    ("schedule.poles", lambda: Schedule(happenings=(PolesOpen(time_s=1.0, poles="X"),))),
    (
        "schedule.end_s",
        lambda: Schedule(happenings=(FrequencyRamp(time_s=1.0, end_s=0.5, rate_hz_per_s=1.0),)),
    ),
    (
        "fault.fraction",
        lambda: Schedule(
            happenings=(
                FaultStart(time_s=0.1, fault=AG),
                FaultChange(time_s=0.2, fault=Fault(type="AG", fraction=0.1)),
            )
        ),
    ),
    ("duration_s", lambda: solve(radial(), Schedule(), duration_s=0.0)),
    (
        "schedule.breaker",
        lambda: solve(
            radial(), Schedule(happenings=(PolesOpen(time_s=0.05, breaker="adjacent"),)), duration_s=0.1
        ),
    ),
    (
        "fault.fraction",
        lambda: solve(
            radial(),
            Schedule(
                happenings=(FaultStart(time_s=0.05, fault=Fault(type="AG", fraction=0.5, side="behind")),)
            ),
            duration_s=0.1,
        ),
    ),
    ("sample_rate_hz", lambda: solve(radial(), Schedule(), duration_s=0.1).sample(-1.0)),
    ("time_s", lambda: solve(radial(), Schedule(), duration_s=0.1).current([0.2])),
    ("element", lambda: solve(radial(), Schedule(), duration_s=0.1).branch_current("attic", [0.0])),
    (
        "network.converter",
        lambda: solve(
            Network(
                nominal_frequency_hz=50.0,
                line=Line(z1_ohm=1j, z0_ohm=1j),
                source=None,
                converter=Converter(current_rms_a=1.0, limit_rms_a=1.2, limit_angle_deg=0.0, response_s=0.01),
            ),
            Schedule(),
            duration_s=0.1,
        ),
    ),
]


CASES.append(
    (
        "network",  # an ungrounded machine alone leaves the bus floating
        lambda: solve(
            Network(
                nominal_frequency_hz=50.0,
                line=Line(z1_ohm=1j, z0_ohm=1j),
                source=None,
                machine=Machine(
                    kind="induction",
                    emf_rms_v=1.0,
                    r_ohm=0.0,
                    x_subtransient_ohm=1.0,
                    subtransient_open_s=0.1,
                    x_rotor_open_ohm=5.0,
                ),
            ),
            Schedule(),
            duration_s=0.1,
        ),
    )
)


@pytest.mark.parametrize(("where", "build"), CASES, ids=[f"{k}-{case[0]}" for k, case in enumerate(CASES)])
def test_impossible_is_refused_by_name(where: str, build: Callable[[], object]) -> None:
    with pytest.raises(ForgeError) as caught:
        build()
    assert caught.value.where == where
    assert isinstance(caught.value, FaultassayError)
    assert str(pickle.loads(pickle.dumps(caught.value))) == str(caught.value)


def test_a_loop_without_any_impedance_is_refused() -> None:
    network = radial(loads=(Load(z_ohm=5.0 + 1.0j, star="grounded"),))
    circuit = build_circuit(network, Fault(type="ABG", fraction=1.0))
    shorted = circuit.groups["load"]
    r_ohm, l_h = circuit.r_ohm.copy(), circuit.l_h.copy()
    r_ohm[shorted, shorted] = l_h[shorted, shorted] = 0.0
    with pytest.raises(ForgeError) as caught:
        reduce_circuit(replace(circuit, r_ohm=r_ohm, l_h=l_h), SwitchState(open_branches=frozenset()))
    assert caught.value.code == "forge-unlimited-current"


def test_an_arc_needs_an_inductance_in_its_loop() -> None:
    network = radial(loads=(Load(z_ohm=50.0 + 0j, star="grounded"),))
    fault = Fault(type="AG", fraction=1.0, arc=Arc(voltage_v=500.0, ignition_a=10.0))
    with pytest.raises(ForgeError) as caught:
        solve(network, Schedule(happenings=(FaultStart(time_s=0.03, fault=fault),)), duration_s=0.1)
    assert caught.value.where == "fault.arc"
