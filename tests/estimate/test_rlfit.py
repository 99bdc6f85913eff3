"""The fit of one loop: what it finds without noise, and its uncertainty against other ways to it."""

from __future__ import annotations

import csv

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import brentq, curve_fit

from analyzer.estimate.rlfit import LoopFit, fit_loop

OMEGA = 2 * np.pi * 50.0
CHI2_95 = 3.841458820694124  # one degree of freedom, 0.95 quantile; from memory
# A decay rate is told from noise of one part in 1e8 here, not from rounding.
FAINT = 1e-6


def samples(*, cycles: float, per_cycle: int = 64, first_s: float = 0.0) -> np.ndarray:
    return first_s + np.arange(round(cycles * per_cycle)) / (50.0 * per_cycle)


def wave(tau: np.ndarray, *, rate: float, cos: float = -80.0, sin: float = 60.0, offset: float = 80.0):
    return cos * np.cos(OMEGA * tau) + sin * np.sin(OMEGA * tau) + offset * np.exp(-rate * tau)


def fitted(
    times_s: np.ndarray,
    currents: np.ndarray,
    *,
    noise: float = 1.0,
    omega_std: float = 0.0,
    t_ref_s: float = 0.0,
) -> LoopFit:
    currents = np.atleast_2d(currents)
    return fit_loop(
        times_s,
        currents,
        omega_rad_per_s=OMEGA,
        omega_std_rad_per_s=omega_std,
        noise_rms=np.full(len(currents), noise),
        t_ref_s=t_ref_s,
    )


@pytest.mark.parametrize("cycles", [1.5, 3.0, 8.0])
@pytest.mark.parametrize("x_over_r", [0.5, 1.0, 3.0, 8.0, 15.0, 40.0, 100.0, 200.0])
def test_a_noise_free_current_is_recovered(x_over_r, cycles):
    tau = samples(cycles=cycles)
    rate = OMEGA / x_over_r
    fit = fitted(tau, wave(tau, rate=rate), noise=FAINT)
    assert fit.decay_rate_per_s == pytest.approx(rate, rel=1e-6, abs=1e-6 * OMEGA / 100)
    np.testing.assert_allclose(fit.coefficients[:, 0], [-80.0, 60.0, 80.0], rtol=1e-5)
    assert fit.residual_rms[0] < 1e-5
    assert fit.phasor(0).value == pytest.approx(complex(-80.0, -60.0) / np.sqrt(2), rel=1e-6)


def test_a_steady_offset_has_the_decay_rate_zero():
    tau = samples(cycles=4)
    fit = fitted(tau, wave(tau, rate=0.0), noise=0.01)
    assert fit.decay_rate_per_s == pytest.approx(0.0, abs=1e-3)
    assert fit.decay_rate_low < 0.0 < fit.decay_rate_high


def test_a_rate_is_told_whatever_its_sign_is_near_zero():
    # Without negative rates an estimate near zero would be pushed up by the range's edge.
    tau = samples(cycles=5)
    rng = np.random.default_rng(11)
    found = [
        fitted(tau, wave(tau, rate=0.1) + 10.0 * rng.normal(size=tau.size), noise=10.0).rate_used_per_s
        for _ in range(100)
    ]
    assert 0.1 < np.mean(np.array(found) < 0) < 0.5
    assert np.mean(found) == pytest.approx(0.1, abs=3.0 * np.std(found) / 10)


@settings(deadline=None, derandomize=True, max_examples=40)
@given(
    log_ratio=st.floats(np.log(1.0), np.log(60.0)),
    share=st.floats(0.2, 1.0),
    angle=st.floats(-np.pi, np.pi),
    cycles=st.floats(2.0, 8.0),
)
def test_any_current_without_noise_is_recovered(log_ratio, share, angle, cycles):
    tau = samples(cycles=cycles)
    rate = OMEGA / np.exp(log_ratio)
    values = wave(tau, rate=rate, cos=100 * np.cos(angle), sin=100 * np.sin(angle), offset=100 * share)
    fit = fitted(tau, values, noise=FAINT)
    assert fit.decay_rate_per_s == pytest.approx(rate, rel=1e-5)
    np.testing.assert_allclose(fit.current(tau)[0], values, atol=1e-4)


