"""The closed form against the circuit's law and against arithmetic of forty digits."""

import pickle

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.errors import FaultassayError
from analyzer.theory.rl import (
    RLFault,
    TheoryError,
    asymmetrical_rms,
    joule_integral,
    offset_current,
    rl_current,
    rl_current_gradient,
)

calm = settings(deadline=None, derandomize=True, max_examples=60)
TWO = {
    "cos_a": -3.1,
    "sin_a": 1.7,
    "offset_a": [2.2, 0.9],
    "decay_rate_per_s": [11.0, 105.0],
    "omega_rad_per_s": 314.0,
}
WITHOUT_DECAY = {
    "cos_a": -3.1,
    "sin_a": 0.4,
    "offset_a": 3.1,
    "decay_rate_per_s": 0.0,
    "omega_rad_per_s": 377.0,
}


@st.composite
def faults(draw):
    return RLFault(
        r_ohm=draw(st.one_of(st.just(0.0), st.floats(1e-4, 20.0))),
        l_h=draw(st.floats(1e-4, 0.1)),
        frequency_hz=draw(st.sampled_from([16.7, 50.0, 60.0])),
        voltage_rms_v=draw(st.floats(100.0, 4e5)),
        inception_angle_deg=draw(st.floats(-360.0, 360.0)),
        prefault_current_a=draw(st.floats(-3e3, 3e3)),
    )


def exact_current(t, parameters):
    """The formula in arithmetic of many digits; parameters in the order of the gradient."""
    count = (len(parameters) - 3) // 2
    cos_a, sin_a, *rest = parameters
    offsets, rates, omega = rest[:count], rest[count : 2 * count], rest[-1]
    value = cos_a * mpmath.cos(omega * t) + sin_a * mpmath.sin(omega * t)
    return value + sum(a * mpmath.exp(-rate * t) for a, rate in zip(offsets, rates, strict=True))


def in_gradient_order(model):
    offsets, rates = np.atleast_1d(model["offset_a"]), np.atleast_1d(model["decay_rate_per_s"])
    values = [model["cos_a"], model["sin_a"], *offsets, *rates, model["omega_rad_per_s"]]
    return [mpmath.mpf(float(value)) for value in values]


@calm
@given(fault=faults(), t=st.floats(0.0, 0.3))
def test_obeys_the_circuit_law_and_starts_at_the_load_current(fault, t):
    current = fault.current(t)
    slope = rl_current(
        t,
        cos_a=fault.cos_a,
        sin_a=fault.sin_a,
        offset_a=fault.offset_initial_a,
        decay_rate_per_s=fault.decay_rate_per_s,
        omega_rad_per_s=fault.omega_rad_per_s,
        time_derivative=1,
    )
    crest = np.sqrt(2) * fault.voltage_rms_v
    driving = crest * np.sin(fault.omega_rad_per_s * t + np.radians(fault.inception_angle_deg))
    scale = crest + abs(fault.r_ohm * fault.prefault_current_a) + fault.r_ohm * fault.symmetrical_peak_a
    assert fault.l_h * slope + fault.r_ohm * current == pytest.approx(driving, abs=1e-12 * scale)
    assert fault.current(0.0) == pytest.approx(
        fault.prefault_current_a, abs=1e-14 * (fault.symmetrical_peak_a + 3e3)
    )


@pytest.mark.parametrize("model", [TWO, WITHOUT_DECAY])
@pytest.mark.parametrize("derivative", [0, 1, 2, 3])
def test_value_and_time_derivatives_agree_with_many_digits(model, derivative):
    t = np.array([0.0, 0.0033, 0.021])
    got = rl_current(t, **model, time_derivative=derivative)
    with mpmath.workdps(40):
        parameters = in_gradient_order(model)
        exact = [float(mpmath.diff(lambda x: exact_current(x, parameters), x, derivative)) for x in t]
    np.testing.assert_allclose(got, exact, rtol=0, atol=1e-14 * 7 * model["omega_rad_per_s"] ** derivative)


@pytest.mark.parametrize("model", [TWO, WITHOUT_DECAY])
@pytest.mark.parametrize("derivative", [0, 1, 2])
def test_gradient_agrees_with_many_digits(model, derivative):
    t = np.array([0.0, 0.0033, 0.021])
    got = rl_current_gradient(t, **model, time_derivative=derivative)
    parameters = in_gradient_order(model)
    assert got.shape == (t.size, len(parameters))

    def of_one_parameter(index, x, value):
        changed = [*parameters[:index], value, *parameters[index + 1 :]]
        return mpmath.diff(lambda s: exact_current(s, changed), x, derivative)

    with mpmath.workdps(60):
        for row, x in zip(got, t, strict=True):
            for index, entry in enumerate(row):
                exact = mpmath.diff(
                    lambda value, at=x, k=index: of_one_parameter(k, at, value), parameters[index]
                )
                assert entry == pytest.approx(float(exact), rel=1e-12, abs=1e-12 * 314.0**derivative)


