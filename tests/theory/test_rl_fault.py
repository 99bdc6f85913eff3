"""The class: its parameters, its limits, its refusals."""

import doctest
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.theory import closed_form, factors, peak, rl
from analyzer.theory.rl import RLFault, TheoryError

calm = settings(deadline=None, derandomize=True, max_examples=60)
STUDY = {
    "symmetrical_rms_a": 12e3,
    "voltage_rms_v": 63.5e3,
    "frequency_hz": 50.0,
    "inception_angle_deg": 20.0,
    "prefault_current_a": 350.0,
}
PHYSICAL = {
    "r_ohm": 0.5,
    "l_h": 0.02,
    "frequency_hz": 50.0,
    "voltage_rms_v": 63.5e3,
    "inception_angle_deg": 20.0,
    "prefault_current_a": 350.0,
}


@calm
@given(x_over_r=st.floats(1e-3, 1e6), current=st.floats(1.0, 1e5))
def test_study_values_come_back(x_over_r, current):
    fault = RLFault.from_x_over_r(**{**STUDY, "symmetrical_rms_a": current}, x_over_r=x_over_r)
    assert fault.x_over_r == pytest.approx(x_over_r, rel=1e-13)
    assert fault.symmetrical_rms_a == pytest.approx(current, rel=1e-13)
    assert fault.impedance_angle_deg == pytest.approx(math.degrees(math.atan(x_over_r)), rel=1e-13)
    assert fault.time_constant_s * fault.decay_rate_per_s == pytest.approx(1.0, rel=1e-15)
    assert fault.time_constant_s == pytest.approx(x_over_r / (100 * math.pi), rel=1e-13)


def test_without_resistance_nothing_decays():
    fault = RLFault.from_x_over_r(**{**STUDY, "inception_angle_deg": 0.0}, x_over_r=math.inf)
    assert fault.r_ohm == 0.0
    assert (fault.x_over_r, fault.time_constant_s, fault.decay_rate_per_s) == (math.inf, math.inf, 0.0)
    assert fault.impedance_angle_deg == 90.0
    np.testing.assert_array_equal(fault.offset([0.0, 1.0, 1000.0]), fault.offset_initial_a)
    # At voltage zero the sinusoid starts at its negative crest; the load current comes on top.
    assert fault.offset_initial_a == pytest.approx(math.sqrt(2) * 12e3 + 350.0, rel=1e-14)
    assert fault.kappa == pytest.approx(2.0 + 350.0 / fault.symmetrical_peak_a, rel=1e-14)
    assert fault.joule_integral(0.0, 0.02) > 0


@pytest.mark.parametrize("angle_deg", [0.0, 20.0, 90.0, -135.0])
def test_a_vanishing_resistance_is_no_special_case(angle_deg):
    limit = RLFault(**{**PHYSICAL, "r_ohm": 0.0, "inception_angle_deg": angle_deg})
    near = RLFault(**{**PHYSICAL, "r_ohm": 1e-9, "inception_angle_deg": angle_deg})
    t = np.linspace(0.0, 0.1, 101)
    scale = limit.symmetrical_peak_a
    np.testing.assert_allclose(near.current(t), limit.current(t), rtol=0, atol=1e-8 * scale)
    np.testing.assert_allclose(near.asymmetrical_rms(t), limit.asymmetrical_rms(t), rtol=1e-8)
    assert near.peak().value_a == pytest.approx(limit.peak().value_a, rel=1e-8)
    assert near.joule_integral(0.0, 0.1) == pytest.approx(limit.joule_integral(0.0, 0.1), rel=1e-8)
    assert near.worst_inception().peak.value_a == pytest.approx(
        limit.worst_inception().peak.value_a, rel=1e-8
    )


@calm
@given(angle_deg=st.floats(-180.0, 180.0), load=st.floats(-500.0, 500.0))
def test_half_a_turn_reverses_everything(angle_deg, load):
    one = RLFault(**{**PHYSICAL, "inception_angle_deg": angle_deg, "prefault_current_a": load})
    other = RLFault(**{**PHYSICAL, "inception_angle_deg": angle_deg + 180.0, "prefault_current_a": -load})
    t = np.linspace(0.0, 0.1, 101)
    np.testing.assert_allclose(one.current(t), -other.current(t), rtol=0, atol=1e-12 * one.symmetrical_peak_a)
    assert one.peak().magnitude_a == pytest.approx(other.peak().magnitude_a, rel=1e-13)


def test_offset_percent_is_of_the_crest_and_has_no_sign():
    fault = RLFault(**{**PHYSICAL, "inception_angle_deg": 150.0, "prefault_current_a": 0.0})
    assert fault.offset(0.03) < 0
    expected = -100 * fault.offset(0.03) / fault.symmetrical_peak_a
    assert fault.offset_percent(0.03) == pytest.approx(float(expected), rel=1e-15)


def test_the_load_current_flows_on():
    fault = RLFault(**PHYSICAL)
    assert fault.current(0.0) == pytest.approx(350.0, abs=1e-9)
    assert fault.current(1e-9) == pytest.approx(350.0, abs=0.01)


def test_a_peak_until_clearing():
    fault = RLFault(**PHYSICAL)
    assert fault.peak(t_end_s=0.002).place == "end"
    assert fault.peak(t_end_s=0.002).magnitude_a < fault.peak().magnitude_a
    assert fault.peak(t_end_s=0.08) == fault.peak()


@pytest.mark.parametrize("t", [-1e-9, [0.0, -0.01], float("nan")])
@pytest.mark.parametrize("what", ["current", "offset", "offset_percent", "asymmetrical_rms"])
def test_before_inception_is_another_circuit(what, t):
    with pytest.raises(TheoryError) as caught:
        getattr(RLFault(**PHYSICAL), what)(t)
    assert caught.value.code == "before-inception"


@pytest.mark.parametrize(
    ("name", "value"),
    [
        ("r_ohm", -1e-9),
        ("r_ohm", math.inf),
        ("l_h", 0.0),
        ("l_h", math.nan),
        ("frequency_hz", 0.0),
        ("voltage_rms_v", -1.0),
        ("inception_angle_deg", math.nan),
        ("prefault_current_a", math.inf),
    ],
)
def test_impossible_parameters_are_named(name, value):
    with pytest.raises(TheoryError) as caught:
        RLFault(**{**PHYSICAL, name: value})
    assert caught.value.where == name
    assert str(value) in caught.value.message


@pytest.mark.parametrize(
    ("name", "value"),
    [("x_over_r", 0.0), ("x_over_r", math.nan), ("symmetrical_rms_a", 0.0), ("voltage_rms_v", -1.0)],
)
def test_impossible_study_values_are_named(name, value):
    with pytest.raises(TheoryError) as caught:
        RLFault.from_x_over_r(**{"x_over_r": 10.0, **STUDY, name: value})
    assert caught.value.where == name


@pytest.mark.parametrize("module", [closed_form, factors, peak, rl])
def test_examples_in_the_docstrings(module):
    result = doctest.testmod(module)
    assert result.attempted > 0
    assert result.failed == 0
