"""Relay filters: fundamental kept, offset and harmonics gone, memory as stated."""

import numpy as np
import pytest

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.filters import AntiAlias, RelayFilter, apply_relay_filter

RATES = {"sample_rate_hz": 4800.0, "nominal_freq_hz": 50.0}
KINDS = [
    RelayFilter(kind="full-cycle-cosine"),
    RelayFilter(kind="half-cycle-cosine"),
    RelayFilter(kind="mimic-full-cycle-cosine", mimic_time_constant_s=0.045),
]


@pytest.mark.parametrize("spec", KINDS, ids=lambda s: s.kind)
def test_fundamental_passes_with_the_stated_gain(spec):
    t = np.arange(960) / 4800
    out = apply_relay_filter(np.cos(2 * np.pi * 50 * t)[None, :], spec, **RATES)[0]
    memory = spec.memory_samples(**RATES)
    assert out.size == t.size - memory
    gain = spec.response(50.0, **RATES)
    assert abs(gain) == pytest.approx(1.0, abs=1e-12)
    expected = (gain * np.exp(2j * np.pi * 50 * t[memory:])).real
    np.testing.assert_allclose(out, expected, atol=1e-11)


def test_cosine_filter_turns_no_phase_and_rejects_what_repeats():
    spec = KINDS[0]
    assert spec.response(50.0, **RATES) == pytest.approx(1.0, abs=1e-12)
    for freq in (0.0, 100.0, 150.0, 250.0):
        assert abs(spec.response(freq, **RATES)) < 1e-12
    assert abs(KINDS[1].response(150.0, **RATES)) < 1e-12  # half a cycle rejects odd harmonics only
    assert abs(KINDS[1].response(0.0, **RATES)) > 0.01


def left_over(spec, tau):
    t = np.arange(-960, 1920) / 4800
    out = apply_relay_filter(np.where(t >= 0, np.exp(-t / tau), 0.0)[None, :], spec, **RATES)[0]
    full = t[spec.memory_samples(**RATES) :] >= 0.025
    return np.abs(out[full]).max()


def test_mimic_takes_off_the_offset_of_its_own_time_constant():
    # Away from its own time constant something is left, and without a mimic more.
    assert left_over(KINDS[2], 0.045) < 2e-4  # its memory is a first difference, one part in 216 of a sample
    assert left_over(KINDS[2], 0.02) > 10 * left_over(KINDS[2], 0.045)
    assert left_over(KINDS[0], 0.045) > 10 * left_over(KINDS[2], 0.045)


def test_what_does_not_fit_is_refused():
    with pytest.raises(ForgeError, match="multiple of four"):
        KINDS[0].taps(sample_rate_hz=5000.0, nominal_freq_hz=60.0)
    with pytest.raises(ForgeError, match="mimic_time_constant_s"):
        RelayFilter(kind="mimic-full-cycle-cosine")
    with pytest.raises(ForgeError, match="kind"):
        RelayFilter(kind="wavelet")
    with pytest.raises(ForgeError, match="keep_every"):
        RelayFilter(kind="full-cycle-cosine", keep_every=0)
    with pytest.raises(ForgeError, match="order"):
        AntiAlias(kind="rc", cutoff_hz=500, order=2)
    with pytest.raises(ForgeError, match="order"):
        AntiAlias(kind="butterworth", cutoff_hz=500, order=9)
    with pytest.raises(ForgeError, match="cutoff_hz"):
        AntiAlias(kind="rc", cutoff_hz=0)
