"""The exact peak against dense sampling with a proven margin, and against arithmetic of forty digits."""

import math

import mpmath
import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from analyzer.theory.peak import _Wave, _zeros
from analyzer.theory.rl import TheoryError, peak_gradient, peak_of, rl_current

calm = settings(deadline=None, derandomize=True, max_examples=150)
OMEGA = 100 * math.pi

amplitudes = st.one_of(st.just(0.0), st.floats(-10.0, 10.0))
rates = st.one_of(st.just(0.0), st.floats(0.0, 1e-3), st.floats(0.1, 4000.0))


@st.composite
def models(draw, *, least=0, most=3, rate=rates):
    count = draw(st.integers(least, most))
    return {
        "cos_a": draw(amplitudes),
        "sin_a": draw(amplitudes),
        "offset_a": [draw(st.floats(-20.0, 20.0)) for _ in range(count)],
        "decay_rate_per_s": [draw(rate) for _ in range(count)],
        "omega_rad_per_s": OMEGA,
    }


def sampled_peak(model, end, points=5_001):
    """The largest sample, and how much more there can be between samples.

    Between samples h apart a function exceeds the larger neighbour by at most h²/8 times the bound of its
    second derivative; here that bound is taken interval by interval.
    """
    t = np.linspace(0.0, end, points)
    magnitude = np.abs(rl_current(t, **model))
    bound = np.full(points - 1, OMEGA**2 * math.hypot(model["cos_a"], model["sin_a"]))
    for offset, rate in zip(model["offset_a"], model["decay_rate_per_s"], strict=True):
        growth = np.exp(-rate * t)
        bound += abs(offset) * rate**2 * np.maximum(growth[:-1], growth[1:])
    ceiling = np.maximum(magnitude[:-1], magnitude[1:]) + bound * (end / (points - 1)) ** 2 / 8
    return float(magnitude.max()), float(ceiling.max())


@calm
@given(model=models(), cycles=st.floats(0.0, 12.0))
# Two exponentials of opposite sign, the largest current in the fourth cycle.
@example(
    model={
        "cos_a": 1.0,
        "sin_a": 0.3,
        "offset_a": [10.0, -9.0],
        "decay_rate_per_s": [20.0, 12.0],
        "omega_rad_per_s": OMEGA,
    },
    cycles=10.0,
)
def test_nothing_sampled_is_larger_and_nothing_larger_is_claimed(model, cycles):
    end = 0.02 * cycles
    peak = peak_of(**model, t_end_s=end)
    least, most = sampled_peak(model, end)
    slack = 1e-13 * (1 + most)
    assert least - slack <= peak.magnitude_a <= most + slack
    assert 0.0 <= peak.time_s <= end
    assert peak.value_a == pytest.approx(float(rl_current(peak.time_s, **model)), abs=slack)


@calm
@given(model=models(least=1), start=st.floats(0.0, 0.02), length=st.floats(1e-4, 0.05))
# Both exponentials fast: two zeros within one half cycle, none of the sinusoid's between them.
@example(
    model={
        "cos_a": -0.1,
        "sin_a": -1.0,
        "offset_a": [-20.0, 20.0],
        "decay_rate_per_s": [3000.0, 1000.0],
        "omega_rad_per_s": OMEGA,
    },
    start=0.0,
    length=0.004,
)
def test_no_change_of_sign_is_missed(model, start, length):
    terms = tuple(zip(model["offset_a"], model["decay_rate_per_s"], strict=True))
    wave = _Wave(cos_a=model["cos_a"], sin_a=model["sin_a"], terms=terms, omega=OMEGA)
    zeros = np.array(_zeros(wave, start, start + length))
    t = np.linspace(start, start + length, 5001)
    sampled = rl_current(t, **model)
    # What is not above rounding has no sign.
    t, sampled = t[np.abs(sampled) > 1e-12], sampled[np.abs(sampled) > 1e-12]
    for at in np.flatnonzero(np.sign(sampled[:-1]) != np.sign(sampled[1:])):
        assert ((zeros >= t[at]) & (zeros <= t[at + 1])).any()
    assert (np.diff(zeros) >= 0).all()
    assert (np.abs(rl_current(zeros, **model)) < 1e-10).all()


@calm
@given(model=models(rate=st.floats(-30.0, 30.0)), cycles=st.floats(0.1, 12.0))
def test_growing_exponentials_too(model, cycles):
    end = 0.02 * cycles
    peak = peak_of(**model, t_end_s=end)
    least, most = sampled_peak(model, end)
    assert least * (1 - 1e-13) <= peak.magnitude_a <= most * (1 + 1e-13)


