"""What a linear current transformer does to a fitted time constant, against values computed independently.

Source: check values CV285 to CV314 of 2026-12-01, closed form with mpmath and scipy (scripts not kept);
provenance: computed-by-library. A fully offset 50 Hz current through the transformer, five cycles at 64
samples per cycle; least squares of a sinusoid and one exponential, without and with a constant. Stated to
0.05 in per cent; we agree to 1e-3, with the sinusoid's own transient (1 - Re G) exp(-t/Ts) in the secondary.
"""

import numpy as np
import pytest
from scipy.optimize import minimize_scalar

from analyzer.forge.instruments.ct import CurrentTransformer, transform_current
from analyzer.forge.instruments.linear import Tones

# tau s, Ts s: error of the fitted time constant in per cent, without and with a constant in the model
BIAS = {
    (0.016, 0.06): (-42.38539107, -23.23086945),
    (0.016, 0.5): (-10.37432902, -0.7943698841),
    (0.016, 1): (-5.638295746, -0.2112473389),
    (0.016, 3): (-1.997361501, -0.02444756347),
    (0.016, 10): (-0.6128005639, -0.002231632586),
    (0.045, 0.06): (-61.24676532, -37.36249404),
    (0.045, 0.5): (-17.90952022, -1.797312726),
    (0.045, 1): (-9.835295407, -0.4939684689),
    (0.045, 3): (-3.503881476, -0.05843970634),
    (0.045, 10): (-1.076817153, -0.005375676097),
    (0.12, 0.06): (-75.31211743, -61.0115232),
    (0.12, 0.5): (-26.31048501, -6.023466829),
    (0.12, 1): (-15.07731697, -1.801148765),
    (0.12, 3): (-5.567285794, -0.2250492941),
    (0.12, 10): (-1.735592908, -0.02108593456),
}


def fitted_bias(current, t, tau, *, constant):
    """Relative error, in per cent, of the time constant that least squares finds."""
    omega = 2 * np.pi * 50

    def cost(log_tau):
        columns = [np.cos(omega * t), np.sin(omega * t), np.exp(-t / np.exp(log_tau))]
        if constant:
            columns.append(np.ones_like(t))
        basis = np.stack(columns, axis=1)
        return float(np.sum((current - basis @ np.linalg.lstsq(basis, current, rcond=None)[0]) ** 2))

    start = np.log(tau)
    found = minimize_scalar(
        cost, bounds=(start - 2.5, start + 0.5), method="bounded", options={"xatol": 1e-9}
    )
    return 100 * (np.exp(found.x) / tau - 1)


@pytest.mark.parametrize(("tau", "ct_tau"), BIAS)
def test_bias_of_the_fitted_time_constant(tau, ct_tau):
    rate = 64 * 50 * 8.0
    t = np.arange(64 * 5 * 8 + 1) / rate
    ct = CurrentTransformer.with_time_constant(ct_tau, ratio=100, winding_ohm=0.5, burden_ohm=1.0)
    quiet = Tones(freqs_hz=np.array([50.0]), amplitudes=np.zeros((1, 1)))
    primary = (np.exp(-t / tau) - np.cos(2 * np.pi * 50 * t))[None, :]
    secondary = transform_current(primary, ct, sample_rate_hz=rate, tones=quiet).secondary_a[0]
    samples, instants = secondary[:-1:8], t[:-1:8]
    for constant, expected in zip((False, True), BIAS[tau, ct_tau], strict=True):
        assert fitted_bias(samples, instants, tau, constant=constant) == pytest.approx(expected, abs=1e-3)
