"""When each pole interrupts."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.waveform.clearing import interruption

HZ, RATE_HZ = 50.0, 3200.0
TIMES_S = np.arange(0.0, 0.4, 1 / RATE_HZ)
STEP_S = 1 / RATE_HZ
INCEPTION = 320


def fault_current(
    opens_s: float | None, *, load_a: float = 0.0, after_a: float = 0.0, noise_a: float = 1.0, seed=0
):
    """Load, a fault of 1000 A from 0.1 s with an offset, and after the opening what is left."""
    tau = TIMES_S - TIMES_S[INCEPTION]
    wave = 2 * np.pi * HZ * TIMES_S
    current = load_a * np.sin(wave)
    fault = 1000.0 * np.sin(wave - 1.4) + 800.0 * np.exp(-tau / 0.03)
    current = np.where(tau >= 0, fault, current)
    if opens_s is not None:
        current = np.where(opens_s < TIMES_S, after_a * np.sin(wave), current)
    return current + noise_a * np.random.default_rng(seed).normal(size=current.size)


def zero_after(time_s: float) -> float:
    """The fault current's first zero after an instant."""
    fine = np.arange(time_s, time_s + 0.02, 1e-7)
    values = 1000.0 * np.sin(2 * np.pi * HZ * fine - 1.4) + 800.0 * np.exp(
        -(fine - TIMES_S[INCEPTION]) / 0.03
    )
    return float(fine[np.flatnonzero(np.diff(np.sign(values)))[0]])


def found(current, *, load_peak_a: float = 0.0, noise_a: float = 1.0):
    return interruption(
        TIMES_S,
        current,
        inception=INCEPTION,
        frequency_hz=HZ,
        load_peak_a=load_peak_a,
        noise_rms_a=noise_a,
    )


@settings(deadline=None, derandomize=True, max_examples=40)
@given(asked_s=st.floats(0.12, 0.33), seed=st.integers(0, 10**6))
def test_an_opening_at_a_current_zero_is_found_to_a_fraction_of_a_sample(asked_s, seed):
    opens_s = zero_after(asked_s)
    end = found(fault_current(opens_s, seed=seed))
    assert end.time_s == pytest.approx(opens_s, abs=0.3 * STEP_S)
    assert abs(end.sample * STEP_S - opens_s) <= 2 * STEP_S
    assert 0 < end.std_s <= STEP_S


def test_back_to_load_is_an_interruption_of_the_fault():
    opens_s = zero_after(0.2)
    end = found(fault_current(opens_s, load_a=150.0, after_a=150.0), load_peak_a=150.0)
    assert end.time_s == pytest.approx(opens_s, abs=12 * STEP_S)  # load hides the zero itself
    assert end.sample > INCEPTION


def test_a_current_that_flows_to_the_end_has_none():
    assert found(fault_current(None)) is None
    assert found(fault_current(0.392)) is None  # less than three quarters of a cycle of silence


def test_a_slow_leak_or_the_crossings_of_the_wave_are_no_interruption():
    # The offset leaves long stretches on one side, and every half-cycle has a zero.
    assert found(fault_current(None, noise_a=5.0), noise_a=5.0) is None
    current = fault_current(None)
    current[700:730] = 0.0  # half a cycle missing
    assert found(current) is None


def test_nothing_at_all_has_no_interruption():
    assert found(np.zeros(TIMES_S.size)) is None


def test_a_window_too_short_for_silence_has_none():
    end = interruption(
        TIMES_S[: INCEPTION + 10],
        fault_current(None)[: INCEPTION + 10],
        inception=INCEPTION,
        frequency_hz=HZ,
        load_peak_a=0.0,
        noise_rms_a=1.0,
    )
    assert end is None


def test_what_lingers_after_the_opening_is_seen_through():
    # A transformer's flux lets go slowly: the current does not go to nothing at its zero.
    opens_s = zero_after(0.2)
    current = fault_current(opens_s)
    current += np.where(opens_s < TIMES_S, 60.0 * np.exp(-(TIMES_S - opens_s) / 0.02), 0.0)
    end = found(current)
    assert end is not None
    assert end.time_s == pytest.approx(opens_s, abs=4 * STEP_S)
