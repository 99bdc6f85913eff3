"""Current and capacitive voltage transformers against a circuit simulator's transient analysis.

Source: ngspice (Debian package, 39.3), run by the test itself; first run 2026-12-01. Skipped where it is not
installed.
"""

import cmath
import math
import shutil
import subprocess

import numpy as np
import pytest

from analyzer.forge.instruments.ct import CurrentTransformer, KneePoint, transform_current
from analyzer.forge.instruments.linear import fit_tones
from analyzer.forge.instruments.vt import CapacitiveVT, transform_voltage

pytestmark = pytest.mark.skipif(shutil.which("ngspice") is None, reason="ngspice is not installed")

RATE = 38400.0
OMEGA = 2 * np.pi * 50
OPTIONS = ".options method=gear maxord=4 reltol=1e-6 abstol=1e-10 vntol=1e-10 chgtol=1e-16 trtol=1"


def simulate(tmp_path, circuit, *, vector, stop_s, step_s):
    """Time and one vector of a transient analysis."""
    out = tmp_path / "out.txt"
    control = [
        ".control",
        "set wr_singlescale",
        f"tran {step_s} {stop_s} 0 {step_s} uic",
        f"wrdata {out.as_posix()} {vector}",
        "quit 0",
        ".endc",
        ".end",
    ]
    netlist = tmp_path / "circuit.cir"
    netlist.write_text("\n".join(["title", *circuit, OPTIONS, *control]) + "\n", encoding="utf-8")
    done = subprocess.run(
        ["ngspice", "-b", str(netlist)],
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
        cwd=tmp_path,
    )
    assert done.returncode == 0, done.stdout + done.stderr
    table = np.loadtxt(out)
    assert table.shape[0] > 0.9 * stop_s / step_s, done.stdout + done.stderr
    return table[:, 0], table[:, 1]


@pytest.mark.parametrize(("burden_h", "remanence"), [(0.0, 0.0), (2e-3, 0.0), (0.0, 0.6)])
def test_saturating_current_transformer(tmp_path, burden_h, remanence):
    crest, tau, stop = 14142.0, 15 / OMEGA, 0.12
    knee = KneePoint(voltage_v=500.0, exciting_current_a=0.5, freq_hz=50.0)
    ct = CurrentTransformer(
        ratio=240.0,
        winding_ohm=0.5,
        burden_ohm=1.5,
        burden_h=burden_h,
        magnetising_h=5.0,
        knee=knee,
        remanence_pu=(remanence,),
    )
    rest = remanence * knee.flux_wb
    shift = knee.peak_current_a * remanence**knee.exponent
    # The flux is the voltage of a capacitor of one farad that the core's voltage charges.
    circuit = [
        f"Bp 0 core I={crest / ct.ratio!r}*(exp(-time/{tau!r})-cos({OMEGA!r}*time))",
        "Bf 0 flux I=V(core)",
        f"Cf flux 0 1 IC={rest!r}",
        f"Bm core 0 I=(V(flux)-{rest!r})/5.0-{shift!r}"
        f"+{knee.peak_current_a!r}*pwr(V(flux)/{knee.flux_wb!r},{knee.exponent!r})",
        "Rs core 2 2.0",
        f"Ls 2 3 {burden_h!r} IC=0" if burden_h else "Rl 2 3 1e-9",
        "Vm 3 0 0",
    ]
    time, expected = simulate(tmp_path, circuit, vector="i(Vm)", stop_s=stop, step_s=4e-6)
    t = np.arange(-1536, round(stop * RATE)) / RATE
    after = np.maximum(t, 0)
    current = np.where(t > 0, crest * (np.exp(-after / tau) - np.cos(OMEGA * after)), 0.0)[None, :]
    tones = fit_tones(current, sample_rate_hz=RATE, freqs_hz=50.0, n_samples=1536)
    found = transform_current(current, ct, sample_rate_hz=RATE, tones=tones).secondary_a[0]
    inside = t > time[0]
    error = np.abs(found - ct.ratio * np.interp(t, time, expected))[inside].max() / crest
    assert np.abs(current[0] - found).max() > 0.5 * crest
    assert error < 2e-5  # the solver's tolerance is 1e-5 of the largest current, 1.8 crests; measured 4e-6


@pytest.mark.parametrize("angle", [0.0, math.pi / 2])
def test_capacitive_voltage_transformer(tmp_path, angle):
    vt = CapacitiveVT.from_rating(
        capacitance_f=60e-9,
        intermediate_voltage_v=12e3,
        burden_va=300.0,
        tuned_freq_hz=50.0,
        magnetising_share=0.3,
    )
    at, stop, crest = 0.1, 0.25, 1000.0
    phase = math.degrees(angle) - math.degrees(OMEGA * at)
    load = 1 / (1 / vt.burden_ohm + 1 / (1j * OMEGA * vt.magnetising_h))
    total = 1 / (1j * OMEGA * vt.capacitance_f) + 1j * OMEGA * vt.reactor_h + vt.loss_ohm + load
    trim = abs(total / load)
    # Start in the steady state: phasors at time zero of a source crest·sin(omega t + phase).
    source = -1j * crest * cmath.exp(1j * math.radians(phase))
    i_reactor = source / total
    v_cap = (i_reactor / (1j * OMEGA * vt.capacitance_f)).real
    i_mag = (i_reactor * load / (1j * OMEGA * vt.magnetising_h)).real
    circuit = [
        f"Bv 1 0 V=(time<{at!r} ? 1 : 0)*{crest!r}*sin({OMEGA!r}*time+{math.radians(phase)!r})",
        f"C 1 2 {vt.capacitance_f!r} IC={v_cap!r}",
        f"Lr 2 3 {vt.reactor_h!r} IC={i_reactor.real!r}",
        f"Rl 3 4 {vt.loss_ohm!r}",
        f"Rb 4 0 {vt.burden_ohm!r}",
        f"Lm 4 0 {vt.magnetising_h!r} IC={i_mag!r}",
    ]
    time, expected = simulate(tmp_path, circuit, vector="v(4)", stop_s=stop, step_s=4e-6)
    t = np.arange(round(stop * RATE)) / RATE
    signal = np.where(t < at - 1e-12, crest * np.sin(OMEGA * t + math.radians(phase)), 0.0)[None, :]
    k = round(at * RATE)
    signal[0, k] = crest * math.sin(angle) / 2  # its mean over the sample's interval
    tones = fit_tones(signal, sample_rate_hz=RATE, freqs_hz=50.0, n_samples=1536)
    found = transform_voltage(signal, vt, sample_rate_hz=RATE, tones=tones)[0]
    error = np.abs(found - trim * np.interp(t, time, expected))[1:-1] / crest
    beside = np.abs(t[1:-1] - at) < 2 / RATE
    assert error[~beside].max() < 5e-4
    # The output's slope jumps by 7 % of the crest per fine sample; the step stands in our input as its mean.
    assert error[beside].max() < 2e-2
    ringing = time > at + 0.02
    assert np.abs(trim * expected[ringing]).max() > 0.01 * crest
