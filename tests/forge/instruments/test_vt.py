"""Capacitive voltage transformer: true in the steady state, ringing after a collapse."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.linear import fit_tones
from analyzer.forge.instruments.sampling import sample_primary
from analyzer.forge.instruments.vt import CapacitiveVT, transform_voltage

RATE = 38400.0
OMEGA = 2 * np.pi * 50
VT = CapacitiveVT.from_rating(
    capacitance_f=60e-9,
    intermediate_voltage_v=12e3,
    burden_va=300.0,
    tuned_freq_hz=50.0,
    magnetising_share=0.3,
)


@settings(deadline=None, derandomize=True, max_examples=40)
@given(
    capacitance=st.floats(5e-9, 3e-7),
    burden_va=st.floats(20, 600),
    loss=st.floats(0.001, 0.2),
    magnetising=st.floats(0.02, 1.0),
    freq=st.sampled_from([50.0, 60.0]),
)
def test_output_is_the_input_at_the_tuned_frequency(capacitance, burden_va, loss, magnetising, freq):
    vt = CapacitiveVT.from_rating(
        capacitance_f=capacitance,
        intermediate_voltage_v=12e3,
        burden_va=burden_va,
        tuned_freq_hz=freq,
        loss_share=loss,
        magnetising_share=magnetising,
    )
    system = vt.system()
    assert complex(system.response(freq)) == pytest.approx(1.0, abs=1e-9)
    assert abs(complex(system.response(0.0))) < 1e-9  # no capacitor passes direct voltage


def circuit(freq_hz):
    """Voltage divider of the impedances, as a check on the state equations."""
    s = 2j * math.pi * freq_hz
    load = 1 / (1 / VT.burden_ohm + 1 / (s * VT.magnetising_h))
    series = 1 / (s * VT.capacitance_f) + s * VT.reactor_h + VT.loss_ohm
    return load / (load + series)


@pytest.mark.parametrize("freq_hz", [5.0, 45.0, 150.0, 700.0])
def test_response_is_the_circuit_s(freq_hz):
    assert complex(VT.system().response(freq_hz)) == pytest.approx(
        circuit(freq_hz) / abs(circuit(50.0)), rel=1e-9
    )


def collapse(at, angle):
    crest = 90e3
    return lambda t: np.where(t < at, crest * np.sin(OMEGA * (t - at) + angle), 0.0)[None, :]


def run(at, angle, n=9000):
    signal = sample_primary(
        collapse(at, angle), start_s=0.0, sample_rate_hz=RATE, n_samples=n, breaks_s=(at,)
    )
    tones = fit_tones(signal, sample_rate_hz=RATE, freqs_hz=50.0, n_samples=1536)
    return signal[0], transform_voltage(signal, VT, sample_rate_hz=RATE, tones=tones)[0]


@pytest.mark.parametrize("angle", [0.0, 1.0, math.pi / 2])
def test_collapse_agrees_with_direct_integration(angle):
    at = 0.05 + 0.3 / RATE
    t = np.arange(9000) / RATE
    c, reactor, lm, rb, rl = VT.capacitance_f, VT.reactor_h, VT.magnetising_h, VT.burden_ohm, VT.loss_ohm
    scale = 1 / abs(circuit(50.0))
    # Steady state before: phasors of capacitor voltage, reactor and magnetising current for a crest of one.
    s = 1j * OMEGA
    total = 1 / (s * c) + s * reactor + rl + 1 / (1 / rb + 1 / (s * lm))
    current = 90e3 / total
    out = current / (1 / rb + 1 / (s * lm))
    start = np.exp(1j * (angle - np.pi / 2)) * np.array([current / (s * c), current, out / (s * lm)])

    def free(_, x):
        volts = rb * (x[1] - x[2])
        return [x[1] / c, (-x[0] - rl * x[1] - volts) / reactor, volts / lm]

    after = t > at
    solved = solve_ivp(free, (at, t[-1]), start.real, method="LSODA", rtol=1e-10, atol=1e-14, t_eval=t[after])
    expected = scale * rb * (solved.y[1] - solved.y[2])
    _, found = run(at, angle)
    # The output's slope jumps with the step, by 7 % of the crest per fine sample; in the one sample beside it
    # the step's mean over that sample stands for the step (measured 2.7e-3), after that its area counts.
    error = np.abs(found[after] - expected)[:-1] / 90e3
    assert error[0] < 4e-3
    assert error[1:].max() < 4e-4
    assert error[200:].max() < 5e-5


def test_subsidence_is_there_and_dies():
    before = slice(100, 1800)
    primary, secondary = run(0.05, 0.0)
    np.testing.assert_allclose(secondary[before], primary[before], rtol=0, atol=1e-4)
    a_cycle_later, end = int(0.07 * RATE), int(0.2 * RATE)
    assert np.abs(secondary[a_cycle_later : a_cycle_later + 384]).max() > 0.02 * 90e3
    assert np.abs(secondary[end:]).max() < np.abs(secondary[a_cycle_later:end]).max()


def test_less_capacitance_rings_more():
    def left(capacitance):
        vt = CapacitiveVT.from_rating(
            capacitance_f=capacitance, intermediate_voltage_v=12e3, burden_va=300.0, tuned_freq_hz=50.0
        )
        signal = collapse(0.05, 0.0)(np.arange(6000) / RATE)
        tones = fit_tones(signal, sample_rate_hz=RATE, freqs_hz=50.0, n_samples=1536)
        return np.abs(transform_voltage(signal, vt, sample_rate_hz=RATE, tones=tones)[0, 2300:]).max()

    assert left(30e-9) > 1.5 * left(120e-9)


@pytest.mark.parametrize("key", ["capacitance_f", "loss_ohm", "magnetising_h", "burden_ohm", "tuned_freq_hz"])
def test_wrong_values_name_their_key(key):
    values = dict.fromkeys(["capacitance_f", "loss_ohm", "magnetising_h", "burden_ohm", "tuned_freq_hz"], 1.0)
    with pytest.raises(ForgeError) as caught:
        CapacitiveVT(**{**values, key: -1.0})
    assert caught.value.where == key
