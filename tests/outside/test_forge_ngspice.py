"""The network simulation against the transient analysis of ngspice, an independent circuit program.

Netlists are written here by hand from the same data, not by the forge. Run with ngspice 39.3 (Debian 12),
gear method of order 4, relative tolerance 1e-7, on 2026-12-01: currents within 5e-6 of the peak (7e-5 with
the capacitor bank). Mutual coupling of a transposed element is an ideal
coupled inductor (K) and current-controlled voltages (H); the fault's switches
are conductances that rise from 1e-7 to 1e5 S within 50 ns.
"""

from __future__ import annotations

import shutil
import subprocess
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from analyzer.forge.network import Capacitor, Line, Load, Network, Source
from analyzer.forge.schedule import Fault, FaultChange, FaultStart, Schedule
from analyzer.forge.solution import solve

pytestmark = pytest.mark.skipif(shutil.which("ngspice") is None, reason="ngspice is not installed")

HZ = 50.0
OMEGA = 2.0 * np.pi * HZ
START_S = 0.0411
STOP_S = 0.13


@dataclass
class Netlist:
    lines: list[str] = field(default_factory=list)

    def element(
        self, name: str, start: str, stop: str, z1: complex, z0: complex, initial_a: NDArray[np.float64]
    ) -> None:
        """Transposed three-phase series R-L with a zero-volt source per phase that measures its current."""
        own, mutual = (z0 + 2 * z1) / 3, (z0 - z1) / 3
        for k, phase in enumerate("abc"):
            l_h, initial = float(own.imag / OMEGA), float(initial_a[k])
            left, right = f"{start}{phase}", "0" if stop == "0" else f"{stop}{phase}"
            others = [p for p in "abc" if p != phase]
            self.lines += [
                f"V{name}{phase} {left} {name}1{phase} 0",
                f"R{name}{phase} {name}1{phase} {name}2{phase} {own.real!r}",
                f"L{name}{phase} {name}2{phase} {name}3{phase} {l_h!r} IC={initial!r}",
                f"H{name}{phase}1 {name}3{phase} {name}4{phase} V{name}{others[0]} {mutual.real!r}",
                f"H{name}{phase}2 {name}4{phase} {right} V{name}{others[1]} {mutual.real!r}",
            ]
        if mutual.imag != 0.0:
            factor = mutual.imag / own.imag
            self.lines += [f"K{name}{p}{q} L{name}{p} L{name}{q} {factor!r}" for p, q in ("ab", "bc", "ca")]

    def source(self, name: str, node: str, source: Source, initial_a: NDArray[np.float64]) -> None:
        for k, phase in enumerate("abc"):
            peak = float(np.sqrt(2.0) * source.voltage_rms_v)
            angle = source.angle_deg + 90.0 - 120.0 * k
            self.lines.append(f"VE{name}{phase} {name}e{phase} 0 SIN(0 {peak!r} {HZ} 0 0 {angle!r})")
        self.element(name, f"{name}e", node, source.z1_ohm, source.z0_ohm, initial_a)

    def switch(self, name: str, left: str, right: str, *, closes_s: float) -> None:
        self.lines += [
            f"VC{name} c{name} 0 PWL(0 0 {closes_s!r} 0 {closes_s + 5e-8!r} 1)",
            f"B{name} {left} {right} I=V({left},{right})*pow(10,12*V(c{name})-7)",
        ]

    def run(self, folder: Path, measured: list[str]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        text = [
            "hand-made network",
            *self.lines,
            ".options method=gear maxord=4 reltol=1e-7 abstol=1e-9 vntol=1e-9 chgtol=1e-16 trtol=1",
            ".control",
            "set wr_singlescale",
            "set wr_vecnames",
            f"tran 4u {STOP_S} 0 4u uic",
            f"wrdata out.txt {' '.join(measured)}",
            "quit 0",
            ".endc",
            ".end",
        ]
        (folder / "net.cir").write_text("\n".join(text) + "\n", encoding="utf-8")
        done = subprocess.run(
            ["ngspice", "-b", "-o", "log.txt", "net.cir"],
            cwd=folder,
            capture_output=True,
            timeout=120,
            check=False,
        )
        assert done.returncode == 0, (folder / "log.txt").read_text(encoding="utf-8")
        table = np.loadtxt(folder / "out.txt", skiprows=1)
        assert len(table) > STOP_S / 4e-6, "ngspice stopped early"
        return table[:, 0], table[:, 1:].T


LINE = Line(z1_ohm=0.5 + 3.0j, z0_ohm=1.2 + 9.0j)
SOURCE = Source(voltage_rms_v=11547.0, angle_deg=17.0, z1_ohm=0.3 + 4.0j, z0_ohm=0.5 + 6.0j)
REMOTE = Source(voltage_rms_v=11300.0, angle_deg=5.0, z1_ohm=0.9 + 7.0j, z0_ohm=1.5 + 10.0j)
LOAD = Load(z_ohm=45.0 + 20.0j, star="grounded")
BANK = Capacitor(capacitance_f=15e-6, r_ohm=0.4, l_h=1.2e-3)
CASES = {
    "one phase to ground": (
        Fault(type="AG", fraction=0.6, phase_resistance_ohm=0.2, ground_resistance_ohm=0.7),
        {},
    ),
    "two phases": (Fault(type="BC", fraction=0.3, phase_resistance_ohm=0.1), {}),
    "three phases, bolted": (Fault(type="ABC", fraction=0.9), {}),
    "two phases to ground, load": (
        Fault(type="CAG", fraction=0.5, phase_resistance_ohm=0.3, ground_resistance_ohm=1.1),
        {"loads": (LOAD,)},
    ),
    "one phase, second source": (
        Fault(type="BG", fraction=0.7, ground_resistance_ohm=2.0),
        {"remote": REMOTE},
    ),
    "two phases, second source and load": (
        Fault(type="AB", fraction=0.4, phase_resistance_ohm=0.5),
        {"remote": REMOTE, "loads": (LOAD,)},
    ),
    "one phase, capacitor at the bus": (
        Fault(type="AG", fraction=0.2, ground_resistance_ohm=0.5),
        {"capacitor": BANK},
    ),
}


@pytest.mark.parametrize("case", CASES)
def test_line_current_and_bus_voltage_agree_with_ngspice(case: str, tmp_path: Path) -> None:
    fault, parts = CASES[case]
    network = Network(nominal_frequency_hz=HZ, line=LINE, source=SOURCE, **parts)  # type: ignore[arg-type]
    schedule = Schedule(happenings=(FaultStart(time_s=START_S, fault=fault),))
    if case == "one phase to ground":
        later = Fault(type="ABG", fraction=0.6, phase_resistance_ohm=0.2, ground_resistance_ohm=0.7)
        schedule = Schedule(happenings=(*schedule.happenings, FaultChange(time_s=0.083, fault=later)))
    solution = solve(network, schedule, duration_s=STOP_S)

    # The initial currents only let ngspice begin in its own steady state; they are not compared.
    def begin(name: str) -> NDArray[np.float64]:
        return solution.branch_current(name, [0.0])[:3, 0]

    net = Netlist()
    net.source("s", "b", SOURCE, begin("source"))
    near, far = fault.fraction, 1.0 - fault.fraction
    net.element("n", "b", "f", LINE.z1_ohm * near, LINE.z0_ohm * near, begin("near"))
    net.element("r", "f", "e", LINE.z1_ohm * far, LINE.z0_ohm * far, begin("far"))
    if "remote" in parts:
        net.source("q", "e", REMOTE, begin("remote-source"))
    if "loads" in parts:
        net.element("l", "e", "0", LOAD.z_ohm, LOAD.z_ohm, begin("load"))
    if "capacitor" in parts:
        for k, phase in enumerate("abc"):
            start_v = solution.stretches[0].capacitor_voltages(0.0)[k]
            net.lines += [
                f"RC{phase} b{phase} k1{phase} {BANK.r_ohm}",
                f"LC{phase} k1{phase} k2{phase} {BANK.l_h} IC={begin('capacitor')[k]!r}".replace(
                    "np.float64", ""
                ),
                f"CC{phase} k2{phase} 0 {BANK.capacitance_f} IC={float(start_v)!r}",
            ]
    if "remote" not in parts and "loads" not in parts:
        net.lines += [f"RE{phase} e{phase} 0 1e7" for phase in "abc"]
    for phase in "abc":
        closes = START_S if "ABC".index(phase.upper()) in fault.phases else 1.0
        if case == "one phase to ground" and phase == "b":
            closes = 0.083
        net.switch(f"f{phase}", f"f{phase}", f"p{phase}", closes_s=closes)
        net.lines.append(f"RF{phase} p{phase} star {max(fault.phase_resistance_ohm, 1e-7)!r}")
    net.lines.append(f"RG star 0 {max(fault.ground_resistance_ohm, 1e-7) if fault.grounded else 1e9!r}")
    measured = [f"i(Vn{p})" for p in "abc"] + [f"v(b{p})" for p in "abc"]
    t, values = net.run(tmp_path, measured)

    t, values = t[t <= STOP_S], values[:, t <= STOP_S]
    current, voltage = solution.current(t), solution.voltage(t)
    current_error = float(np.abs(current - values[:3]).max() / np.abs(current).max())
    # ngspice's voltages need some 4 us steps to settle after its start and a switch; its currents do not.
    settled = np.all([(t < at) | (t > at + 40e-6) for at in (0.0, START_S, 0.083)], axis=0)
    voltage_error = float(np.abs(voltage - values[3:])[:, settled].max() / np.abs(voltage).max())
    assert current_error < 1e-4
    # 4 us steps follow the ringing of the bank less well.
    assert voltage_error < (1e-3 if "capacitor" in case else 1e-4)
