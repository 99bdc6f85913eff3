"""Linear elements against closed forms, and their start in the steady state."""

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.signal import butter, freqs_zpk

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.filters import AntiAlias
from analyzer.forge.instruments.linear import ModalSystem, Tones, fit_tones, hold_weights, run_linear

RATE = 38400.0


def low_pass(rate_per_s):
    return ModalSystem.all_pole([-rate_per_s], rate_per_s)


def test_weights_integrate_a_cubic_exactly():
    pole, step = -800.0 + 2300j, 1 / RATE
    weights = hold_weights(pole, step)
    cubic = np.polynomial.Polynomial([0.3, -1.2, 0.8, 2.0])  # in steps

    def integrand(x, part):
        return getattr(np.exp(pole * step * (1 - x)) * cubic(x) * step, part)

    expected = quad(integrand, 0, 1, args=("real",))[0] + 1j * quad(integrand, 0, 1, args=("imag",))[0]
    assert abs(weights @ cubic(np.array([-1, 0, 1, 2])) - expected) < 1e-16


def test_steady_sinusoid_goes_through_without_a_start():
    system = AntiAlias(kind="butterworth", order=4, cutoff_hz=1500).system()
    t = np.arange(4000) / RATE
    phasors = np.array([2.0, 1.5 * np.exp(0.7j)])
    signal = (phasors[:, None] * np.exp(2j * np.pi * 50 * t)).real
    tones = Tones(freqs_hz=np.array([50.0]), amplitudes=phasors[None, :])
    out = run_linear(system, signal, sample_rate_hz=RATE, tones=tones)
    expected = (system.response(50.0) * phasors[:, None] * np.exp(2j * np.pi * 50 * t)).real
    # The cubic's own error, see the module; the last sample rests on an extrapolation.
    np.testing.assert_allclose(out[:, :-1], expected[:, :-1], rtol=0, atol=2e-9)


def test_fault_current_through_a_first_order_element_has_its_closed_form():
    rate, tau, omega = 5000.0, 0.045, 2 * np.pi * 50
    t = np.arange(8000) / RATE
    decay = 1 / tau
    signal = (np.cos(omega * t) - np.exp(-decay * t))[None, :]
    quiet = Tones(freqs_hz=np.array([50.0]), amplitudes=np.zeros((1, 1)))
    out = run_linear(low_pass(rate), signal, sample_rate_hz=RATE, tones=quiet)[0]
    gain, slow = rate / (rate + 1j * omega), rate / (rate - decay)
    expected = (gain * np.exp(1j * omega * t)).real - slow * np.exp(-decay * t)
    expected -= (gain.real - slow) * np.exp(-rate * t)
    np.testing.assert_allclose(out[:-1], expected[:-1], rtol=0, atol=1e-9)


@pytest.mark.parametrize("order", range(1, 9))
def test_butterworth_is_the_library_s(order):
    system = AntiAlias(kind="butterworth", order=order, cutoff_hz=1200).system()
    freqs = np.array([0.0, 50.0, 600.0, 1200.0, 3000.0])
    expected = freqs_zpk(*butter(order, 2 * np.pi * 1200, analog=True, output="zpk"), worN=2 * np.pi * freqs)[
        1
    ]
    np.testing.assert_allclose(system.response(freqs), expected, rtol=1e-9, atol=1e-12)


def test_group_delay_is_the_slope_of_the_phase():
    system = AntiAlias(kind="butterworth", order=5, cutoff_hz=900).system()
    step = 1e-3
    phase = np.angle(system.response([50 - step, 50 + step]))
    assert system.group_delay_s(50) == pytest.approx(-np.diff(phase)[0] / (4 * np.pi * step), rel=1e-7)
    one = AntiAlias(kind="rc", cutoff_hz=200).system()
    assert one.group_delay_s(0) == pytest.approx(1 / (2 * np.pi * 200), rel=1e-12)


def test_state_space_and_tone_fit():
    a = np.array([[0.0, 1.0], [-4e4, -60.0]])
    system = ModalSystem.from_state_space(a, [0.0, 4e4], [1.0, 0.0], 0.0)
    s = 2j * np.pi * 37.0
    assert system.response(37.0) == pytest.approx(4e4 / (s**2 + 60 * s + 4e4), rel=1e-12)
    t = np.arange(1536) / RATE
    signal = np.array([3 * np.cos(2 * np.pi * 49.2 * t + 1.0) + 0.1 * np.sin(2 * np.pi * 250 * t)])
    tones = fit_tones(signal, sample_rate_hz=RATE, freqs_hz=[49.2, 250.0], n_samples=1536)
    assert tones.amplitudes[0, 0] == pytest.approx(3 * np.exp(1j), rel=1e-10)
    assert tones.amplitudes[1, 0] == pytest.approx(-0.1j, abs=1e-10)


def test_what_cannot_be_run_is_refused():
    with pytest.raises(ForgeError, match="coincide"):
        ModalSystem.from_state_space([[-1.0, 1.0], [0.0, -1.0]], [0.0, 1.0], [1.0, 0.0], 0.0)
    with pytest.raises(ForgeError, match="decay"):
        ModalSystem.all_pole([0.5], 1.0)