def noisy(*, rate: float, cycles: float, sigma: float, seed: int) -> tuple[np.ndarray, np.ndarray]:
    tau = samples(cycles=cycles)
    return tau, wave(tau, rate=rate) + sigma * np.random.default_rng(seed).normal(size=tau.size)


@pytest.mark.parametrize(("x_over_r", "cycles", "seed"), [(3.0, 2.0, 1), (12.0, 4.0, 2), (40.0, 6.0, 3)])
def test_covariance_is_that_of_a_general_least_squares(x_over_r, cycles, seed):
    rate, sigma = OMEGA / x_over_r, 1.5
    tau, values = noisy(rate=rate, cycles=cycles, sigma=sigma, seed=seed)

    def model(t, decay_rate, cos, sin, offset):
        return wave(t, rate=decay_rate, cos=cos, sin=sin, offset=offset)

    other, covariance = curve_fit(
        model, tau, values, p0=[rate, -80.0, 60.0, 80.0], sigma=np.full(tau.size, sigma), absolute_sigma=True
    )
    fit = fitted(tau, values, noise=sigma)
    # Where the noise leaves a little more than its own square sum the uncertainty grows with it.
    scale = max(1.0, fit.reduced_chi_square)
    assert fit.decay_rate_per_s == pytest.approx(other[0], rel=1e-4)
    np.testing.assert_allclose(fit.coefficients[:, 0], other[1:], rtol=1e-4)
    np.testing.assert_allclose(
        fit.covariance, covariance * scale, rtol=1e-3, atol=1e-4 * np.abs(covariance).max()
    )
    deviations = np.sqrt(np.diag(fit.covariance))
    np.testing.assert_allclose(deviations, np.sqrt(np.diag(covariance) * scale), rtol=2e-4)
    chi_square = np.sum((values - model(tau, *other)) ** 2) / sigma**2 / (tau.size - 4)
    assert fit.reduced_chi_square == pytest.approx(chi_square, rel=1e-6)


@pytest.mark.parametrize(("x_over_r", "cycles", "seed"), [(3.0, 2.0, 4), (12.0, 3.0, 5), (40.0, 3.0, 6)])
def test_limits_are_where_a_scan_of_the_likelihood_has_them(x_over_r, cycles, seed):
    sigma = 2.0
    tau, values = noisy(rate=OMEGA / x_over_r, cycles=cycles, sigma=sigma, seed=seed)
    fit = fitted(tau, values, noise=sigma)

    def left(rate: float) -> float:
        design = np.column_stack([np.cos(OMEGA * tau), np.sin(OMEGA * tau), np.exp(-rate * tau)])
        part = np.linalg.lstsq(design, values, rcond=None)[0]
        return float(np.sum((values - design @ part) ** 2) / sigma**2)

    best, std = fit.decay_rate_per_s, fit.decay_rate_std
    level = left(best) + CHI2_95 * max(1.0, fit.reduced_chi_square)
    low = brentq(lambda rate: left(rate) - level, best - 6 * std, best)
    high = brentq(lambda rate: left(rate) - level, best, best + 8 * std)
    assert (fit.decay_rate_low, fit.decay_rate_high) == pytest.approx((low, high), rel=1e-4)
    assert best - low == pytest.approx(1.96 * std, rel=0.3)


def table(folder, **chosen: float) -> list[dict[str, float]]:
    with (folder / "reference" / "crlb_table.csv").open(encoding="utf-8", newline="") as file:
        rows = [row for row in csv.DictReader(file) if row["model"] == "free4"]
    rows = [{key: float(value) for key, value in row.items() if key != "model"} for row in rows]
    return [row for row in rows if all(row[key] == value for key, value in chosen.items())]