def test_exponentials_add_and_none_are_needed():
    t = np.linspace(0.0, 0.1, 50)
    sinusoid = rl_current(t, cos_a=-3.1, sin_a=1.7, offset_a=[], decay_rate_per_s=[], omega_rad_per_s=314.0)
    first = offset_current(t, offset_a=2.2, decay_rate_per_s=11.0)
    second = offset_current(t, offset_a=0.9, decay_rate_per_s=105.0)
    np.testing.assert_allclose(rl_current(t, **TWO), sinusoid + first + second, rtol=0, atol=1e-14)
    np.testing.assert_allclose(
        asymmetrical_rms(t, symmetrical_rms_a=2.5, offset_a=[2.2, 0.9], decay_rate_per_s=[11.0, 105.0]),
        np.sqrt(2.5**2 + (first + second) ** 2),
        rtol=1e-14,
    )


def test_shapes_follow_the_time():
    assert rl_current(0.01, **TWO).shape == ()
    assert rl_current(np.zeros((2, 3)), **TWO).shape == (2, 3)
    assert rl_current_gradient(np.zeros((2, 3)), **TWO).shape == (2, 3, 7)
    assert joule_integral(np.zeros((2, 1)), np.full(3, 0.1), **TWO).shape == (2, 3)


@pytest.mark.parametrize("model", [TWO, WITHOUT_DECAY])
@pytest.mark.parametrize(("start", "end"), [(0.0, 0.06), (0.013, 0.0131), (0.004, 0.35)])
def test_joule_integral_agrees_with_quadrature(model, start, end):
    with mpmath.workdps(30):
        parameters = in_gradient_order(model)
        pieces = mpmath.linspace(start, end, 2 + int(200 * (end - start)))
        exact = mpmath.quad(lambda x: exact_current(x, parameters) ** 2, pieces)
    assert joule_integral(start, end, **model) == pytest.approx(float(exact), abs=1e-14 * 60 * (end - start))


@calm
@given(fault=faults(), cuts=st.lists(st.floats(0.0, 0.3), min_size=3, max_size=3).map(sorted))
def test_joule_integral_adds_up_and_turns_with_its_limits(fault, cuts):
    first, middle, last = cuts
    whole = fault.joule_integral(first, last)
    largest = fault.peak().magnitude_a + fault.symmetrical_peak_a
    slack = 1e-13 * largest**2 * (last - first) + 1e-12 * largest**2 / fault.omega_rad_per_s * 1e-3
    assert fault.joule_integral(first, middle) + fault.joule_integral(middle, last) == pytest.approx(
        whole, abs=slack
    )
    assert fault.joule_integral(last, first) == pytest.approx(-whole, abs=slack)
    assert whole >= -slack


def test_full_offset_without_decay_carries_three_times_the_heat():
    # i = Ihat (1 - cos wt): mean square over whole cycles Ihat² (1 + 1/2) = 3 I².
    model = {"cos_a": -1.0, "sin_a": 0.0, "offset_a": 1.0, "decay_rate_per_s": 0.0}
    assert joule_integral(0.0, 0.04, **model, omega_rad_per_s=100 * np.pi) == pytest.approx(
        1.5 * 0.04, rel=1e-14
    )
    assert asymmetrical_rms(
        0.0, symmetrical_rms_a=np.sqrt(0.5), offset_a=1.0, decay_rate_per_s=0.0
    ) == pytest.approx(np.sqrt(1.5), rel=1e-15)


@pytest.mark.parametrize(
    ("change", "code"),
    [
        ({"offset_a": [1.0, 2.0, 3.0]}, "unpaired-exponentials"),
        ({"offset_a": [[1.0, 2.0]]}, "unpaired-exponentials"),
        ({"decay_rate_per_s": [11.0, float("nan")]}, "not-finite"),
        ({"offset_a": [float("inf"), 1.0]}, "not-finite"),
    ],
)
def test_what_has_no_meaning_is_refused(change, code):
    with pytest.raises(TheoryError) as caught:
        rl_current(0.0, **{**TWO, **change})
    assert caught.value.code == code
    assert isinstance(caught.value, FaultassayError)
    assert isinstance(caught.value, ValueError)
    assert pickle.loads(pickle.dumps(caught.value)).code == code


@pytest.mark.parametrize("omega", [0.0, -314.0, float("inf"), float("nan")])
def test_an_integral_needs_a_frequency(omega):
    with pytest.raises(TheoryError, match="angular frequency"):
        joule_integral(0.0, 0.1, **{**TWO, "omega_rad_per_s": omega})
