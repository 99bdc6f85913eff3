"""Coloured noise: how much of it lies in the signal's band, against densities known in closed form."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.signal import lfilter

from analyzer.waveform.noise import in_band_gain

STEP_RAD = 2 * np.pi / 64


def white(seed: int, n: int = 640) -> np.ndarray:
    return np.random.default_rng(seed).normal(size=(3, n))


def test_white_noise_is_left_alone():
    gains = [in_band_gain(white(seed), phase_step_rad=STEP_RAD) for seed in range(60)]
    assert np.mean(gains) == pytest.approx(1.0, abs=0.03)
    assert np.std(gains) < 0.1


@pytest.mark.parametrize("pole", [0.3, 0.7, 0.9, -0.5])
def test_noise_that_follows_itself_has_the_density_of_its_filter(pole):
    # x = pole * x before + white: density 1 / |1 - pole exp(-j w)|^2, variance 1 / (1 - pole^2).
    expected = np.sqrt(1 - pole**2) / abs(1 - pole * np.exp(-1j * STEP_RAD))
    gains = [
        in_band_gain(lfilter([1.0], [1.0, -pole], white(seed), axis=1), phase_step_rad=STEP_RAD)
        for seed in range(40)
    ]
    assert np.mean(gains) == pytest.approx(expected, rel=0.08)


def test_each_channel_counts_alike_whatever_its_size():
    noise = white(1)
    scaled = noise * np.array([[1.0], [1e6], [1e-6]])
    gains = [in_band_gain(values, phase_step_rad=STEP_RAD) for values in (noise, scaled)]
    assert gains[0] == pytest.approx(gains[1])


def test_what_is_no_noise_has_a_bounded_gain():
    for values in (np.zeros((2, 300)), np.ones((2, 300)), np.ones((1, 3)), np.tile(np.arange(300.0), (2, 1))):
        assert 0.25 <= in_band_gain(values, phase_step_rad=STEP_RAD) <= 30.0
