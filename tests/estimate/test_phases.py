"""Each channel's sinusoid and offsets, given the loops' decay rates."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import curve_fit

from analyzer.estimate.phases import ChannelFit, fit_channel, half_sum
from analyzer.estimate.rlfit import fit_loop

OMEGA = 2 * np.pi * 50.0
TIMES_S = 0.1 + np.arange(256) / 3200.0
T_REF_S = 0.0987


def wave(*parts: float, rates: tuple[float, ...], times_s: np.ndarray = TIMES_S) -> np.ndarray:
    tau = times_s - T_REF_S
    cos, sin, *offsets = parts
    decays = sum(a * np.exp(-r * tau) for a, r in zip(offsets, rates, strict=True))
    return cos * np.cos(OMEGA * tau) + sin * np.sin(OMEGA * tau) + decays


def fitted(
    values: np.ndarray, *rates: float, rate_stds: tuple[float, ...] | None = None, omega_std: float = 0.0
) -> ChannelFit:
    return fit_channel(
        TIMES_S,
        values,
        t_ref_s=T_REF_S,
        omega_rad_per_s=OMEGA,
        omega_std_rad_per_s=omega_std,
        rates_per_s=np.array(rates),
        rate_stds_per_s=np.array(rate_stds or (0.0,) * len(rates)),
        noise_rms=1.0,
        in_band_rms=1.0,
    )


@settings(deadline=None, derandomize=True, max_examples=40)
@given(
    cos=st.floats(-1e3, 1e3),
    sin=st.floats(-1e3, 1e3),
    first=st.floats(-1e3, 1e3),
    second=st.floats(-1e3, 1e3),
)
def test_a_channel_without_noise_is_recovered(cos, sin, first, second):
    rates = (15.0, 60.0)
    fit = fitted(wave(cos, sin, first, second, rates=rates), *rates)
    np.testing.assert_allclose(fit.coefficients, [cos, sin, first, second], atol=1e-7)
    assert fit.phasor.value == pytest.approx(complex(cos, -sin) / np.sqrt(2), abs=1e-7)
    assert fit.offset[0] == pytest.approx(first + second, abs=1e-7)
    assert fit.value(0.13) == pytest.approx(
        float(wave(cos, sin, first, second, rates=rates, times_s=np.array([0.13]))[0]), abs=1e-7
    )


def test_covariance_is_that_of_a_general_least_squares_where_the_rate_is_known():
    values = wave(-80.0, 60.0, 75.0, rates=(20.0,)) + np.random.default_rng(1).normal(size=TIMES_S.size)
    fit = fitted(values, 20.0)

    def model(times_s, cos, sin, offset):
        return wave(cos, sin, offset, rates=(20.0,), times_s=times_s)

    other, covariance = curve_fit(
        model, TIMES_S, values, p0=[1, 1, 1], sigma=np.full(256, fit.noise_rms), absolute_sigma=True
    )
    np.testing.assert_allclose(fit.coefficients, other, rtol=1e-6)
    np.testing.assert_allclose(fit.covariance[:3, :3], covariance, rtol=1e-5, atol=1e-9)


def test_a_rate_that_is_not_sure_widens_as_a_free_one_does():
    # The rate is not refitted here, but its own uncertainty from the loop is carried into both: the very
    # covariance that a fit with the rate free has.
    rate = 20.0
    values = wave(-80.0, 60.0, 75.0, rates=(rate,)) + np.random.default_rng(2).normal(size=TIMES_S.size)
    loop = fit_loop(
        TIMES_S,
        values[None],
        omega_rad_per_s=OMEGA,
        omega_std_rad_per_s=0.0,
        noise_rms=np.ones(1),
        t_ref_s=T_REF_S,
    )
    fit = fitted(values, loop.rate_used_per_s, rate_stds=(loop.decay_rate_std,))
    order = [1, 2, 3, 0]  # the loop's order is rate, c, s, A
    theirs = loop.covariance[np.ix_(order, order)]
    np.testing.assert_allclose(np.sqrt(np.diag(fit.covariance)), np.sqrt(np.diag(theirs)), rtol=0.03)
    np.testing.assert_allclose(fit.coefficients, loop.coefficients[:, 0], rtol=1e-6)
    assert fit.offset[1] == pytest.approx(np.sqrt(loop.covariance[3, 3]), rel=0.03)


def test_noise_is_that_before_or_what_is_left_where_that_is_more():
    clean = wave(10.0, 20.0, 30.0, rates=(20.0,))
    assert fitted(clean, 20.0).noise_rms == 1.0
    noisy = clean + 5.0 * np.random.default_rng(3).normal(size=TIMES_S.size)
    assert fitted(noisy, 20.0).noise_rms == pytest.approx(5.0, rel=4 / np.sqrt(2 * 253))


def test_coefficients_follow_frequency_and_rate_as_refitting_does():
    values = wave(-80.0, 60.0, 75.0, rates=(20.0,))
    fit = fitted(values, 20.0, rate_stds=(0.01,), omega_std=0.001)
    faster = fitted(values, 20.01)
    moved = faster.coefficients - fit.coefficients
    np.testing.assert_allclose(fit.covariance[:3, 3] / 0.01, moved, rtol=1e-2, atol=1e-6)
    other = fit_channel(
        TIMES_S,
        values,
        t_ref_s=T_REF_S,
        omega_rad_per_s=OMEGA + 0.001,
        omega_std_rad_per_s=0.0,
        rates_per_s=np.array([20.0]),
        rate_stds_per_s=np.zeros(1),
        noise_rms=1.0,
        in_band_rms=1.0,
    )
    np.testing.assert_allclose(fit.drift, other.coefficients - fit.coefficients, rtol=1e-2, atol=1e-7)


def test_the_peak_is_the_largest_of_a_fine_search_and_its_uncertainty_that_of_drawn_parameters():
    fit = fitted(
        wave(-80.0, 60.0, 75.0, rates=(20.0,)) + np.random.default_rng(4).normal(size=TIMES_S.size),
        20.0,
        rate_stds=(0.8,),
    )
    peak, std = fit.peak(end_s=float(TIMES_S[-1]))
    fine = np.linspace(T_REF_S, TIMES_S[-1], 200_001)
    assert peak.magnitude_a == pytest.approx(
        np.abs(wave(*fit.coefficients, rates=(20.0,), times_s=fine)).max(), rel=1e-8
    )
    rng = np.random.default_rng(5)
    draws = rng.multivariate_normal([*fit.coefficients, 20.0], fit.covariance, size=2000)
    search = np.linspace(T_REF_S, T_REF_S + 0.02, 801)
    largest = [np.abs(wave(c, s, a, rates=(r,), times_s=search)).max() for c, s, a, r in draws]
    assert std == pytest.approx(np.std(largest), rel=0.07)


def test_the_half_sum_of_two_loops_is_the_phase_that_they_hold():
    b = wave(40.0, -30.0, 20.0, -55.0, rates=(12.0, 45.0))
    # i_b and i_c share the loop's decays: the difference has the first rate alone, the sum the second.
    c = wave(-10.0, 80.0, -20.0, -55.0, rates=(12.0, 45.0))
    rng = np.random.default_rng(6)
    noisy = np.array([b, c]) + 0.01 * rng.normal(size=(2, TIMES_S.size))
    loops = [
        fit_loop(
            TIMES_S,
            values[None],
            omega_rad_per_s=OMEGA,
            omega_std_rad_per_s=0.01,
            noise_rms=np.array([0.01 * np.sqrt(2)]),
            t_ref_s=T_REF_S,
        )
        for values in (noisy[0] - noisy[1], noisy[0] + noisy[1])
    ]
    for sign, values, parts in ((1.0, b, (40.0, -30.0, 20.0, -55.0)), (-1.0, c, (-10.0, 80.0, -20.0, -55.0))):
        phase = half_sum(*loops, sign)
        np.testing.assert_allclose(phase.coefficients, parts, atol=0.05)
        np.testing.assert_allclose(phase.rates_per_s, [12.0, 45.0], rtol=2e-3)
        for k in (0, 100, 255):
            assert phase.value(float(TIMES_S[k])) == pytest.approx(values[k], abs=0.03)
        halves = [(loop.own_covariance[1, 1]) / 4 for loop in loops]
        assert phase.covariance[0, 0] == pytest.approx(sum(halves))
        # Both loops share the frequency's error: their drifts add as they are, not as squares.
        assert phase.drift[0] == pytest.approx((loops[1].drift[1] + sign * loops[0].drift[1]) / 2)
        assert phase.covariance.shape == (6, 6)
        assert np.linalg.eigvalsh(phase.covariance).min() > -1e-12
