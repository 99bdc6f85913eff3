"""Campaign of faults that one RL circuit explains: errors, and how often the 95 % intervals hold the truth.

``python -m tests.campaigns.accuracy [--records N] [--seed S] [--workers N]`` prints the table that stands in
the README.
"""

from __future__ import annotations

import argparse
import sys
from collections import defaultdict
from collections.abc import Iterator
from concurrent.futures import ProcessPoolExecutor
from functools import partial
from multiprocessing import get_context
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.signal import butter, sosfilt

from analyzer.examine import examine
from analyzer.findings import Quantity
from analyzer.forge.network import Line, Network, Source
from analyzer.forge.schedule import Fault, FaultStart, PolesOpen, Schedule
from analyzer.forge.solution import solve
from analyzer.records import Record
from analyzer.theory.modes import FAULT_TYPES

PHASES = "ABC"
VOLTAGE_V = 11547.0
Noise = Literal["white", "coloured"]
# Relative error of a quantity, and whether its interval holds the truth.
Outcome = dict[str, list[tuple[float, bool]]]


def case(seed: int, *, noise: Noise) -> Outcome:
    """Draw a network without load and a fault by a seed; hold the findings against the truth."""
    rng = np.random.default_rng([5, seed])
    frequency_hz, spc = float(rng.choice([50.0, 60.0])), int(rng.choice([16, 32, 64, 96, 128]))
    x_over_r, x_ohm = float(np.exp(rng.uniform(np.log(2.0), np.log(60.0)))), float(rng.uniform(2.0, 8.0))
    z1 = complex(x_ohm / x_over_r, x_ohm)
    line_x = float(rng.uniform(1.0, 6.0))
    line = complex(line_x / (x_over_r * rng.uniform(0.7, 1.4)), line_x)
    network = Network(
        nominal_frequency_hz=frequency_hz,
        source=Source(
            voltage_rms_v=VOLTAGE_V,
            angle_deg=float(rng.uniform(-180, 180)),
            z1_ohm=z1,
            z0_ohm=z1 * rng.uniform(0.7, 1.5),
        ),
        line=Line(z1_ohm=line, z0_ohm=line * rng.uniform(1.5, 3.5)),
    )
    fault_type = FAULT_TYPES[int(rng.integers(10))]
    start_s = 0.12 + float(rng.uniform(0.0, 0.02))
    open_s = start_s + rng.uniform(2.8, 12.0) / frequency_hz
    fault = Fault(
        type=fault_type,
        fraction=float(rng.uniform(0.0, 1.0)),
        phase_resistance_ohm=float(rng.uniform(0.0, 0.1)),
        ground_resistance_ohm=float(rng.uniform(0.0, 0.3)) if fault_type.endswith("G") else 0.0,
    )
    schedule = Schedule(
        happenings=(FaultStart(time_s=start_s, fault=fault), PolesOpen(time_s=open_s)),
        frequency_hz=frequency_hz + float(rng.uniform(-0.3, 0.3)),
    )
    solution = solve(network, schedule, duration_s=open_s + 0.04)
    waves, truth = solution.sample(frequency_hz * spc), solution.truth().events[0]
    assert truth.fault is not None
    share = 10 ** (-float(rng.uniform(40.0, 80.0)) / 20)
    current_a = float(np.abs(truth.fault.symmetrical_current_a).max())
    currents = waves.current_a + share * current_a * _noise(waves.current_a.shape, noise, rng)
    voltages = waves.voltage_v + share * VOLTAGE_V * _noise(waves.voltage_v.shape, noise, rng)
    signals = {f"I{p}": (currents[k], "A") for k, p in enumerate(PHASES)}
    signals |= {f"V{p}": (voltages[k], "V") for k, p in enumerate(PHASES)}
    record = Record.from_arrays(signals, sample_rate_hz=frequency_hz * spc, nominal_frequency_hz=frequency_hz)
    (event, *_) = [found for found in examine(record).events if found.kind == "fault"]
    outcome: Outcome = defaultdict(list)

    def hold(name: str, quantity: Quantity, true: float, scale: float | None = None) -> None:
        if quantity.value is None or quantity.std is None:
            return
        low = -np.inf if quantity.low is None else quantity.low
        high = np.inf if quantity.high is None else quantity.high
        error = (quantity.value - true) / (abs(true) if scale is None else scale)
        outcome[name].append((float(error), bool(low <= true <= high)))

    hold("inception", event.inception.time_s, truth.inception_s, 1.0 / (frequency_hz * spc))
    omega = 2 * np.pi * truth.frequency_hz
    for decay, loop in zip(event.decay, truth.fault.loops, strict=True):
        hold("time constant", decay.time_constant_s, float(loop.time_constant_s or np.nan))
    first = truth.fault.loops[0]
    assert first.time_constant_s is not None
    for name, route in (
        ("X/R by the decay", event.x_over_r.from_decay),
        ("X/R by the angle", event.x_over_r.from_angle),
        ("X/R by the waveforms", event.x_over_r.from_waveform),
        ("X/R combined", event.x_over_r.combined),
    ):
        hold(name, route, omega * first.time_constant_s)
    for phase, found in event.phases.items():
        k = PHASES.index(phase)
        hold("symmetrical current", found.symmetrical_rms_a, abs(truth.fault.symmetrical_current_a[k]))
        hold("offset", found.dc_initial_a, truth.fault.offset_a[k], current_a)
        hold("peak", found.peak.model_a, truth.peaks[k].value_a)
    source, behind = event.impedance.source, truth.fault.behind
    for name, z, true in (("Z1", source.z1, behind.z1_ohm), ("Z0", source.z0, behind.z0_ohm)):
        hold(f"source {name}, R", z.r_ohm, true.real, abs(true))
        hold(f"source {name}, X", z.x_ohm, true.imag, abs(true))
    return dict(outcome)


