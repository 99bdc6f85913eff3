"""Converter and noise: counts, clipping, quantisation noise and autocorrelation."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.converter import Converter, Noise, draw_noise, quantise


@settings(deadline=None, derandomize=True, max_examples=50)
@given(bits=st.integers(2, 32), full_scale=st.floats(1e-3, 1e7), seed=st.integers(0, 99))
def test_counts_are_the_nearest_and_never_leave_the_range(bits, full_scale, seed):
    largest = Converter(bits=bits, current_range_a=1.0, voltage_range_v=1.0).largest_count
    samples = np.random.default_rng(seed).uniform(-1.3, 1.3, (2, 50)) * full_scale
    counts, step = quantise(samples, full_scale=[full_scale] * 2, largest_count=largest)
    assert np.abs(counts).max() <= largest
    np.testing.assert_allclose(step * largest, full_scale)
    inside = np.abs(samples) <= full_scale
    assert np.abs(counts * step[:, None] - samples)[inside].max() <= step[0] / 2 * (1 + 1e-6)
    assert np.array_equal(np.abs(counts[np.abs(samples) > full_scale]), [largest] * (~inside).sum())


def test_quantisation_noise_of_a_fault_on_its_range():
    # Fault of five times rated on a range of eighty times rated: 52.9, 65.0 and 77.0 dB at 12, 14 and 16 bit
    # (step²/12 of quantisation, computed with two to the power of the bits as the number of steps).
    t = np.arange(200_000) * 0.0123456
    signal = 5 * np.sqrt(2) * np.sin(t)[None, :]
    for bits, expected in ((12, 52.9), (14, 65.0), (16, 77.0)):
        converter = Converter(bits=bits, current_range_a=80.0, voltage_range_v=1.0)
        counts, step = quantise(signal, full_scale=[80.0], largest_count=converter.largest_count)
        error = counts * step[:, None] - signal
        found = 10 * np.log10((signal**2).mean() / (error**2).mean())
        assert found == pytest.approx(expected, abs=0.15)


@pytest.mark.parametrize("lag1", [0.0, 0.6, -0.4])
def test_noise_has_its_level_and_autocorrelation_from_the_first_sample(lag1):
    rng = np.random.default_rng(11)
    noise = draw_noise([2.0, 5.0], n_samples=60_000, lag1_autocorrelation=lag1, rng=rng)
    spread = np.sqrt(
        (1 + lag1**2) / (1 - lag1**2) / 60_000
    )  # relative deviation of a variance, times 1/sqrt 2
    np.testing.assert_allclose(noise.std(axis=1), [2.0, 5.0], rtol=5 * spread)
    found = (noise[:, 1:] * noise[:, :-1]).mean(axis=1) / noise.var(axis=1)
    np.testing.assert_allclose(found, lag1, atol=5 / np.sqrt(60_000))
    assert abs(np.corrcoef(noise)[0, 1]) < 5 * spread
    starts = draw_noise(np.ones(20_000), n_samples=3, lag1_autocorrelation=lag1, rng=rng)
    np.testing.assert_allclose(starts.std(axis=0), 1.0, rtol=5 / np.sqrt(2 * 20_000))


def test_level_from_a_ratio():
    noise = Noise.at_ratio(40.0, current_rms_a=500.0, voltage_rms_v=60e3)
    assert noise.current_rms_a == pytest.approx(5.0)
    assert noise.voltage_rms_v == pytest.approx(600.0)


def test_wrong_values_name_their_key():
    with pytest.raises(ForgeError, match="bits"):
        Converter(bits=1, current_range_a=1, voltage_range_v=1)
    with pytest.raises(ForgeError, match="current_range_a"):
        Converter(bits=12, current_range_a=0, voltage_range_v=1)
    with pytest.raises(ForgeError, match="lag1_autocorrelation"):
        Noise(lag1_autocorrelation=1.0)
    with pytest.raises(ForgeError, match="voltage_rms_v"):
        Noise(voltage_rms_v=-1.0)
    with pytest.raises(ForgeError, match="snr_db"):
        Noise.at_ratio(float("nan"), current_rms_a=1, voltage_rms_v=1)