def test_standard_uncertainties_are_the_bounds_of_the_table(shared_folder):
    # Source: the table of Cramér-Rao bounds among the reference values (model free4, sigma known).
    rows = [row for row in table(shared_folder, snr_db=60.0) if row["cycles"] >= 2]
    assert len(rows) > 100
    rng = np.random.default_rng(5)
    for row in (rows[k] for k in rng.choice(len(rows), 60, replace=False)):
        omega = 2 * np.pi * row["f"]
        rate, offset = omega / row["xr"], 100.0 * row["dc_frac"]
        n = round(row["cycles"] * row["spc"])
        tau = row["t_first"] + np.arange(n) / (row["f"] * row["spc"])
        psi = np.arccos(-row["dc_frac"])  # continuity without load: the offset is what the sinusoid lacks
        values = 100.0 * np.cos(omega * tau + psi) + offset * np.exp(-rate * tau)
        sigma = 100.0 / np.sqrt(2.0) * 10 ** (-row["snr_db"] / 20)
        fit = fit_loop(
            tau,
            values[None],
            omega_rad_per_s=omega,
            omega_std_rad_per_s=0.0,
            noise_rms=np.array([sigma]),
            t_ref_s=0.0,
        )
        phasor = fit.phasor(0)
        found = {
            "tau_pct": 100.0 * fit.decay_rate_std / rate,
            "A_pct": 100.0 * np.sqrt(fit.covariance[3, 3]) / offset,
            "I_pct": 100.0 * phasor.magnitude_std / phasor.magnitude,
            "psi_deg": phasor.angle_std_deg,
        }
        # Six digits are printed; half a unit of the last is at most 5e-6.
        assert found == pytest.approx({name: row[name] for name in found}, rel=1e-5)
        correlation = fit.covariance[0, 3] / np.sqrt(fit.covariance[0, 0] * fit.covariance[3, 3])
        # The table's is of A and tau, ours of A and 1/tau.
        assert -correlation == pytest.approx(row["corr_A_tau"], abs=1e-5)


def test_intervals_hold_the_decay_rate_as_often_as_they_say():
    rate, sigma = OMEGA / 12.0, 2.0
    held, pulls = 0, []
    for seed in range(300):
        tau, values = noisy(rate=rate, cycles=2.5, sigma=sigma, seed=1000 + seed)
        fit = fitted(tau, values, noise=sigma)
        held += fit.decay_rate_low <= rate <= fit.decay_rate_high
        pulls.append((fit.decay_rate_per_s - rate) / fit.decay_rate_std)
    # Binomial: 95 % of 300, three standard deviations each way.
    assert 0.912 <= held / 300 <= 0.988
    assert np.std(pulls) == pytest.approx(1.0, abs=3.0 / np.sqrt(600))
    assert abs(np.mean(pulls)) < 3.0 / np.sqrt(300)


def test_two_currents_of_one_loop_share_their_information():
    rate = OMEGA / 15.0
    tau = samples(cycles=4)
    first = wave(tau, rate=rate)
    second = wave(tau, rate=rate, cos=30.0, sin=95.0, offset=-35.0)
    singles = [fitted(tau, values).decay_rate_std for values in (first, second)]
    both = fitted(tau, np.array([first, second]))
    # Nothing but the rate is shared, so the information about it adds.
    assert both.decay_rate_std**-2 == pytest.approx(sum(std**-2 for std in singles), rel=1e-5)
    assert both.decay_rate_per_s == pytest.approx(rate, rel=1e-5)
    assert both.free_parameters == 7
    assert both.phasor(1).value == pytest.approx(complex(30.0, -95.0) / np.sqrt(2), rel=1e-5)


@settings(deadline=None, derandomize=True, max_examples=20)
@given(angle=st.floats(-np.pi, np.pi), seed=st.integers(0, 10**6))
def test_turning_alpha_and_beta_changes_no_decay(angle, seed):
    tau = samples(cycles=3)
    both = np.array([wave(tau, rate=25.0), wave(tau, rate=25.0, cos=60.0, sin=80.0, offset=-20.0)])
    both += np.random.default_rng(seed).normal(size=both.shape)
    turn = np.array([[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]])
    plain, turned = fitted(tau, both), fitted(tau, turn @ both)
    assert turned.decay_rate_per_s == pytest.approx(plain.decay_rate_per_s, rel=1e-5)
    assert turned.decay_rate_std == pytest.approx(plain.decay_rate_std, rel=1e-5)
    assert turned.decay_rate_high == pytest.approx(plain.decay_rate_high, rel=1e-4)