def _noise(shape: tuple[int, ...], noise: Noise, rng: np.random.Generator) -> NDArray[np.float64]:
    """Noise of unit RMS, white or behind a fourth-order low-pass at an eighth of the sampling rate."""
    if noise == "white":
        return rng.normal(size=shape)
    run_in = 200
    filtered = sosfilt(butter(4, 0.25, output="sos"), rng.normal(size=(shape[0], shape[1] + run_in)), axis=1)
    cut = filtered[:, run_in:]
    return np.asarray(cut / np.std(cut))


def run(n_records: int, *, noise: Noise, seed: int, workers: int) -> dict[str, tuple[int, float, float]]:
    """Return of each quantity how many there were, the median error, and the share of intervals that hold."""
    gathered: Outcome = defaultdict(list)
    with ProcessPoolExecutor(workers, mp_context=get_context("spawn")) as pool:
        seeds = range(seed, seed + n_records)
        for outcome in pool.map(partial(case, noise=noise), seeds, chunksize=20):
            for name, values in outcome.items():
                gathered[name].extend(values)
    return {
        name: (
            len(values),
            float(np.median(np.abs([error for error, _ in values]))),
            float(np.mean([held for _, held in values])),
        )
        for name, values in gathered.items()
    }


def table(
    white: dict[str, tuple[int, float, float]], coloured: dict[str, tuple[int, float, float]], *, seed: int
) -> Iterator[str]:
    """Yield the lines of a Markdown table."""
    yield "| quantity | median error, white noise | holds | median error, coloured | holds |"
    yield "|---|---:|---:|---:|---:|"
    for name, (_, error, held) in white.items():
        _, other, other_held = coloured[name]
        if name == "inception":
            yield f"| {name}, samples | {error:.2g} | {held:.1%} | {other:.2g} | {other_held:.1%} |"
        else:
            yield f"| {name}, % | {100 * error:.2g} | {held:.1%} | {100 * other:.2g} | {other_held:.1%} |"
    yield ""
    yield f"`python -m tests.campaigns.accuracy --seed {seed}`"


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--records", type=int, default=2000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--workers", type=int, default=2)
    given = parser.parse_args()
    white, coloured = (
        run(given.records, noise=noise, seed=given.seed, workers=given.workers)
        for noise in ("white", "coloured")
    )
    sys.stdout.write("\n".join(table(white, coloured, seed=given.seed)) + "\n")


if __name__ == "__main__":
    main()
