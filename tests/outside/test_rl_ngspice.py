"""RL theory against the transient analysis of a circuit simulator.

Source: "ngspice 39.3 gear-4 reltol 1e-7, scripts/spice_cases.py S1 ... S8" (Debian package, run on
2026-12-01, the script not kept). Provenance: computed-by-library. Its largest deviation from the closed form
was found then to be 1.4e-7 to 9.1e-7 of the crest, and 3.7e-5 with the switch of S7.
"""

import math

import numpy as np
import pytest
from scipy.linalg import eigh

from analyzer.theory.rl import RLFault, peak_of, rl_current

# Voltage crest V, frequency Hz, R ohm, L H, inception angle deg, load current at inception A; then the first
# major peak A and its time ms; then instants s and currents A there; the relative tolerance.
SINGLE_LOOP = {
    "S1_50Hz_xr10_theta0": (
        (10000.0, 50.0, 0.09950371902099892, 0.0031673017476438053, 0.0, 0.0),
        (17367.72955, 9.447135968),
        {0.005: 9498.981821, 0.02: -4641.965907, 0.06: -8439.547633},
        2e-5,
    ),
    "S2_60Hz_xr17_theta0": (
        (10000.0, 60.0, 0.058722021951470346, 0.0026480050175460663, 0.0, 0.0),
        (18339.1251, 8.047118833),
        {0.005: 12578.3331, 0.02: 3880.307436, 0.06: 10369.78656},
        2e-5,
    ),
    "S3_50Hz_xr4.9_theta0": (
        (325.27, 50.0, 0.006499973870157563, 0.00010136060113813784, 0.0, 0.0),
        (15450.81621, 9.000864748),
        {0.005: 9117.814349, 0.02: -7086.566287, 0.06: -9596.933452},
        2e-5,
    ),
    "S4_60Hz_xr40_theta30": (
        (20000.0, 60.0, 0.04998438232040614, 0.005303507682458519, 30.0, 0.0),
        (17999.00634, 6.825081805),
        {0.005: 15736.18035, 0.02: 9389.651197, 0.06: 8685.002591},
        2e-5,
    ),
    "S5_50Hz_xr15_theta85": (
        (16330.0, 50.0, 0.053215208419019146, 0.0025408390402657023, 85.0, 0.0),
        (20792.4587, 5.061934548),
        {0.005: 20788.59422, 0.02: -144.5774286, 0.06: -302.2338305},
        2e-5,
    ),
    "S6_50Hz_xr1.732_theta120": (
        (325.27, 50.0, 0.0250000000819355, 0.00013783222370486998, 120.0, 0.0),
        (-7196.524021, 11.46770705),
        {0.005: 977.9008322, 0.02: 5484.093652, 0.06: 5633.734949},
        2e-5,
    ),
    "S7_prefault_load": (
        (10000.0, 50.0, 0.1, 0.00477464829275686, 55.800000000000395, 280.1681097399734),
        (9823.685418, 6.587005747),
        {0.0: 280.1678979, 0.005: 9020.634525, 0.05: 4643.704639},
        1e-4,
    ),
}


@pytest.mark.parametrize("case", SINGLE_LOOP)
def test_single_loop(case):
    (crest_v, frequency_hz, r_ohm, l_h, angle_deg, load_a), (peak_a, peak_ms), course, rel = SINGLE_LOOP[case]
    fault = RLFault(
        r_ohm=r_ohm,
        l_h=l_h,
        frequency_hz=frequency_hz,
        voltage_rms_v=crest_v / math.sqrt(2),
        inception_angle_deg=angle_deg,
        prefault_current_a=load_a,
    )
    peak = fault.peak()
    assert peak.value_a == pytest.approx(peak_a, rel=rel)
    assert 1000 * peak.time_s == pytest.approx(peak_ms, abs=0.003)
    np.testing.assert_allclose(fault.current(list(course)), list(course.values()), rtol=rel)


def test_two_time_constants():
    """S8: a source behind Rs, Ls feeds two unequal branches a and b in parallel, closed at voltage zero.

    The exponentials are found here from the circuit's equations M x' = -K x + v for the branch currents x.
    """
    crest_v, omega = 10000.0, 100 * math.pi
    rs, ls, ra, la, rb, lb = (
        0.05,
        0.0031830988618379067,
        0.02,
        0.0025464790894703256,
        0.4,
        0.0025464790894703256,
    )
    inductance = np.array([[ls + la, ls], [ls, ls + lb]])
    resistance = np.array([[rs + ra, rs], [rs, rs + rb]])
    rates, shapes = eigh(resistance, inductance)
    # "numpy eigenvalues of the same circuit", computed-by-library: 82.24540283 and 9.515654017 ms.
    np.testing.assert_allclose(1000 / rates, [82.24540283, 9.515654017], rtol=1e-6)

    phasors = np.linalg.solve(resistance + 1j * omega * inductance, np.full(2, crest_v))
    offsets = shapes.sum(axis=0) * (shapes.T @ inductance @ -phasors.imag)
    total = phasors.sum()
    model = {
        "cos_a": total.imag,
        "sin_a": total.real,
        "offset_a": offsets,
        "decay_rate_per_s": rates,
        "omega_rad_per_s": omega,
    }
    assert rl_current(0.0, **model) == pytest.approx(0.0, abs=1e-8)
    course = {0.01: 12284.6956, 0.03: 10773.32834, 0.1: -5360.109825}
    np.testing.assert_allclose(rl_current(list(course), **model), list(course.values()), rtol=2e-5)
    peak = peak_of(**model, t_end_s=0.2)
    assert peak.value_a == pytest.approx(12372.16159, rel=2e-5)
    assert 1000 * peak.time_s == pytest.approx(9.494005764, abs=0.003)