@calm
@given(model=models(least=1, most=1))
def test_one_exponential_has_its_peak_in_the_first_cycle(model):
    endless = peak_of(**model)
    least, most = sampled_peak(model, 0.4, points=20_001)
    assert least * (1 - 1e-13) <= endless.magnitude_a <= most * (1 + 1e-13)
    assert endless == peak_of(**model, t_end_s=10.0)
    assert endless.time_s <= 0.02 * (1 + 1e-12)


@settings(deadline=None, derandomize=True, max_examples=25)
@given(
    angle=st.floats(0.0, 6.28),
    offset=st.floats(-3.0, 3.0),
    second=st.floats(-2.0, 2.0),
    rate=st.floats(0.5, 300.0),
    other_rate=st.floats(0.5, 300.0),
)
def test_value_and_time_agree_with_forty_digits(angle, offset, second, rate, other_rate):
    model = {
        "cos_a": math.cos(angle),
        "sin_a": math.sin(angle),
        "offset_a": [offset, second],
        "decay_rate_per_s": [rate, other_rate],
        "omega_rad_per_s": OMEGA,
    }
    end = 0.1
    peak = peak_of(**model, t_end_s=end)
    with mpmath.workdps(40):
        omega, a, b = mpmath.mpf(OMEGA), mpmath.mpf(offset), mpmath.mpf(second)
        p, q = mpmath.mpf(rate), mpmath.mpf(other_rate)
        c, s = mpmath.mpf(model["cos_a"]), mpmath.mpf(model["sin_a"])

        def current(t):
            fading = a * mpmath.exp(-p * t) + b * mpmath.exp(-q * t)
            return c * mpmath.cos(omega * t) + s * mpmath.sin(omega * t) + fading

        def slope(t):
            fading = p * a * mpmath.exp(-p * t) + q * b * mpmath.exp(-q * t)
            return omega * (s * mpmath.cos(omega * t) - c * mpmath.sin(omega * t)) - fading

        # Independent of the library's search: bisect every change of sign of the slope on a dense grid.
        grid = np.linspace(0.0, end, 2001)
        rough = sampled_slope(grid, model)
        candidates = [mpmath.mpf(0), mpmath.mpf(end)]
        for left, right, at_left, at_right in zip(grid, grid[1:], rough, rough[1:], strict=False):
            if at_left * at_right < 0:
                candidates.append(mpmath.findroot(slope, (left, right), solver="anderson", tol=1e-60))
        best = max(candidates, key=lambda t: abs(current(t)))
        assert peak.magnitude_a == pytest.approx(float(abs(current(best))), rel=2e-14)
        # Unless a second peak is as large, the times agree as well.
        others = [t for t in candidates if abs(t - best) > 1e-9]
        if all(abs(current(t)) < abs(current(best)) * (1 - mpmath.mpf("1e-12")) for t in others):
            assert peak.time_s == pytest.approx(float(best), abs=1e-12)


def sampled_slope(t, model):
    return rl_current(t, **model, time_derivative=1)


def test_the_peak_lies_before_the_crest_while_the_offset_falls():
    # Crest of -cos at half a cycle, 10 ms; the falling offset draws the peak towards inception.
    peak = peak_of(cos_a=-1.0, sin_a=0.0, offset_a=1.0, decay_rate_per_s=31.4, omega_rad_per_s=OMEGA)
    assert peak.place == "inside"
    assert 0.0090 < peak.time_s < 0.0099
    at_crest = rl_current(
        0.01, cos_a=-1.0, sin_a=0.0, offset_a=1.0, decay_rate_per_s=31.4, omega_rad_per_s=OMEGA
    )
    assert peak.value_a > at_crest


def test_a_reverse_offset_gives_a_negative_peak():
    model = {"cos_a": 0.5, "sin_a": 1.0, "offset_a": -0.9, "decay_rate_per_s": 20.0, "omega_rad_per_s": OMEGA}
    turned = {**model, "cos_a": -0.5, "sin_a": -1.0, "offset_a": 0.9}
    peak, other = peak_of(**model), peak_of(**turned)
    assert peak.value_a < 0 < other.value_a
    assert peak.value_a == -other.value_a
    assert peak.time_s == other.time_s


def test_a_load_current_above_the_fault_current_is_the_peak_itself():
    # A limited fault current: the load of 5 A at inception is never reached again.
    peak = peak_of(cos_a=0.2, sin_a=0.9, offset_a=4.8, decay_rate_per_s=500.0, omega_rad_per_s=OMEGA)
    assert (peak.place, peak.time_s, peak.value_a) == ("start", 0.0, 5.0)


