"""Time to saturation, flux factor and linear image of an offset, against integration and published forms."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad

from analyzer.theory.ct import (
    flux_pu,
    linear_ct_offset,
    time_to_saturation_envelope_s,
    time_to_saturation_s,
    transient_flux_factor,
)

FIFTY = 2 * math.pi * 50

# First crossing of the flux of a fully offset 50 Hz current on a resistive burden, computed with mpmath/scipy
# from the closed form, to 1e-4; and the envelope -tau ln(1-(Ks-1)/(X/R)) (IEEE C37.110, form from memory).
CROSSINGS = [
    # X/R, Ks, crossing ms, envelope ms
    (15, 4, 12.1596, 10.65431976),
    (15, 8, 32.2114, 30.01385263),
    (15, 12, 71.2232, 63.10919265),
    (30, 10, 34.2022, 34.05994824),
    (40, 20, 89.4177, 82.04208342),
]


@pytest.mark.parametrize(("x_over_r", "ks", "crossing_ms", "envelope_ms"), CROSSINGS)
def test_crossing_and_envelope(x_over_r, ks, crossing_ms, envelope_ms):
    crossing = time_to_saturation_s(x_over_r=x_over_r, ks=ks, freq_hz=50)
    envelope = time_to_saturation_envelope_s(x_over_r=x_over_r, ks=ks, freq_hz=50)
    assert crossing == pytest.approx(crossing_ms * 1e-3, rel=1e-5)
    assert envelope == pytest.approx(envelope_ms * 1e-3, rel=1e-9)
    assert 0.1e-3 < crossing - envelope < 8.2e-3  # what leaving the ripple out costs


def test_flux_is_the_integral_of_the_secondary_voltage():
    x_over_r, psi, beta = 12.0, math.radians(130), math.radians(35)
    tau = x_over_r / FIFTY

    def current(t):
        return math.cos(FIFTY * t + psi) - math.cos(psi) * math.exp(-t / tau)

    for t in (1e-3, 13e-3, 0.11):
        area = quad(current, 0, t, epsabs=1e-13, limit=200)[0]
        expected = math.cos(beta) * FIFTY * area + math.sin(beta) * current(t)
        flux = flux_pu(t, x_over_r=x_over_r, freq_hz=50, current_angle_deg=130, burden_angle_deg=35)
        assert float(flux) == pytest.approx(expected, abs=1e-11)


@settings(deadline=None, derandomize=True, max_examples=60)
@given(
    x_over_r=st.floats(0.5, 80),
    share=st.floats(0.05, 1.2),
    remanence=st.floats(-0.9, 0.9),
    angle=st.floats(-180, 180),
    burden=st.floats(0, 60),
)
def test_crossing_is_the_first(x_over_r, share, remanence, angle, burden):
    ks = share * (1 + x_over_r)
    found = time_to_saturation_s(
        x_over_r=x_over_r,
        ks=ks,
        freq_hz=60,
        remanence_pu=remanence,
        current_angle_deg=angle,
        burden_angle_deg=burden,
    )
    horizon = min(found, 20 * x_over_r / (2 * math.pi * 60) + 0.05)
    t = np.linspace(0, horizon, 20001)
    kinds = {"x_over_r": x_over_r, "freq_hz": 60, "current_angle_deg": angle, "burden_angle_deg": burden}
    flux = remanence * ks + flux_pu(t, **kinds)
    assert np.abs(flux[:-1]).max() <= ks * (1 + 1e-9)
    if math.isfinite(found):
        at_end = abs(float(remanence * ks + flux_pu(found, **kinds)))
        assert at_end == pytest.approx(ks, rel=1e-8) or (found == 0 and at_end >= ks)


@pytest.mark.parametrize("burden_angle_deg", [0.0, 30.0])
@pytest.mark.parametrize("x_over_r", [5, 15, 40])
def test_flux_factor_is_the_limit_of_the_largest_flux(x_over_r, burden_angle_deg):
    # 1 + X/R: IEEE C37.110, from memory; with an inductive burden only its resistive share integrates.
    t = np.linspace(0, 30 * x_over_r / FIFTY, 400_001)
    largest = flux_pu(t, x_over_r=x_over_r, freq_hz=50, burden_angle_deg=burden_angle_deg).max()
    factor = transient_flux_factor(x_over_r=x_over_r, burden_angle_deg=burden_angle_deg)
    assert largest == pytest.approx(factor, rel=2e-5)


def test_core_larger_than_the_flux_factor_never_saturates():
    assert time_to_saturation_s(x_over_r=15, ks=16.001, freq_hz=50) == math.inf
    assert time_to_saturation_envelope_s(x_over_r=15, ks=16, freq_hz=50) == math.inf
    assert time_to_saturation_envelope_s(x_over_r=15, ks=0.9, freq_hz=50) == 0


def test_remanence_brings_saturation_forward_and_opposes_the_other_way():
    times = [
        time_to_saturation_s(x_over_r=20, ks=10, freq_hz=50, remanence_pu=r) for r in (-0.5, 0, 0.5, 0.9)
    ]
    assert times == sorted(times, reverse=True)
    assert len(set(times)) == 4
    envelope = [
        time_to_saturation_envelope_s(x_over_r=20, ks=10, freq_hz=50, remanence_pu=r) for r in (0, 0.5)
    ]
    # Ks (1 - 0.5) = 5: -tau ln(1 - 4/20)
    assert envelope[1] == pytest.approx(20 / FIFTY * math.log(20 / 16), rel=1e-12)
    assert envelope[1] < envelope[0]


def test_linear_offset_is_the_difference_of_two_exponentials():
    t, tau, ts = np.linspace(0, 0.5, 50), 0.045, 0.3
    expected = 7.0 * (ts * np.exp(-t / tau) - tau * np.exp(-t / ts)) / (ts - tau)
    found = linear_ct_offset(t, offset_a=7.0, time_constant_s=tau, ct_time_constant_s=ts)
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-14 * 7)
    assert found.min() < 0 < found[0]


def test_linear_offset_where_the_time_constants_meet():
    t, tau = np.linspace(0, 0.4, 40), 0.05
    found = linear_ct_offset(t, offset_a=1.0, time_constant_s=tau, ct_time_constant_s=tau * (1 + 1e-13))
    np.testing.assert_allclose(found, (1 - t / tau) * np.exp(-t / tau), rtol=0, atol=1e-12)
    equal = linear_ct_offset(t, offset_a=1.0, time_constant_s=tau, ct_time_constant_s=tau)
    np.testing.assert_allclose(equal, found, rtol=0, atol=1e-12)


def test_linear_offset_has_no_area_and_survives_extremes():
    area = quad(
        lambda t: float(linear_ct_offset(t, offset_a=1.0, time_constant_s=0.03, ct_time_constant_s=0.2)), 0, 8
    )[0]
    assert area == pytest.approx(0, abs=1e-8)  # no core passes direct current
    late = linear_ct_offset([50.0], offset_a=1.0, time_constant_s=10.0, ct_time_constant_s=0.01)
    assert np.isfinite(late).all()


@pytest.mark.parametrize(
    "wrong",
    [
        {"x_over_r": 0},
        {"x_over_r": math.nan},
        {"ks": 0},
        {"freq_hz": -50},
        {"remanence_pu": 1.0},
    ],
)
def test_values_out_of_range_are_refused(wrong):
    values = {"x_over_r": 10.0, "ks": 5.0, "freq_hz": 50.0, "remanence_pu": 0.0, **wrong}
    for function in (time_to_saturation_s, time_to_saturation_envelope_s):
        with pytest.raises(ValueError, match=next(iter(wrong))):
            function(**values)
    with pytest.raises(ValueError, match="time constants"):
        linear_ct_offset([0.0], offset_a=1, time_constant_s=0, ct_time_constant_s=1)
