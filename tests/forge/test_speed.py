"""How long records take; run with -m bench on an idle machine."""

from __future__ import annotations

import time

import numpy as np
import pytest

from analyzer.forge.network import Load, Source
from analyzer.forge.schedule import FAULT_TYPES, Fault, FaultStart, PolesOpen, Schedule
from analyzer.forge.solution import solve
from tests.forge.networks import radial


@pytest.mark.bench
def test_a_linear_record_takes_less_than_twenty_milliseconds() -> None:
    remote = Source(voltage_rms_v=11300.0, angle_deg=3.0, z1_ohm=0.9 + 7.0j, z0_ohm=1.5 + 10.0j)
    network = radial(remote=remote, loads=(Load(z_ohm=45.0 + 20.0j),))
    rng = np.random.default_rng(7)
    solving = truth = 0.0
    for k in range(200):
        fault = Fault(type=FAULT_TYPES[k % 10], fraction=float(rng.uniform()), phase_resistance_ohm=0.1)
        start_s = float(rng.uniform(0.04, 0.06))
        schedule = Schedule(happenings=(FaultStart(time_s=start_s, fault=fault), PolesOpen(time_s=0.15)))
        begin = time.perf_counter()
        solution = solve(network, schedule, duration_s=0.25)
        waves = solution.sample(96 * 50.0)
        middle = time.perf_counter()
        solution.truth()
        truth += time.perf_counter() - middle
        solving += middle - begin
        assert waves.current_a.shape == (3, 1201)
    assert solving / 200 < 0.02
    assert truth / 200 < 0.02
    assert solving + truth < 5.0  # of the 20 s that 200 whole records may take
