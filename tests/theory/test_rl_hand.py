"""One fault calculated by hand, step by step, beside what the functions say of it."""

import math

import numpy as np
import pytest

from analyzer.theory.rl import RLFault

# A fault on one phase, driving voltage 11.6 kV to ground, 50 Hz. The loop has 0.42 ohm and 17.5 mH. It begins
# 35 degrees after the voltage's rising zero, while the load current stands at -180 A.
FAULT = RLFault(
    r_ohm=0.42,
    l_h=0.0175,
    frequency_hz=50.0,
    voltage_rms_v=11600.0,
    inception_angle_deg=35.0,
    prefault_current_a=-180.0,
)


def agrees(function_value, hand_value):
    return function_value == pytest.approx(hand_value, rel=1e-9, abs=0.0)


def test_impedance_and_decay():
    # w = 2 * 3.14159265358979 * 50 = 314.159265358979 rad/s
    assert agrees(FAULT.omega_rad_per_s, 314.159265358979)
    # X = w L = 314.159265358979 * 0.0175 = 5.49778714378214 ohm
    assert agrees(FAULT.x_ohm, 5.49778714378214)
    # Z = sqrt(0.42**2 + 5.49778714378214**2) = sqrt(0.1764 + 30.2256634783) = 5.51380662322648 ohm
    assert agrees(FAULT.impedance_magnitude_ohm, 5.51380662322648)
    # X/R = 5.49778714378214 / 0.42 = 13.0899693899575, phi = atan(13.0899693899575) = 85.631410190013 deg
    assert agrees(FAULT.x_over_r, 13.0899693899575)
    assert agrees(FAULT.impedance_angle_deg, 85.631410190013)
    # lambda = R / L = 0.42 / 0.0175 = 24 per second, tau = 1/24 s
    assert agrees(FAULT.decay_rate_per_s, 24.0)
    assert agrees(FAULT.time_constant_s, 0.0416666666666667)


def test_current_and_offset_at_inception():
    # I = 11600 / 5.51380662322648 = 2103.80972577745 A, crest sqrt(2) I = 2975.2362468469 A
    assert agrees(FAULT.symmetrical_rms_a, 2103.80972577745)
    assert agrees(FAULT.symmetrical_peak_a, 2975.2362468469)
    # alpha - phi = 35 - 85.631410190013 = -50.631410190013 deg; the sinusoid would start at
    # 2975.2362468469 * sin(-50.631410190013 deg) = -2300.0998737381 A
    assert agrees(FAULT.cos_a, -2300.0998737381)
    # and its sine part is 2975.2362468469 * cos(-50.631410190013 deg) = 1887.21257291848 A
    assert agrees(FAULT.sin_a, 1887.21257291848)
    # The inductance keeps the current at -180 A: A = -180 - (-2300.0998737381) = 2120.0998737381 A
    assert agrees(FAULT.offset_initial_a, 2120.0998737381)
    assert agrees(FAULT.current(0.0), -180.0)


def test_peak():
    # The offset is positive, so the peak is near the first positive crest of the sinusoid, where
    # w t = 90 + 50.631410190013 = 140.631410190013 deg = 2.45448113953843 rad, t = 0.00781285612166739 s.
    # The offset still falls there, so the slope is not zero:
    # slope = 314.159265358979 * 2975.2362468469 cos(w t - 50.631410190013 deg)
    #         - 24 * 2120.0998737381 exp(-24 t), and what it changes by per second
    #         = -314.159265358979**2 * 2975.2362468469 sin(w t - 50.631410190013 deg)
    #         + 24**2 * 2120.0998737381 exp(-24 t).
    w, crest, offset, turn = 314.159265358979, 2975.2362468469, 2120.0998737381, math.radians(50.631410190013)

    def slope_and_change(t):
        slope = w * crest * math.cos(w * t - turn) - 24 * offset * math.exp(-24 * t)
        change = -w * w * crest * math.sin(w * t - turn) + 576 * offset * math.exp(-24 * t)
        return slope, change

    # First step of slope / change to the instant without slope:
    slope, change = slope_and_change(2.45448113953843 / w)
    assert agrees(slope, -42182.6281576177)
    assert agrees(change, -292631664.485824)
    first_s = 0.00781285612166739 - 42182.6281576177 / 292631664.485824
    assert agrees(first_s, 0.00766870689491937)
    # Second step:
    slope, change = slope_and_change(first_s)
    assert slope == pytest.approx(-14.7191818730055, abs=1e-6)
    assert agrees(change, -292327104.105105)
    second_s = first_s - 14.7191818730055 / 292327104.105105
    # The third would move it by 2e-14 s.
    assert agrees(second_s, 0.00766865654314907)

    # The current there is 2975.2362468469 sin(w t - 50.631410190013 deg) + 2120.0998737381 exp(-24 t)
    # = 4735.88658389029 A; over the crest 4735.88658389029 / 2975.2362468469 = 1.59176824660875
    peak = FAULT.peak()
    assert agrees(peak.time_s, 0.00766865654314907)
    assert agrees(peak.value_a, 4735.88658389029)
    assert agrees(FAULT.kappa, 1.59176824660875)


def test_at_contact_parting_60_ms_after_inception():
    # Offset 2120.0998737381 * exp(-24 * 0.06) = 2120.0998737381 * 0.236927758682122 = 502.310511267017 A
    assert agrees(FAULT.offset(0.06), 502.310511267017)
    # in percent of the crest: 502.310511267017 / 2975.2362468469 = 16.8830462387435 %
    assert agrees(FAULT.offset_percent(0.06), 16.8830462387435)
    # Three cycles are over, so the sinusoid stands where it began: -2300.0998737381 + 502.310511267017
    assert agrees(FAULT.current(0.06), -1797.78936247108)
    # Asymmetrical RMS sqrt(2103.80972577745**2 + 502.310511267017**2) = 2162.94503212752 A
    assert agrees(FAULT.asymmetrical_rms(0.06), 2162.94503212752)


def test_joule_integral_until_contact_parting():
    # Sinusoid alone, three cycles:
    sinusoid = 2103.80972577745**2 * 0.06
    # Offset alone, its square decaying at 48 per second:
    offset = 2120.0998737381**2 * (1 - math.exp(-2.88)) / 48
    # Both together, twice their product; whole cycles, so the integral of exp(-24 t) (c cos wt + s sin wt) is
    # (24 c + w s) / (24**2 + w**2) * (1 - exp(-1.44)).
    c, s, w = -2300.0998737381, 1887.21257291848, 314.159265358979
    both = 2 * 2120.0998737381 * (24 * c + w * s) / (24**2 + w**2) * (1 - math.exp(-1.44))
    assert agrees(sinusoid + offset + both, 371471.223669809)
    assert agrees(FAULT.joule_integral(0.0, 0.06), 371471.223669809)
    assert agrees(np.sum(FAULT.joule_integral([0.0, 0.013], [0.013, 0.06])), 371471.223669809)
