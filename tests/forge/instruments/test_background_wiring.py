"""Background components and wiring mistakes."""

import numpy as np
import pytest

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.background import Component, background_signal, harmonic
from analyzer.forge.instruments.linear import fit_tones
from analyzer.forge.instruments.wiring import PHASE_CHANNELS, Wiring

TIME = np.arange(4800) / 4800
TURN = np.exp(2j * np.pi / 3)


def phasors(components, freq_hz, on="voltage"):
    signal = background_signal(components, on=on, time_s=TIME)
    return fit_tones(signal, sample_rate_hz=4800, freqs_hz=freq_hz, n_samples=4800).amplitudes[0]


@pytest.mark.parametrize(("order", "turn"), [(3, 1), (5, TURN), (7, TURN**2), (2, TURN), (4, TURN**2)])
def test_harmonics_follow_in_their_sequence(order, turn):
    part = harmonic(order, on="voltage", fundamental_hz=50, rms=2.0, angle_deg=30)
    found = phasors((part,), 50.0 * order)
    first = 2 * np.sqrt(2) * np.exp(1j * np.radians(30))
    np.testing.assert_allclose(found, first * np.array([1, turn, turn**2]), atol=1e-9)
    # The same as each phase's waveform being the first one's, a third of a cycle later.
    late = np.exp(-2j * np.pi * order / 3)
    np.testing.assert_allclose(found[1] / found[0], late, atol=1e-9)


def test_components_add_up_and_keep_to_their_quantity():
    parts = (
        Component(on="voltage", freq_hz=173.0, rms=1.0),
        Component(on="current", freq_hz=173.0, rms=4.0, angle_deg=90),
        Component(on="voltage", freq_hz=250.0, rms=3.0, sequence="negative"),
    )
    assert abs(phasors(parts, 173.0)[0]) == pytest.approx(np.sqrt(2))
    assert phasors(parts, 173.0, on="current")[0] == pytest.approx(4j * np.sqrt(2))
    total = background_signal(parts, on="voltage", time_s=TIME)
    single = [background_signal((p,), on="voltage", time_s=TIME) for p in parts]
    np.testing.assert_allclose(total, sum(single), atol=1e-12)


def test_a_drifting_component_moves_at_its_rate():
    part = Component(on="current", freq_hz=50.0, rms=1.0, drift_hz_per_s=2.0)
    signal = background_signal((part,), on="current", time_s=TIME)
    t = 0.8
    instantaneous = 2 * np.pi * (50.0 * TIME + TIME**2)  # integral of 50 + 2 t
    np.testing.assert_allclose(signal[0], np.sqrt(2) * np.cos(instantaneous), atol=1e-9)
    k = round(t * 4800)
    local = fit_tones(
        signal[:, k - 24 : k + 24], sample_rate_hz=4800, freqs_hz=51.6, n_samples=48
    ).amplitudes[0]
    assert abs(local[0]) == pytest.approx(np.sqrt(2), rel=1e-3)


def test_wiring_matrix_by_hand():
    wiring = Wiring(
        reversed_polarity=("ia",), exchanged=(("ib", "ic"), ("va", "vc")), wrong_scale=(("vb", 0.5),)
    )
    true = np.arange(1.0, 7.0)  # ia ib ic va vb vc
    np.testing.assert_array_equal(wiring.matrix() @ true, [-1, 3, 2, 6, 2.5, 4])
    np.testing.assert_array_equal(Wiring().matrix(), np.eye(6))
    # Polarity belongs to the recorder's channel: what arrives on it, after the exchange, is turned.
    both = Wiring(reversed_polarity=("ib",), exchanged=(("ib", "ic"),))
    np.testing.assert_array_equal(both.matrix() @ true, [1, -3, 2, 4, 5, 6])
    assert len(PHASE_CHANNELS) == 6


def test_what_makes_no_sense_is_refused():
    with pytest.raises(ForgeError, match="phase channel"):
        Wiring(reversed_polarity=("in",))
    with pytest.raises(ForgeError, match="change places"):
        Wiring(exchanged=(("ia", "va"),))
    with pytest.raises(ForgeError, match="no scale"):
        Wiring(wrong_scale=(("ia", 0.0),))
    with pytest.raises(ForgeError, match="harmonic order"):
        harmonic(1, on="voltage", fundamental_hz=50, rms=1.0)
    with pytest.raises(ForgeError, match="sequence"):
        Component(on="voltage", freq_hz=100.0, rms=1.0, sequence="odd")
    with pytest.raises(ForgeError, match="freq_hz"):
        Component(on="voltage", freq_hz=0.0, rms=1.0)