def test_a_short_window_cuts_the_peak_off():
    model = {"cos_a": -1.0, "sin_a": 0.0, "offset_a": 1.0, "decay_rate_per_s": 10.0, "omega_rad_per_s": OMEGA}
    peak = peak_of(**model, t_end_s=0.004)
    assert (peak.place, peak.time_s) == ("end", 0.004)
    assert peak.value_a == pytest.approx(float(rl_current(0.004, **model)), rel=1e-15)
    assert peak_of(**model, t_end_s=0.0).place == "start"


def test_of_equal_crests_the_first_is_named():
    nothing_decays = peak_of(
        cos_a=-1.0, sin_a=0.0, offset_a=1.0, decay_rate_per_s=0.0, omega_rad_per_s=OMEGA, t_end_s=0.2
    )
    assert nothing_decays.time_s == pytest.approx(0.01, rel=1e-12)
    assert nothing_decays.value_a == pytest.approx(2.0, rel=1e-15)
    no_offset = peak_of(cos_a=0.0, sin_a=1.0, offset_a=[], decay_rate_per_s=[], omega_rad_per_s=OMEGA)
    assert no_offset.time_s == pytest.approx(0.005, rel=1e-12)


@pytest.mark.parametrize(
    "model",
    [
        {"cos_a": -0.8, "sin_a": 0.6, "offset_a": [1.1], "decay_rate_per_s": [21.0]},
        {"cos_a": 0.9, "sin_a": 0.6, "offset_a": [-1.1], "decay_rate_per_s": [0.0]},
        {"cos_a": -0.8, "sin_a": 0.6, "offset_a": [1.1, -0.3], "decay_rate_per_s": [21.0, 90.0]},
    ],
)
def test_gradient_of_the_peak_agrees_with_differences(model):
    model = {**model, "omega_rad_per_s": OMEGA}
    # One cycle: beyond it, a decay rate about zero makes the peak jump to the first or the last cycle.
    peak = peak_of(**model, t_end_s=0.02)
    by_value, by_time = peak_gradient(peak, **model)
    count = len(model["offset_a"])
    flat = np.array([model["cos_a"], model["sin_a"], *model["offset_a"], *model["decay_rate_per_s"], OMEGA])

    def peak_at(values):
        return peak_of(
            cos_a=values[0],
            sin_a=values[1],
            offset_a=values[2 : 2 + count],
            decay_rate_per_s=values[2 + count : 2 + 2 * count],
            omega_rad_per_s=values[-1],
            t_end_s=0.02,
        )

    for index in range(flat.size):
        step = np.zeros_like(flat)
        step[index] = 1e-5 * max(1.0, abs(flat[index]))
        above, below = peak_at(flat + step), peak_at(flat - step)
        width = 2 * step[index]
        assert by_value[index] == pytest.approx((above.value_a - below.value_a) / width, rel=1e-7, abs=1e-9)
        assert by_time[index] == pytest.approx((above.time_s - below.time_s) / width, rel=1e-6, abs=1e-10)


def test_a_peak_at_the_edge_does_not_move_in_time():
    model = {"cos_a": -1.0, "sin_a": 0.0, "offset_a": 1.0, "decay_rate_per_s": 10.0, "omega_rad_per_s": OMEGA}
    by_value, by_time = peak_gradient(peak_of(**model, t_end_s=0.004), **model)
    assert not by_time.any()
    decay = math.exp(-0.04)
    expected = [math.cos(0.4 * math.pi), math.sin(0.4 * math.pi), decay, -0.004 * decay]
    np.testing.assert_allclose(by_value[:4], expected, rtol=1e-13)


@pytest.mark.parametrize(
    ("change", "code"),
    [
        ({"offset_a": [1.0, -0.5], "decay_rate_per_s": [10.0, 30.0]}, "window-without-end"),
        ({"decay_rate_per_s": -1.0}, "window-without-end"),
        ({"decay_rate_per_s": -1e6, "t_end_s": 0.1}, "growth-too-large"),
        ({"omega_rad_per_s": 0.0}, "no-frequency"),
        ({"cos_a": float("nan")}, "not-finite"),
        ({"t_end_s": -0.1}, "negative-window"),
        ({"t_end_s": float("nan")}, "negative-window"),
    ],
)
def test_what_has_no_largest_current_is_refused(change, code):
    model = {"cos_a": -1.0, "sin_a": 0.0, "offset_a": 1.0, "decay_rate_per_s": 10.0, "omega_rad_per_s": OMEGA}
    with pytest.raises(TheoryError) as caught:
        peak_of(**{**model, **change})
    assert caught.value.code == code
