"""Campaign of simulated faults and quiet records: what is found, when, and how often it is wrong.

``python -m tests.campaigns.events [--faults N] [--quiet N] [--seed S] [--workers N]`` prints the table that
stands in the README.
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Iterator
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass, field
from multiprocessing import get_context

import numpy as np

from analyzer.examine import examine
from analyzer.forge.network import Capacitor, Line, Load, Network, Source
from analyzer.forge.schedule import (
    Connect,
    Disconnect,
    Fault,
    FaultStart,
    FrequencyRamp,
    Happening,
    PolesOpen,
    Schedule,
)
from analyzer.forge.solution import Solution, solve
from analyzer.forge.truth import EventTruth
from analyzer.records import Record
from analyzer.theory.modes import FAULT_TYPES

PHASES = "ABC"
SAMPLES_PER_CYCLE = (16, 20, 32, 64, 96, 128, 256)


@dataclass(frozen=True, kw_only=True)
class FaultOutcome:
    """What became of one fault; numbers are None where nothing was found to compare."""

    found: bool
    type_right: bool = False
    direction_right: bool = False
    one_event: bool = False
    snr_db: float = 0.0
    inception_samples: float | None = None
    clearing_samples: tuple[float, ...] = ()
    held: dict[str, tuple[bool, ...]] = field(default_factory=dict)


def fault_case(seed: int, *, snr_db: float | None = None) -> FaultOutcome:
    """Draw a network and a fault by a seed, examine the record, hold it against the truth."""
    rng = np.random.default_rng([2026, seed])
    frequency_hz = float(rng.choice([50.0, 60.0]))
    spc = int(rng.choice(SAMPLES_PER_CYCLE))
    snr_db = float(rng.uniform(40.0, 80.0)) if snr_db is None else snr_db
    voltage_v = float(rng.choice([6350.0, 11547.0, 38105.0, 63509.0]))
    x_over_r = float(np.exp(rng.uniform(np.log(2.0), np.log(60.0))))
    x_ohm = voltage_v / float(np.exp(rng.uniform(np.log(1500.0), np.log(15000.0))))
    z1 = complex(x_ohm / x_over_r, x_ohm)
    line_x = x_ohm * rng.uniform(0.2, 2.0)
    line_z1 = complex(line_x / (x_over_r * rng.uniform(0.5, 1.3)), line_x)
    behind = bool(rng.random() < 0.15)
    load_ohm = abs(z1) * rng.uniform(15.0, 60.0)
    loads = (Load(z_ohm=complex(load_ohm, load_ohm * rng.uniform(0.1, 0.5)), place="end"),)
    remote = None
    if behind:  # a fault behind the terminal is fed through it from the far end
        remote = Source(
            voltage_rms_v=voltage_v,
            angle_deg=float(rng.uniform(-180, 180)),
            z1_ohm=z1 * rng.uniform(0.8, 2.0),
            z0_ohm=z1 * rng.uniform(0.8, 2.0),
        )
    angle_deg = remote.angle_deg + rng.uniform(-10, 10) if remote else float(rng.uniform(-180, 180))
    network = Network(
        nominal_frequency_hz=frequency_hz,
        source=Source(
            voltage_rms_v=voltage_v, angle_deg=angle_deg, z1_ohm=z1, z0_ohm=z1 * rng.uniform(0.7, 1.5)
        ),
        line=Line(z1_ohm=line_z1, z0_ohm=line_z1 * rng.uniform(2.0, 3.5)),
        adjacent=Line(z1_ohm=line_z1, z0_ohm=line_z1 * 3.0) if behind else None,
        remote=remote,
        loads=() if behind else loads,
    )
    fault_type = FAULT_TYPES[int(rng.integers(10))]
    grounded = fault_type.endswith("G")
    start_s = 0.1 + rng.uniform(0.0, 1.0) / frequency_hz
    open_s = start_s + rng.uniform(2.5, 7.0) / frequency_hz
    fault = Fault(
        type=fault_type,
        fraction=float(rng.uniform(0.05, 0.95)),
        phase_resistance_ohm=float(x_ohm * rng.uniform(0.0, 0.1)),
        ground_resistance_ohm=float(x_ohm * rng.uniform(0.0, 0.3)) if grounded else 0.0,
        side="behind" if behind else "ahead",
    )
    schedule = Schedule(
        happenings=(FaultStart(time_s=start_s, fault=fault), PolesOpen(time_s=open_s)),
        frequency_hz=frequency_hz + float(rng.uniform(-0.5, 0.5)),
    )
    solution = solve(network, schedule, duration_s=open_s + 4.0 / frequency_hz)
    record = _noisy(solution, frequency_hz * spc, frequency_hz, snr_db, voltage_v, rng)
    return _against(record, solution.truth().events[0], spc * frequency_hz, fault_type, behind, snr_db)


def _noisy(
    solution: Solution,
    rate_hz: float,
    nominal_hz: float,
    snr_db: float,
    voltage_v: float,
    rng: np.random.Generator,
    harmonics: float = 0.0,
) -> Record:
    waves = solution.sample(rate_hz)
    share = 10 ** (-snr_db / 20)
    reference_a = max(float(np.abs(waves.current_a).max()) / np.sqrt(2.0), 1.0)
    currents = waves.current_a + rng.normal(scale=share * reference_a, size=waves.current_a.shape)
    voltages = waves.voltage_v + rng.normal(scale=share * voltage_v, size=waves.voltage_v.shape)
    if harmonics:
        turn = 2 * np.pi * nominal_hz * waves.time_s
        for order in (5, 7):
            shifts = rng.uniform(0, 2 * np.pi, size=(3, 1))
            wave = np.cos(order * turn + shifts) * harmonics / order
            currents, voltages = currents + reference_a * wave, voltages + voltage_v * wave
    signals = {f"I{p}": (currents[k], "A") for k, p in enumerate(PHASES)}
    signals |= {f"V{p}": (voltages[k], "V") for k, p in enumerate(PHASES)}
    return Record.from_arrays(signals, sample_rate_hz=rate_hz, nominal_frequency_hz=nominal_hz)


def _against(
    record: Record, truth: EventTruth, rate_hz: float, fault_type: str, behind: bool, snr_db: float
) -> FaultOutcome:
    findings = examine(record)
    faults = [event for event in findings.events if event.kind == "fault"]
    if not faults:
        return FaultOutcome(found=False, snr_db=snr_db)
    event = faults[0]
    inception = event.inception.time_s
    assert inception.value is not None
    held: dict[str, tuple[bool, ...]] = {
        "inception": (inception.low <= truth.inception_s <= inception.high,)  # type: ignore[operator]
    }
    clearing = []
    type_right = event.fault_type == fault_type
    if type_right and truth.fault is not None:
        inside = []
        for phase, found in event.phases.items():
            true = abs(truth.fault.symmetrical_current_a[PHASES.index(phase)])
            inside.append(found.symmetrical_rms_a.low <= true <= found.symmetrical_rms_a.high)  # type: ignore[operator]
        held["symmetrical current"] = tuple(bool(x) for x in inside)
        if event.clearing is not None:
            for phase, quantity in event.clearing.by_phase_s.items():
                opened = truth.opened_s[PHASES.index(phase)]
                if opened is not None and quantity.value is not None:
                    clearing.append((quantity.value - opened) * rate_hz)
    return FaultOutcome(
        found=True,
        type_right=type_right,
        direction_right=event.direction == ("reverse" if behind else "forward"),
        one_event=len(faults) == 1,
        snr_db=snr_db,
        inception_samples=(inception.value - truth.inception_s) * rate_hz,
        clearing_samples=tuple(clearing),
        held=held,
    )


def quiet_case(seed: int) -> bool:
    """Draw a record in which there is no fault; return whether one is reported."""
    rng = np.random.default_rng([1999, seed])
    frequency_hz = float(rng.choice([50.0, 60.0]))
    spc = int(rng.choice(SAMPLES_PER_CYCLE))
    voltage_v = 11547.0
    x_ohm = float(rng.uniform(0.8, 4.0))
    load_ohm = x_ohm * rng.uniform(12.0, 60.0)
    loads = tuple(
        Load(z_ohm=complex(load_ohm, load_ohm * rng.uniform(0.05, 0.6)), place="end", name=name)
        for name in ("first", "second")
    )
    kind = ("load on", "load off", "frequency ramp", "capacitor", "nothing")[seed % 5]
    at_s = 0.12 + rng.uniform(0.0, 1.0) / frequency_hz
    happenings: tuple[Happening, ...] = {
        "load on": (Connect(time_s=at_s, element="second"),),
        "load off": (Disconnect(time_s=at_s, element="second"),),
        "frequency ramp": (
            FrequencyRamp(time_s=0.05, end_s=0.25, rate_hz_per_s=float(rng.uniform(-2.0, 2.0))),
        ),
        "capacitor": (Connect(time_s=at_s, element="capacitor"),),
        "nothing": (),
    }[kind]
    capacitor = None
    if kind == "capacitor":
        share = rng.uniform(0.02, 0.1)  # of the short-circuit level
        capacitor = Capacitor(
            capacitance_f=share / (2 * np.pi * frequency_hz * x_ohm),
            r_ohm=0.05 * x_ohm,
            l_h=x_ohm * 0.05 / 314.0,
        )
    network = Network(
        nominal_frequency_hz=frequency_hz,
        source=Source(
            voltage_rms_v=voltage_v,
            angle_deg=float(rng.uniform(-180, 180)),
            z1_ohm=complex(x_ohm / rng.uniform(3, 20), x_ohm),
            z0_ohm=complex(x_ohm / rng.uniform(3, 20), x_ohm),
        ),
        line=Line(z1_ohm=complex(x_ohm * 0.05, x_ohm * 0.3), z0_ohm=complex(x_ohm * 0.15, x_ohm)),
        loads=loads,
        capacitor=capacitor,
    )
    schedule = Schedule(happenings=happenings, frequency_hz=frequency_hz + float(rng.uniform(-1.0, 1.0)))
    solution = solve(network, schedule, duration_s=0.3)
    snr_db = float(rng.uniform(40.0, 80.0))
    harmonics = float(rng.choice([0.0, 0.05, 0.15]))
    record = _noisy(solution, frequency_hz * spc, frequency_hz, snr_db, voltage_v, rng, harmonics)
    return any(event.kind == "fault" for event in examine(record).events)


def run(n_faults: int, n_quiet: int, *, seed: int, workers: int) -> dict[str, float | int]:
    """Return the campaign's figures."""
    with ProcessPoolExecutor(workers, mp_context=get_context("spawn")) as pool:
        outcomes = list(pool.map(fault_case, range(seed, seed + n_faults), chunksize=20))
        alarms = list(pool.map(quiet_case, range(seed, seed + n_quiet), chunksize=20))
    found = [outcome for outcome in outcomes if outcome.found]
    quiet_noise = [outcome for outcome in found if outcome.snr_db >= 50.0]
    inception = np.abs([o.inception_samples for o in quiet_noise if o.inception_samples is not None])
    clearing = np.abs([c for o in found for c in o.clearing_samples])
    figures: dict[str, float | int] = {
        "faults": n_faults,
        "missed": n_faults - len(found),
        "type right, %": 100.0 * float(np.mean([o.type_right for o in found])),
        "direction right, %": 100.0 * float(np.mean([o.direction_right for o in found])),
        "one event each, %": 100.0 * float(np.mean([o.one_event for o in found])),
        "inception error at 50 dB and more, median, samples": float(np.median(inception)),
        "inception error at 50 dB and more, 95th percentile, samples": float(np.quantile(inception, 0.95)),
        "clearing error per pole, median, samples": float(np.median(clearing)),
        "clearing error per pole, 95th percentile, samples": float(np.quantile(clearing, 0.95)),
        "quiet records": n_quiet,
        "faults reported in them": int(np.sum(alarms)),
    }
    for name in ("inception", "symmetrical current"):
        held = [inside for o in found for inside in o.held.get(name, ())]
        figures[f"95 % interval of the {name} holds, %"] = 100.0 * float(np.mean(held))
    return figures


def table(figures: dict[str, float | int], *, seed: int) -> Iterator[str]:
    """Yield the lines of a Markdown table."""
    yield "| simulated, SNR 40 to 80 dB, 16 to 256 samples per cycle, X/R 2 to 60, with load | |"
    yield "|---|---|"
    for name, value in figures.items():
        yield f"| {name} | {value if isinstance(value, int) else f'{value:.3g}'} |"
    yield ""
    yield f"`python -m tests.campaigns.events --seed {seed}`"


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--faults", type=int, default=2000)
    parser.add_argument("--quiet", type=int, default=1000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--workers", type=int, default=2)
    given = parser.parse_args()
    figures = run(given.faults, given.quiet, seed=given.seed, workers=given.workers)
    sys.stdout.write("\n".join(table(figures, seed=given.seed)) + "\n")


if __name__ == "__main__":
    main()
