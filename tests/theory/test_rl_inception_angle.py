"""The worst inception angle: a voltage zero without load, and never beaten with load."""

import cmath
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import minimize_scalar

from analyzer.theory.rl import RLFault, TheoryError, peak_of, worst_inception

calm = settings(deadline=None, derandomize=True, max_examples=60)
OMEGA = 120 * math.pi


def loop(x_over_r, angle_deg=0.0, prefault_a=0.0):
    return RLFault.from_x_over_r(
        x_over_r=x_over_r,
        symmetrical_rms_a=1000.0,
        voltage_rms_v=6000.0,
        frequency_hz=60.0,
        inception_angle_deg=angle_deg,
        prefault_current_a=prefault_a,
    )


def at_angle(x_over_r, angle_deg, phasor_a):
    instantaneous = math.sqrt(2) * (phasor_a * cmath.exp(1j * math.radians(angle_deg))).imag
    return loop(x_over_r, angle_deg, instantaneous)


@calm
@given(x_over_r=st.one_of(st.floats(0.3, 1e3), st.just(math.inf)))
def test_without_load_it_is_the_voltage_zero(x_over_r):
    worst = loop(x_over_r).worst_inception()
    assert worst.inception_angle_deg == pytest.approx(0.0, abs=1e-9)
    at_zero = loop(x_over_r).peak()
    assert worst.peak.value_a == pytest.approx(at_zero.value_a, rel=1e-13)
    assert worst.peak.time_s == pytest.approx(at_zero.time_s, rel=1e-9)


@pytest.mark.parametrize("x_over_r", [1.0, 3.0, 10.0, 40.0])
def test_the_angle_of_the_largest_offset_is_not_the_worst(x_over_r):
    largest_offset = loop(x_over_r, loop(x_over_r).impedance_angle_deg - 90.0)
    assert abs(largest_offset.offset_initial_a) == pytest.approx(largest_offset.symmetrical_peak_a, rel=1e-14)
    assert largest_offset.peak().magnitude_a < loop(x_over_r).worst_inception().peak.magnitude_a * (1 - 1e-5)


@calm
@given(
    x_over_r=st.one_of(st.floats(0.3, 200.0), st.just(math.inf)),
    size=st.floats(0.0, 1500.0),
    angle=st.floats(-math.pi, math.pi),
    tried_deg=st.floats(-180.0, 180.0),
)
def test_no_angle_beats_it_and_it_is_attained(x_over_r, size, angle, tried_deg):
    load = cmath.rect(size, angle)
    worst = loop(x_over_r).worst_inception(prefault_current_phasor_a=load)
    attained = at_angle(x_over_r, worst.inception_angle_deg, load).peak()
    assert attained.magnitude_a == pytest.approx(worst.peak.magnitude_a, rel=1e-11)
    tried = at_angle(x_over_r, tried_deg, load).peak()
    assert tried.magnitude_a <= worst.peak.magnitude_a * (1 + 1e-11)
    assert worst.peak.value_a > 0
    assert -180.0 < worst.inception_angle_deg <= 180.0


@pytest.mark.parametrize("load", [0j, 150 + 0j, 300 - 120j, -200 + 50j, 900j])
@pytest.mark.parametrize("x_over_r", [2.0, 15.0])
def test_agrees_with_an_optimiser_over_the_angle(x_over_r, load):
    def smallest(angle_deg):
        return -at_angle(x_over_r, angle_deg, load).peak().magnitude_a

    coarse = min(np.arange(-90.0, 90.0, 5.0), key=smallest)
    found = minimize_scalar(
        smallest, bounds=(coarse - 5.0, coarse + 5.0), method="bounded", options={"xatol": 1e-7}
    )
    worst = loop(x_over_r).worst_inception(prefault_current_phasor_a=load)
    assert worst.peak.magnitude_a == pytest.approx(-found.fun, rel=1e-10)
    # Half a turn on the peak is the same and negative; the maximum is flat, hence the tolerance.
    assert math.remainder(worst.inception_angle_deg - found.x, 180.0) == pytest.approx(0.0, abs=1e-3)


@calm
@given(
    first=st.complex_numbers(max_magnitude=3.0),
    second=st.complex_numbers(max_magnitude=3.0),
    rates=st.tuples(st.floats(0.0, 400.0), st.floats(0.0, 400.0)),
    end=st.floats(0.001, 0.15),
    tried=st.floats(-math.pi, math.pi),
)
def test_two_exponentials(first, second, rates, end, tried):
    model = {"decay_rate_per_s": list(rates), "omega_rad_per_s": OMEGA, "t_end_s": end}
    phasor = 1.0 - 0.4j
    worst = worst_inception(fault_a=phasor, offset_a=[first, second], **model)

    def peak_at(angle):
        turned = math.sqrt(2) * np.array([phasor, first, second]) * cmath.exp(1j * angle)
        return peak_of(cos_a=turned[0].imag, sin_a=turned[0].real, offset_a=turned[1:].imag, **model)

    attained = peak_at(math.radians(worst.inception_angle_deg))
    assert attained.magnitude_a == pytest.approx(worst.peak.magnitude_a, rel=1e-11)
    assert peak_at(tried).magnitude_a <= worst.peak.magnitude_a * (1 + 1e-11)


def test_a_load_larger_than_any_fault_current_is_the_worst_at_its_own_crest():
    # 2 kA of load at 30 degrees before a fault of 1 kA whose offset is gone in a fraction of a cycle.
    worst = loop(0.3).worst_inception(prefault_current_phasor_a=cmath.rect(2000.0, math.radians(30.0)))
    assert worst.peak.place == "start"
    assert worst.peak.value_a == pytest.approx(math.sqrt(2) * 2000.0, rel=1e-14)
    assert worst.inception_angle_deg == pytest.approx(60.0, abs=1e-9)


def test_what_has_no_answer_is_refused():
    with pytest.raises(TheoryError) as caught:
        worst_inception(fault_a=1.0, offset_a=[1.0, 2.0], decay_rate_per_s=[1.0, 2.0], omega_rad_per_s=OMEGA)
    assert caught.value.code == "window-without-end"
    with pytest.raises(TheoryError) as caught:
        loop(10.0).worst_inception(prefault_current_phasor_a=complex(math.nan, 0.0))
    assert caught.value.code == "not-finite"
