"""Time axes: interpolation errors as stated, sudden changes at their right place."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.forge.instruments.filters import AntiAlias
from analyzer.forge.instruments.linear import Tones, run_linear
from analyzer.forge.instruments.sampling import evaluate, refine, sample_primary, shift

RATE = 38400.0


@settings(deadline=None, derandomize=True, max_examples=40)
@given(advance=st.floats(-3e-4, 3e-4), freq=st.floats(40, 800))
def test_shift_keeps_a_sinusoid_within_the_stated_error(advance, freq):
    t = np.arange(400) / RATE
    omega = 2 * np.pi * freq
    out = shift(np.cos(omega * t)[None, :], sample_rate_hz=RATE, advance_s=[advance])[0]
    stated = (omega / RATE) ** 6 / 204
    inner = slice(20, -20)
    np.testing.assert_allclose(out[inner], np.cos(omega * (t + advance))[inner], rtol=0, atol=stated + 1e-13)


def test_whole_positions_are_copied():
    signal = np.random.default_rng(1).standard_normal((2, 100))
    np.testing.assert_array_equal(
        evaluate(signal, first=10.0, step=8, n_samples=5), signal[:, 10 : 10 + 4 * 8 + 1 : 8]
    )


def test_positions_beyond_an_end_hold_its_value():
    signal = np.arange(6.0)[None, :]
    out = evaluate(signal, first=-8.5, step=1, n_samples=20)[0]
    assert out[0] == pytest.approx(0)
    assert out[-1] == pytest.approx(5)


def test_refine_keeps_samples_and_adds_midpoints():
    t = np.arange(200) / RATE
    omega = 2 * np.pi * 300
    out = refine(np.sin(omega * t)[None, :])[0]
    np.testing.assert_array_equal(out[::2], np.sin(omega * t))
    fine = np.arange(399) / (2 * RATE)
    stated = 3 / 128 * (omega / RATE) ** 4
    np.testing.assert_allclose(out[3:-3], np.sin(omega * fine)[3:-3], rtol=0, atol=stated * 1.01)


def step_response_error(place, breaks):
    """Largest error after a step `place` of a sample behind sample 100, once through a low-pass."""
    system = AntiAlias(kind="butterworth", order=3, cutoff_hz=1500).system()
    at = (100 + place) / RATE
    signal = sample_primary(
        lambda t: np.where(t < at, 0.0, 1.0)[None, :],
        start_s=0.0,
        sample_rate_hz=RATE,
        n_samples=300,
        breaks_s=breaks(at),
    )
    quiet = Tones(freqs_hz=np.array([50.0]), amplitudes=np.zeros((1, 1)))
    out = run_linear(system, signal, sample_rate_hz=RATE, tones=quiet)[0]
    t = np.arange(300) / RATE
    after = np.maximum(t - at, 0)[:, None]
    exact = (system.residues / system.poles * np.expm1(system.poles * after)).sum(axis=1).real
    return np.abs(out - exact).max()


@pytest.mark.parametrize("place", [0.05, 0.3, 0.5, 0.77, 0.95])
def test_a_step_keeps_its_instant_where_breaks_are_given(place):
    # Half a fine sample of delay is 4.5e-2 of the step here; measured with its instant known: up to 1.6e-3.
    assert step_response_error(place, lambda at: (at,)) < 2e-3
    if place in (0.05, 0.95):
        assert step_response_error(place, lambda at: ()) > 3e-2


def test_a_kink_is_sampled_by_its_mean():
    at = 10.3 / RATE
    out = sample_primary(
        lambda t: np.maximum(t - at, 0.0)[None, :] * RATE,
        start_s=0.0,
        sample_rate_hz=RATE,
        n_samples=20,
        breaks_s=(at, 55.0),
    )[0]
    assert out[10] == pytest.approx(0.2**2 / 2)  # mean of a ramp that begins 0.2 before the interval's end
    assert out[11] == pytest.approx(0.7)