@settings(deadline=None, derandomize=True, max_examples=30)
@given(log_gain=st.floats(-12.0, 18.0), shift_s=st.floats(-100.0, 100.0), seed=st.integers(0, 10**6))
def test_units_and_clock_change_nothing(log_gain, shift_s, seed):
    tau = samples(cycles=3)
    values = wave(tau, rate=30.0) + np.random.default_rng(seed).normal(size=tau.size)
    gain = np.exp(log_gain)
    plain = fitted(tau, values)
    other = fitted(tau + shift_s, gain * values, noise=gain, t_ref_s=shift_s)
    assert other.decay_rate_per_s == pytest.approx(plain.decay_rate_per_s, rel=1e-5)
    assert other.decay_rate_std == pytest.approx(plain.decay_rate_std, rel=1e-5)
    np.testing.assert_allclose(other.coefficients, gain * plain.coefficients, rtol=1e-5)
    assert other.reduced_chi_square == pytest.approx(plain.reduced_chi_square, rel=1e-5)


def test_moving_the_origin_moves_the_offset_and_the_angle_as_it_must():
    tau, values = noisy(rate=30.0, cycles=3.0, sigma=1.0, seed=8)
    here, there = fitted(tau, values), fitted(tau, values, t_ref_s=-0.004)
    assert there.decay_rate_per_s == pytest.approx(here.decay_rate_per_s, rel=1e-6)
    assert there.decay_rate_std == pytest.approx(here.decay_rate_std, rel=1e-5)
    grown = np.exp(0.004 * here.decay_rate_per_s)
    assert there.coefficients[2, 0] == pytest.approx(grown * here.coefficients[2, 0], rel=1e-6)
    turn = np.exp(-1j * OMEGA * 0.004)
    assert there.phasor(0).value == pytest.approx(turn * here.phasor(0).value, rel=1e-6)
    assert there.phasor(0).magnitude_std == pytest.approx(here.phasor(0).magnitude_std, rel=1e-5)
    # A grows with the shift and with the rate that is itself uncertain.
    jacobian = np.array([0.004 * grown * here.coefficients[2, 0], grown])
    variance = jacobian @ here.covariance[np.ix_([0, 3], [0, 3])] @ jacobian
    assert there.covariance[3, 3] == pytest.approx(variance, rel=1e-5)


def test_a_frequency_that_is_not_sure_moves_the_parameters_as_refitting_does():
    tau, step = samples(cycles=3), 2 * np.pi * 1e-4
    values = wave(tau, rate=20.0)
    fit = fitted(tau, values, omega_std=step)
    other = fit_loop(
        tau,
        values[None],
        omega_rad_per_s=OMEGA + step,
        omega_std_rad_per_s=0.0,
        noise_rms=np.ones(1),
        t_ref_s=0.0,
    )
    moved = np.append(
        other.rate_used_per_s - fit.rate_used_per_s, other.coefficients[:, 0] - fit.coefficients[:, 0]
    )
    np.testing.assert_allclose(fit.drift, moved, rtol=5e-3)
    np.testing.assert_allclose(fit.covariance, fit.own_covariance + np.outer(fit.drift, fit.drift))
    sure = fitted(tau, values)
    assert fit.decay_rate_std == pytest.approx(np.hypot(sure.decay_rate_std, fit.drift[0]), rel=1e-6)


def test_what_is_left_beyond_the_noise_before_widens_everything():
    tau, values = noisy(rate=25.0, cycles=4.0, sigma=3.0, seed=21)
    told, not_told = fitted(tau, values, noise=3.0), fitted(tau, values, noise=1.0)
    assert not_told.reduced_chi_square == pytest.approx(9 * told.reduced_chi_square)
    # White noise: both say the same but for the degrees of freedom.
    assert not_told.bound_ratio == pytest.approx(np.sqrt(not_told.reduced_chi_square), rel=0.01)
    assert not_told.decay_rate_std == pytest.approx(told.decay_rate_std, rel=0.1)
    too_much = fitted(tau, values, noise=30.0)  # less than the noise before is luck, not certainty
    assert too_much.bound_ratio == pytest.approx(1.0)
    assert too_much.decay_rate_std == pytest.approx(10 * told.decay_rate_std, rel=0.1)


