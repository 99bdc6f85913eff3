"""When an event begins, to a sample."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.waveform.inception import departure, first_change
from analyzer.waveform.prefault import fit_prefault

RATE_HZ = 3200.0
CYCLE = 64
TIMES_S = np.arange(960) / RATE_HZ
TURNS = -2 * np.pi / 3 * np.arange(3)[:, None]


def currents(*, start: int, load: float = 100.0, gain: float = 5.0, noise: float = 1.0, seed: int = 0):
    wave = np.sqrt(2) * load * np.cos(2 * np.pi * 50.0 * TIMES_S + TURNS)
    grown = np.where(np.arange(TIMES_S.size) >= start, gain, 1.0)
    return wave * [grown, np.ones_like(grown), grown] + noise * np.random.default_rng(seed).normal(
        size=wave.shape
    )


@settings(deadline=None, derandomize=True, max_examples=40)
@given(start=st.integers(2 * CYCLE, 700), gain=st.floats(2.0, 20.0), seed=st.integers(0, 10**6))
def test_a_change_is_found_to_a_few_samples(start, gain, seed):
    found = first_change(TIMES_S, currents(start=start, gain=gain, seed=seed), frequency_hz=50.0)
    assert abs(found - start) <= 3


def test_a_steady_state_has_none():
    for seed in range(30):
        assert first_change(TIMES_S, currents(start=9999, seed=seed), frequency_hz=50.0) is None


def test_an_idle_record_has_none():
    assert first_change(TIMES_S, np.zeros((3, TIMES_S.size)), frequency_hz=50.0) is None
    for seed in range(30):
        noise = np.random.default_rng(seed).normal(size=(3, TIMES_S.size))
        assert first_change(TIMES_S, noise, frequency_hz=50.0) is None


def test_a_spike_of_one_sample_is_no_change():
    values = currents(start=9999)
    values[1, 400] += 3000.0
    assert first_change(TIMES_S, values, frequency_hz=50.0) is None


def test_an_earlier_change_may_be_passed_over():
    values = currents(start=300)
    assert abs(first_change(TIMES_S, values, frequency_hz=50.0) - 300) <= 3
    # From beyond it, a cycle later nothing differs from a cycle before any more.
    assert first_change(TIMES_S, values, frequency_hz=50.0, after=300 + CYCLE + 5) is None


def test_a_record_of_a_cycle_has_none():
    few = slice(0, CYCLE)
    assert first_change(TIMES_S[few], currents(start=30)[:, few], frequency_hz=50.0) is None


def test_a_frequency_off_nominal_is_no_change():
    wave = 140.0 * np.cos(2 * np.pi * 49.0 * TIMES_S + TURNS)
    assert first_change(TIMES_S, wave, frequency_hz=50.0) is None


def prefault(values: np.ndarray, stop: int):
    return fit_prefault(
        TIMES_S[:stop], values[:, :stop], t_ref_s=float(TIMES_S[stop]), frequency_hz=50.0, refine=True
    )


@pytest.mark.parametrize("start", [300, 317, 331, 350])
def test_the_first_departing_sample(start):
    values = currents(start=start, gain=6.0, noise=0.5)
    first = departure(TIMES_S, values, prefault(values, start - 25), first=start - 20, stop=start + 30)
    # Near the current's zero a phase leaves late, but of two phases one leaves at once.
    assert first == pytest.approx(start, abs=1)


def test_departure_raises_few_false_alarms():
    alarms = 0
    for seed in range(150):
        values = currents(start=9999, seed=seed)
        found = departure(TIMES_S, values, prefault(values, 400), first=410, stop=430, false_alarm=1e-3)
        alarms += found is not None
    # One sample in a thousand alone; three in a row, next to never.
    assert alarms == 0


def test_departure_in_an_idle_channel_is_seen_at_once():
    values = np.random.default_rng(1).normal(scale=0.1, size=(3, TIMES_S.size))
    values[2, 400:] += 50.0 * np.sin(2 * np.pi * 50.0 * (TIMES_S[400:] - TIMES_S[400]) + 0.3)
    assert departure(TIMES_S, values, prefault(values, 380), first=385, stop=430) == 400
