"""The steady state before an event: what is found of known sinusoids, and how sure that says to be."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.waveform.prefault import Prefault, coarse_frequency, fit_prefault

RATE_HZ = 3200.0
PHASORS = np.array([120.0 * np.exp(0.3j), 120.0 * np.exp(-1.8j), 120.0 * np.exp(2.4j)])


def times(cycles: float, *, frequency_hz: float = 50.0, rate_hz: float = RATE_HZ) -> np.ndarray:
    return np.arange(round(cycles * rate_hz / frequency_hz)) / rate_hz


def waves(times_s: np.ndarray, *, frequency_hz: float = 50.0, t_ref_s: float = 0.0) -> np.ndarray:
    turning = np.exp(2j * np.pi * frequency_hz * (times_s - t_ref_s))
    return np.sqrt(2) * (PHASORS[:, None] * turning).real


def fit(times_s: np.ndarray, signals: np.ndarray, *, guess_hz: float = 50.0, refine: bool = True) -> Prefault:
    return fit_prefault(
        times_s, signals, t_ref_s=float(times_s[-1]) + 0.005, frequency_hz=guess_hz, refine=refine
    )


@pytest.mark.parametrize("frequency_hz", [47.0, 49.6, 50.0, 50.02, 51.3, 58.5, 60.0, 61.7])
def test_frequency_and_phasors_of_clean_waves(frequency_hz):
    times_s = times(6.0, frequency_hz=frequency_hz)
    t_ref_s = float(times_s[-1]) + 0.005
    signals = waves(times_s, frequency_hz=frequency_hz, t_ref_s=t_ref_s) + np.array([[0.0], [2.0], [-3.0]])
    guess_hz = coarse_frequency(times_s, signals, nominal_hz=50.0)
    assert guess_hz == pytest.approx(frequency_hz, abs=1.0)
    found = fit(times_s, signals, guess_hz=guess_hz)
    assert found.frequency_hz == pytest.approx(frequency_hz, abs=1e-5)
    for k in range(3):
        assert found.phasor(k).value == pytest.approx(PHASORS[k], rel=1e-4)
    np.testing.assert_allclose(found.zero, [0.0, 2.0, -3.0], atol=1e-3)
    assert found.cycles == pytest.approx(6.0, abs=0.1)
    later_s = times_s[-1] + np.linspace(0.0, 0.01, 5)
    expected = waves(later_s, frequency_hz=frequency_hz, t_ref_s=t_ref_s)
    np.testing.assert_allclose(found.fundamental(later_s), expected, atol=0.01)
    np.testing.assert_allclose(found.predict(later_s), expected + found.zero[:, None], atol=0.01)


def test_uncertainties_hold_what_they_say():
    times_s = times(5.0, frequency_hz=49.8)
    t_ref_s = float(times_s[-1]) + 0.005
    clean = waves(times_s, frequency_hz=49.8, t_ref_s=t_ref_s)
    at_s = t_ref_s + 0.002
    truth_at = waves(np.array([at_s]), frequency_hz=49.8, t_ref_s=t_ref_s)[:, 0]
    sigma = np.array([1.0, 2.0, 0.5])
    pulls: dict[str, list[float]] = {name: [] for name in ("hz", "magnitude", "angle", "at", "noise")}
    for seed in range(200):
        rng = np.random.default_rng(seed)
        found = fit(times_s, clean + sigma[:, None] * rng.normal(size=clean.shape), guess_hz=50.0)
        pulls["hz"].append((found.frequency_hz - 49.8) / found.frequency_std_hz)
        phasor = found.phasor(0)
        pulls["magnitude"].append((phasor.magnitude - 120.0) / phasor.magnitude_std)
        pulls["angle"].append((phasor.angle_deg - np.degrees(0.3)) / phasor.angle_std_deg)
        ahead = found.predict(np.array([at_s]))[:, 0] - truth_at
        pulls["at"].append(float(ahead[1] / found.prediction_std(at_s)[1]))
        pulls["noise"].append(float(found.noise_rms[1] / 2.0))
    noise = np.array(pulls.pop("noise"))
    # Standard deviation of a root mean square of n values: 1 in sqrt(2 n).
    assert noise.mean() == pytest.approx(1.0, abs=3 / np.sqrt(2 * times_s.size * 200))
    for name, values in pulls.items():
        within = np.mean(np.abs(values) < 1.96)
        # Binomial, 95 % of 200 and three standard deviations each way.
        assert 0.90 <= within <= 0.997, name
        assert np.std(values) == pytest.approx(1.0, abs=3.5 / np.sqrt(400)), name


@pytest.mark.parametrize("cycles", [2.5, 5.0])
def test_a_short_window_is_no_surer_than_it_may_be(cycles):
    # The fit takes noise out of the very band in which its density is sought: by that alone the uncertainty
    # came out 14 % short at 2.5 cycles.
    times_s = times(cycles)
    pulls = []
    for seed in range(250):
        noise = np.random.default_rng(seed).normal(size=(3, times_s.size))
        found = fit(times_s, waves(times_s) + noise)
        pulls.append((found.frequency_hz - 50.0) / found.frequency_std_hz)
    assert np.std(pulls) == pytest.approx(1.0, abs=3 / np.sqrt(500))


def test_the_frequency_is_as_sure_as_theory_allows():
    # One sinusoid in white noise (D. Rife, R. Boorstyn, IEEE Trans. IT-20, 1974; for the real tone
    # S. Kay, Estimation Theory, 1993, ex. 3.14; from memory): var(f/fs) >= 12 / ((2 pi)^2 eta N (N^2 - 1)),
    # eta = amplitude^2 / (2 sigma^2).
    times_s = times(20.0)
    sigma = 2.0
    noise = sigma * np.random.default_rng(1).normal(size=(1, times_s.size))
    found = fit(times_s, waves(times_s)[:1] + noise)
    n, eta = times_s.size, 120.0**2 / sigma**2
    bound_hz = RATE_HZ * np.sqrt(12 / ((2 * np.pi) ** 2 * eta * n * (n**2 - 1)))
    assert found.frequency_std_hz == pytest.approx(bound_hz, rel=0.05)
    # Three alike channels are three times the information.
    noise = sigma * np.random.default_rng(2).normal(size=(3, times_s.size))
    assert fit(times_s, waves(times_s) + noise).frequency_std_hz == pytest.approx(bound_hz / 3**0.5, rel=0.05)


def test_harmonics_are_nuisance():
    times_s = times(5.0)
    t_ref_s = float(times_s[-1]) + 0.005
    phase = 2 * np.pi * 50.0 * times_s
    dirt = (
        6.0 * np.cos(3 * phase + 1.0) + 4.0 * np.sin(5 * phase) + 3.0 * np.cos(7 * phase) + np.cos(2 * phase)
    )
    found = fit(times_s, waves(times_s, t_ref_s=t_ref_s) + dirt)
    assert set(found.harmonics) == {2, 3, 5, 7}
    assert found.frequency_hz == pytest.approx(50.0, abs=2e-3)
    for k in range(3):
        assert found.phasor(k).value == pytest.approx(PHASORS[k], rel=1e-3)
    assert found.noise_rms.max() < 0.1
    # The continuation has them, the fundamental has not.
    ahead = t_ref_s + np.array([0.0, 0.003])
    np.testing.assert_allclose(found.fundamental(ahead), waves(ahead, t_ref_s=t_ref_s), atol=0.2)
    assert np.abs(found.predict(ahead) - found.fundamental(ahead)).max() > 1.0


@pytest.mark.parametrize("cycles", [2.3, 3.3, 6.25])
def test_harmonics_do_not_pull_the_frequency(cycles):
    # They did, by nine standard uncertainties at 2.3 cycles, while the search left them out.
    times_s = times(cycles)
    phase = 2 * np.pi * 50.0 * times_s
    dirt = 8.0 * np.cos(3 * phase + 1.0) + 4.0 * np.cos(5 * phase)
    pulls = []
    for seed in range(30):
        noise = 0.05 * np.random.default_rng(seed).normal(size=(3, times_s.size))
        found = fit(times_s, waves(times_s) + dirt + noise)
        pulls.append((found.frequency_hz - 50.0) / found.frequency_std_hz)
    assert abs(np.mean(pulls)) < 3.5 / np.sqrt(30)


def test_slow_sampling_or_a_short_window_has_room_for_fewer_harmonics():
    slow = times(5.0, rate_hz=600.0)
    assert fit(slow, waves(slow)).harmonics == (2, 3)  # below 0.4 of the rate
    short = times(1.6)
    assert fit(short, waves(short)).harmonics == ()


@pytest.mark.parametrize("constant", [0.0, 5.0, -0.01])
def test_a_constant_channel_neither_moves_the_frequency_nor_has_a_phasor(constant):
    times_s = times(4.0, frequency_hz=49.5)
    live = waves(times_s, frequency_hz=49.5)[:1] + 0.01 * np.random.default_rng(0).normal(size=times_s.size)
    found = fit(times_s, np.vstack([live, np.full(times_s.size, constant)]))
    assert found.frequency_hz == pytest.approx(49.5, abs=1e-3)
    assert found.zero[1] == pytest.approx(constant, abs=1e-9)
    assert found.phasor(1).magnitude < 1e-6
    assert found.noise_rms[1] > 0
    assert np.isfinite(found.covariance).all()


def test_idle_channels_say_nothing_of_the_frequency():
    # Noise alone, and much of it quantised: a converter's steps, at a wrong power frequency by chance.
    rng = np.random.default_rng(5)
    times_s = times(4.0, frequency_hz=50.4)
    live = waves(times_s, frequency_hz=50.4) + 0.05 * rng.normal(size=(3, times_s.size))
    idle = np.round(rng.normal(scale=0.6, size=(3, times_s.size)))
    alone, beside = fit(times_s, live), fit(times_s, np.vstack([idle, live]))
    assert beside.frequency_hz == pytest.approx(alone.frequency_hz, abs=0.3 * alone.frequency_std_hz)
    assert not beside.phasor(0).is_significant(5.0)


def test_nothing_alternating_keeps_the_nominal_frequency_coarsely():
    times_s = times(4.0)
    assert coarse_frequency(times_s, np.zeros((3, times_s.size)), nominal_hz=60.0) == 60.0
    assert coarse_frequency(times_s, np.full((1, times_s.size), 4.0), nominal_hz=60.0) == 60.0
    assert coarse_frequency(np.array([1.0]), np.ones((1, 1)), nominal_hz=50.0) == 50.0


@settings(deadline=None, derandomize=True, max_examples=40)
@given(
    n=st.integers(5, 80),
    refine=st.booleans(),
    what=st.sampled_from(["wave", "zero", "constant", "ramp", "noise"]),
)
def test_tiny_windows_give_finite_numbers(n, refine, what):
    times_s = np.arange(n) / RATE_HZ
    signals = {
        "wave": waves(times_s),
        "zero": np.zeros((3, n)),
        "constant": np.full((3, n), 3.0),
        "ramp": np.tile(np.arange(float(n)), (3, 1)),
        "noise": np.random.default_rng(n).normal(size=(3, n)),
    }[what]
    found = fit(times_s, signals, refine=refine)
    assert 40.0 <= found.frequency_hz <= 70.0
    assert found.frequency_std_hz >= 0.0
    assert refine or (found.frequency_hz, found.frequency_std_hz) == (50.0, 0.0)
    for array in (found.coefficients, found.covariance, found.follow, found.noise_rms):
        assert np.isfinite(array).all()
    assert (found.noise_rms > 0).all()
    assert np.isfinite(found.prediction_std(found.t_ref_s)).all()


def test_too_few_samples_are_refused():
    with pytest.raises(ValueError, match="at least 5 samples"):
        fit(np.arange(4) / RATE_HZ, np.ones((1, 4)))


def test_a_phasor_moves_with_its_origin():
    times_s = times(4.0)
    found = fit(times_s, waves(times_s) + np.random.default_rng(3).normal(size=(3, times_s.size)))
    moved = found.phasor_at(1, found.t_ref_s - 0.004)
    turn = np.exp(-1j * found.omega_rad_per_s * 0.004)
    assert moved.value == pytest.approx(found.phasor(1).value * turn)
    again = fit_prefault(
        times_s,
        waves(times_s) + np.random.default_rng(3).normal(size=(3, times_s.size)),
        t_ref_s=found.t_ref_s - 0.004,
        frequency_hz=50.0,
    )
    assert again.phasor(1).value == pytest.approx(moved.value, rel=1e-5)
    assert again.phasor(1).magnitude_std == pytest.approx(moved.magnitude_std, rel=1e-2)


def test_coefficients_follow_the_frequency_as_refitting_does():
    times_s = times(3.0)
    signals = waves(times_s)
    step_hz = 1e-4
    here = fit(times_s, signals, refine=False)
    there = fit(times_s, signals, guess_hz=50.0 + step_hz, refine=False)
    moved = (there.coefficients - here.coefficients) / (2 * np.pi * step_hz)
    np.testing.assert_allclose(here.follow[:3], moved[:3], rtol=1e-2, atol=1e-4 * np.abs(moved).max())


@settings(deadline=None, derandomize=True, max_examples=25)
@given(frequency_hz=st.floats(45.0, 65.0), cycles=st.floats(2.0, 12.0), seed=st.integers(0, 10**6))
def test_any_frequency_is_found_from_the_coarse_one(frequency_hz, cycles, seed):
    times_s = times(cycles, frequency_hz=frequency_hz)
    clean = waves(times_s, frequency_hz=frequency_hz)
    noisy = clean + 0.5 * np.random.default_rng(seed).normal(size=clean.shape)
    guess_hz = coarse_frequency(times_s, noisy, nominal_hz=50.0)
    found = fit(times_s, noisy, guess_hz=guess_hz)
    assert abs(found.frequency_hz - frequency_hz) < 5 * found.frequency_std_hz + 1e-5