def test_lag_one_autocorrelation_is_that_of_what_is_left():
    tau = samples(cycles=6)
    white = np.random.default_rng(3).normal(size=tau.size + 1)
    coloured = white[1:] + 0.9 * white[:-1]  # of lag one: 0.9 / (1 + 0.81)
    fit = fitted(tau, wave(tau, rate=20.0) + coloured)
    assert fit.lag1_autocorrelation == pytest.approx(0.9 / 1.81, abs=3 / np.sqrt(tau.size))
    assert abs(fitted(tau, wave(tau, rate=20.0) + white[1:]).lag1_autocorrelation) < 3 / np.sqrt(tau.size)


def all_unknown(fit: LoopFit) -> bool:
    known = (
        fit.decay_rate_per_s,
        fit.decay_rate_std,
        fit.decay_rate_low,
        fit.decay_rate_high,
        fit.bound_ratio,
    )
    return known == (None,) * 5


def test_without_an_offset_there_is_no_decay():
    tau = samples(cycles=4)
    for seed in range(20):
        noise = np.random.default_rng(seed).normal(size=tau.size)
        fit = fitted(tau, wave(tau, rate=20.0, offset=0.0) + noise)
        assert all_unknown(fit)
        assert "offset" in fit.why_unknown
        assert fit.free_parameters == 3
        assert fit.phasor(0).magnitude == pytest.approx(100 / np.sqrt(2), rel=0.05)


def test_one_current_with_an_offset_tells_the_decay_of_both():
    tau = samples(cycles=4)
    values = np.array([wave(tau, rate=20.0, offset=0.0), wave(tau, rate=20.0)])
    values += np.random.default_rng(4).normal(size=values.shape)
    assert all_unknown(fitted(tau, values[0]))
    fit = fitted(tau, values)
    assert fit.decay_rate_per_s == pytest.approx(20.0, abs=4 * fit.decay_rate_std)


@pytest.mark.parametrize("cycles", [0.3, 0.6, 0.9])
def test_under_a_cycle_there_is_no_decay(cycles):
    tau = samples(cycles=cycles)
    fit = fitted(tau, wave(tau, rate=20.0), noise=FAINT)
    assert all_unknown(fit)
    assert "cycles" in fit.why_unknown
    assert f"{tau[-1] * 50:.2f}" in fit.why_unknown


def test_an_offset_that_is_gone_at_once_is_not_told():
    # X/R below the range looked at: the profile has no end on the fast side.
    tau = samples(cycles=4, first_s=0.001)
    fit = fitted(tau, wave(tau, rate=OMEGA / 0.02) + np.random.default_rng(2).normal(size=tau.size))
    assert all_unknown(fit)
    assert fit.why_unknown


def test_numbers_stay_finite_however_odd_the_samples():
    tau = samples(cycles=3)
    for values in (np.zeros(tau.size), np.full(tau.size, 7.0), 1e3 * tau, np.cos(3 * OMEGA * tau)):
        fit = fitted(tau, values)
        assert np.isfinite(fit.coefficients).all()
        assert np.isfinite(fit.covariance).all()
        assert np.isfinite([fit.rate_used_per_s, fit.reduced_chi_square, fit.lag1_autocorrelation]).all()


def test_too_few_samples_are_refused():
    with pytest.raises(ValueError, match="at least 5 samples"):
        fitted(samples(cycles=4 / 64), np.ones(4))


def test_the_current_and_its_slopes_belong_together():
    tau, values = noisy(rate=40.0, cycles=3.0, sigma=1.0, seed=9)
    fit = fitted(tau, np.array([values, 0.5 * values[::-1]]))
    parameters = np.append(fit.rate_used_per_s, fit.coefficients.T.ravel())

    def current(vector: np.ndarray, time_s: float) -> np.ndarray:
        parts = vector[1:].reshape(2, 3)
        return np.array([wave(np.array(time_s), rate=vector[0], cos=c, sin=s, offset=a) for c, s, a in parts])

    for time_s in (-0.003, 0.0, 0.017):
        np.testing.assert_allclose(fit.current(np.array([time_s]))[:, 0], current(parameters, time_s))
        slopes = [
            (current(parameters + step, time_s) - current(parameters - step, time_s)) / 2e-4
            for step in 1e-4 * np.eye(7)
        ]
        np.testing.assert_allclose(fit.current_gradient(time_s), np.array(slopes).T, atol=1e-5)
