"""The first sample record calculated by hand, step by step, and what `examine` says of it.

Every number below is plain arithmetic on the round values of its scenario; nothing is taken from the forge.
"""

from __future__ import annotations

import math
from functools import cache
from pathlib import Path

import pytest

from analyzer import examine, read
from analyzer.findings import Event

RECORD = Path(__file__).resolve().parents[1] / "sample_records" / "01-plain-ag.cfg"

# 1. From the source through half the line to the fault:
#    Z1 = 0.2 + j2 + (1 + j4)/2 = 0.7 + j4 ohm,  Z0 = 0.4 + j4 + (3 + j12)/2 = 1.9 + j10 ohm.
R1_OHM, X1_OHM = 0.7, 4.0
R0_OHM, X0_OHM = 1.9, 10.0
# 2. Loop of a phase-to-ground fault: (2 Z1 + Z0)/3 = (3.3 + j18)/3 = 1.1 + j6 ohm.
R_OHM, X_OHM = 1.1, 6.0
# 3. Its magnitude: sqrt(1.21 + 36) = sqrt(37.21) = 6.1 ohm.
Z_OHM = 6.1
# 4. Symmetrical current: 12 200 V / 6.1 ohm = 2000 A.
CURRENT_RMS_A = 2000.0
# 5. It lags by atan(6/1.1) = 79.611 degrees, since tan(79.611 deg) = 5.4545.
LAG_DEG = 79.611
# 6. Time constant: X/(omega R) = 6/(314.159 * 1.1) = 6/345.575 = 0.017362 s.
TIME_CONSTANT_S = 0.017362
# 7. Offset: at a rising voltage zero the symmetrical current would start at sqrt2 2000 sin(-79.611 deg) =
#    -2828.43 * 60/61 = -2782.1 A; no current flowed before, so the offset is +2782.1 A.
OFFSET_A = 2782.1
# 8. Peak: i = 2828.43 sin(wt - 79.611 deg) + 2782.1 exp(-t/17.362 ms). Around t = 9.1 ms, i.e. 163.8 deg:
#    t = 9.0 ms: 2828.43 sin(82.389 deg) = 2803.5,  2782.1 exp(-0.51837) = 1656.7,  sum 4460.2
#    t = 9.1 ms: 2828.43 sin(84.189 deg) = 2813.9,  2782.1 exp(-0.52413) = 1647.2,  sum 4461.1
#    t = 9.2 ms: 2828.43 sin(85.989 deg) = 2821.5,  2782.1 exp(-0.52989) = 1637.7,  sum 4459.2
PEAK_A, PEAK_AFTER_S = 4461.1, 0.0091
# 9. The fault starts at the first rising zero of va from 0.1 s on. va = sqrt2 12200 cos(100 pi t) rises
#    through zero three quarters into each cycle of 20 ms: 5 * 20 + 15 = 115 ms.
INCEPTION_S = 0.115


@cache
def _event() -> Event:
    (event,) = examine(read(RECORD)).events
    return event


def test_the_steps_themselves():
    """Each written number from the one before, by another way than the comment's where there is one."""
    assert math.isclose(R_OHM, (2 * R1_OHM + R0_OHM) / 3)
    assert math.isclose(X_OHM, (2 * X1_OHM + X0_OHM) / 3)
    assert math.isclose(math.hypot(R_OHM, X_OHM), Z_OHM)
    assert math.isclose(CURRENT_RMS_A * Z_OHM, 12_200)
    assert math.degrees(math.atan2(X_OHM, R_OHM)) == pytest.approx(LAG_DEG, abs=5e-4)
    assert X_OHM / (2 * math.pi * 50 * R_OHM) == pytest.approx(TIME_CONSTANT_S, abs=5e-7)
    assert math.sqrt(2) * CURRENT_RMS_A * 60 / 61 == pytest.approx(OFFSET_A, abs=0.05)

    def current(after_s: float) -> float:
        wave = math.sin(2 * math.pi * 50 * after_s - math.radians(LAG_DEG))
        return math.sqrt(2) * CURRENT_RMS_A * wave + OFFSET_A * math.exp(-after_s / TIME_CONSTANT_S)

    assert current(PEAK_AFTER_S) == pytest.approx(PEAK_A, abs=0.1)
    assert current(PEAK_AFTER_S) > max(current(PEAK_AFTER_S - 1e-4), current(PEAK_AFTER_S + 1e-4))


def test_kind_and_loop():
    event = _event()
    assert (event.kind, event.fault_type, event.direction) == ("fault", "AG", "forward")
    assert event.verdict == "follows-theory"
    total = event.impedance.total
    # Noise of 0.5 A in 2000 A and 2 V in 12 200 V over nine cycles leaves some 1e-5; 0.1 % is ample.
    assert total.magnitude_ohm.value == pytest.approx(Z_OHM, rel=1e-3)
    assert total.angle_deg.value == pytest.approx(LAG_DEG, abs=0.06)


def test_inception():
    event = _event()
    # A start at voltage zero has no slope: it is seen to second order only, a quarter of a sample here.
    assert event.inception.time_s.value == pytest.approx(INCEPTION_S, abs=0.25 / 4800)
    assert event.inception.voltage_angle_deg.value == pytest.approx(0.0, abs=360 * 50 * 0.25 / 4800)


def test_current_and_angle():
    phase = _event().phases["A"]
    assert phase.symmetrical_rms_a.value == pytest.approx(CURRENT_RMS_A, rel=1e-3)
    assert phase.angle_deg.value == pytest.approx(-LAG_DEG, abs=0.06)


def test_decay():
    (decay,) = _event().decay
    assert decay.time_constant_s.value == pytest.approx(TIME_CONSTANT_S, rel=1e-3)
    assert decay.x_over_r.value == pytest.approx(X_OHM / R_OHM, rel=1e-3)


def test_offset_and_peak():
    phase = _event().phases["A"]
    # A quarter of a sample is 0.3 % of the time constant, and so of the offset.
    assert phase.dc_initial_a.value == pytest.approx(OFFSET_A, rel=3e-3)
    assert phase.peak.model_a.value == pytest.approx(PEAK_A, rel=1e-3)
    # Samples are 0.21 ms apart: the largest one is up to 0.1 ms, hence up to 2 A, from the crest.
    assert phase.peak.measured_a == pytest.approx(PEAK_A, abs=2.0 + 4 * 0.5)
    assert phase.peak.measured_time_s == pytest.approx(INCEPTION_S + PEAK_AFTER_S, abs=2 / 4800)
