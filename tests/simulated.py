"""Records of invented networks with their truth, for tests of what is found and estimated."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from analyzer.forge.network import Line, Load, Network, Source
from analyzer.forge.schedule import Fault, FaultStart, Happening, PolesOpen, Schedule
from analyzer.forge.solution import solve
from analyzer.forge.truth import EventTruth
from analyzer.records import Record

PHASE_VOLTAGE_V = 20_000.0 / np.sqrt(3.0)


@dataclass(frozen=True, kw_only=True)
class Case:
    """A fault on a feeder behind one source; the defaults make a plain one."""

    fault_type: str = "AG"
    frequency_hz: float = 50.0
    samples_per_cycle: int = 64
    snr_db: float = 60.0
    z1_ohm: complex = 0.4 + 4.0j
    z0_ohm: complex = 0.6 + 5.0j
    line_z1_ohm: complex = 0.3 + 2.0j
    line_z0_ohm: complex = 0.9 + 6.0j
    fraction: float = 0.4
    resistance_ohm: float = 0.0
    load_ohm: complex | None = None
    load_place: str = "bus"
    source_angle_deg: float = 20.0
    inception_s: float = 0.12345
    open_s: float | None = 0.215
    duration_s: float = 0.3
    actual_frequency_hz: float | None = None
    seed: int = 7

    @property
    def network(self) -> Network:
        loads = ()
        if self.load_ohm is not None:
            loads = (Load(z_ohm=self.load_ohm, place=self.load_place),)  # type: ignore[arg-type]
        return Network(
            nominal_frequency_hz=self.frequency_hz,
            source=Source(
                voltage_rms_v=PHASE_VOLTAGE_V,
                angle_deg=self.source_angle_deg,
                z1_ohm=self.z1_ohm,
                z0_ohm=self.z0_ohm,
            ),
            line=Line(z1_ohm=self.line_z1_ohm, z0_ohm=self.line_z0_ohm),
            loads=loads,
        )


def simulate(case: Case, *happenings: Happening) -> tuple[Record, EventTruth]:
    """Return the record of a case, or of other happenings on its network, and the first event's truth."""
    if not happenings:
        fault = Fault(
            type=case.fault_type,  # type: ignore[arg-type]
            fraction=case.fraction,
            phase_resistance_ohm=case.resistance_ohm,
        )
        happenings = (FaultStart(time_s=case.inception_s, fault=fault),)
        if case.open_s is not None:
            happenings += (PolesOpen(time_s=case.open_s),)
    schedule = Schedule(happenings=happenings, frequency_hz=case.actual_frequency_hz)
    solution = solve(case.network, schedule, duration_s=case.duration_s)
    rate_hz = case.frequency_hz * case.samples_per_cycle
    waves = solution.sample(rate_hz)
    truth = solution.truth().events[0]
    rng = np.random.default_rng(case.seed)
    share = 10 ** (-case.snr_db / 20)
    reference_a = np.abs(waves.current_a).max() / np.sqrt(2.0)
    currents = waves.current_a + rng.normal(scale=share * reference_a, size=waves.current_a.shape)
    voltages = waves.voltage_v + rng.normal(scale=share * PHASE_VOLTAGE_V, size=waves.voltage_v.shape)
    signals = {f"I{p}": (currents[k], "A") for k, p in enumerate("ABC")}
    signals |= {f"V{p}": (voltages[k], "V") for k, p in enumerate("ABC")}
    record = Record.from_arrays(signals, sample_rate_hz=rate_hz, nominal_frequency_hz=case.frequency_hz)
    return record, truth
