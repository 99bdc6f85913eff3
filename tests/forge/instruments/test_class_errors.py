"""Accuracy classes: the standard's limits, draws within them, and their effect on the fundamental."""

import numpy as np
import pytest

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.class_errors import (
    ErrorsByClass,
    TransformerError,
    apply_errors,
    class_limits,
    draw_errors,
)
from analyzer.forge.instruments.linear import fit_tones

# IEC 61869-2:2012 Tables 201, 205, 206 and 61869-3:2011 Tables 301, 302, from memory: %, minutes
FROM_MEMORY = [
    ("5P", "ct", 1.0, 60),
    ("10P", "ct", 3.0, None),
    ("TPX", "ct", 0.5, 30),
    ("TPY", "ct", 1.0, 60),
    ("TPZ", "ct", 1.0, 18),
    ("0.2", "ct", 0.2, 10),
    ("0.5", "ct", 0.5, 30),
    ("3P", "vt", 3.0, 120),
    ("6P", "vt", 6.0, 240),
    ("0.2", "vt", 0.2, 10),
    ("0.5", "vt", 0.5, 20),
]
# IEC 61869-2 Table 201 as listed at https://procitec.in/?p=242: % of rated current, ratio error in %
LISTED = {
    "1": {5: 3, 20: 1.5, 100: 1, 120: 1},
    "0.5": {5: 1.5, 20: 0.75, 100: 0.5, 120: 0.5},
    "0.2": {5: 0.75, 20: 0.35, 100: 0.2, 120: 0.2},
    "0.1": {5: 0.4, 20: 0.2, 100: 0.1, 120: 0.1},
}


@pytest.mark.parametrize(("name", "kind", "percent", "minutes"), FROM_MEMORY)
def test_limits_at_rated(name, kind, percent, minutes):
    limits = class_limits(name, kind=kind)
    assert limits.ratio_pu == pytest.approx(percent / 100)
    assert limits.phase_minutes == minutes
    assert limits.phase_middle_minutes == (180 if name == "TPZ" else 0)


@pytest.mark.parametrize("name", LISTED)
def test_measuring_classes_by_current(name):
    for percent, error in LISTED[name].items():
        found = class_limits(name, kind="ct", percent_of_rated=percent).ratio_pu
        assert found == pytest.approx(error / 100)
    between = class_limits(name, kind="ct", percent_of_rated=60).ratio_pu
    assert LISTED[name][100] / 100 < between < LISTED[name][20] / 100


def test_draws_fill_the_class_and_repeat_with_the_seed():
    spec = ErrorsByClass(class_name="5P", kind="ct")
    drawn = draw_errors(spec, rng=np.random.default_rng(3), count=4000)
    ratio, phase = np.array([(e.ratio_pu, e.phase_minutes) for e in drawn]).T
    for values, limit in ((ratio, 0.01), (phase, 60.0)):
        assert 0.99 * limit < np.abs(values).max() <= limit
        # Uniform: variance is the square of the limit over three, here within five of its own deviations.
        assert values.var() == pytest.approx(limit**2 / 3, rel=5 * np.sqrt(4 / 5 / 4000))
    assert drawn == draw_errors(spec, rng=np.random.default_rng(3), count=4000)
    assert abs(np.corrcoef(ratio, phase)[0, 1]) < 5 / np.sqrt(4000)


def test_classes_without_or_with_a_middle_phase():
    rng = np.random.default_rng(4)
    tenp = draw_errors(ErrorsByClass(class_name="10P", kind="ct"), rng=rng, count=50)
    assert {e.phase_minutes for e in tenp} == {0.0}
    spec = ErrorsByClass(class_name="TPZ", kind="ct")
    added = [e.phase_minutes for e in draw_errors(spec, rng=rng, count=200)]
    in_core = [e.phase_minutes for e in draw_errors(spec, rng=rng, count=200, middle="in-core")]
    assert 162 <= min(added) < 170 < 190 < max(added) <= 198
    assert -18 <= min(in_core) < -10 < 10 < max(in_core) <= 18


def test_error_is_a_complex_gain_of_the_fundamental():
    t = np.arange(3000) / 38400
    errors = (
        TransformerError(ratio_pu=0.01, phase_minutes=60),
        TransformerError(ratio_pu=-0.03),
        TransformerError(phase_minutes=-240),
    )
    true = np.exp(1j * np.array([0.2, 1.2, -2.0]))
    signal = (true[:, None] * np.exp(2j * np.pi * 50 * t)).real
    out = apply_errors(signal, errors, sample_rate_hz=38400, freq_hz=50)
    inner = out[:, 100:-100]
    found = fit_tones(inner, sample_rate_hz=38400, freqs_hz=50, n_samples=inner.shape[1]).amplitudes[0]
    ratio = found / (true * np.exp(2j * np.pi * 50 * 100 / 38400))
    np.testing.assert_allclose(ratio, [e.complex_gain for e in errors], rtol=1e-11)
    # 60 minutes of arc lead is one degree.
    assert np.degrees(np.angle(ratio[0])) == pytest.approx(1.0, abs=1e-9)


def test_an_offset_keeps_its_decay():
    t = np.arange(4000) / 38400
    decay = np.exp(-t / 0.045)[None, :]
    out = apply_errors(decay, (TransformerError(phase_minutes=60),), sample_rate_hz=38400, freq_hz=50)[0]
    slope = np.polyfit(t[50:-50], np.log(out[50:-50]), 1)[0]
    assert slope == pytest.approx(-1 / 0.045, rel=1e-9)


def test_wrong_values_are_refused():
    with pytest.raises(ForgeError, match="no accuracy class") as caught:
        ErrorsByClass(class_name="7P", kind="ct")
    assert "5P" in caught.value.hint
    with pytest.raises(ForgeError, match="no accuracy class"):
        class_limits("TPZ", kind="vt")
    with pytest.raises(ForgeError, match="ratio_pu"):
        TransformerError(ratio_pu=1.5)
    with pytest.raises(ForgeError, match="phase_minutes"):
        TransformerError(phase_minutes=6000)
    with pytest.raises(ForgeError, match="1 errors for 2"):
        apply_errors(np.zeros((2, 50)), (TransformerError(),), sample_rate_hz=1e4, freq_hz=50)
