"""The whole chain: what it passes unchanged, what it puts in, and that its truth says so."""

import json
import math

import numpy as np
import pytest

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.background import Component, harmonic
from analyzer.forge.instruments.chain import record_samples, record_signals
from analyzer.forge.instruments.chain_spec import CHANNELS, InstrumentChain, fine_grid
from analyzer.forge.instruments.class_errors import ErrorsByClass, TransformerError
from analyzer.forge.instruments.converter import Converter, Noise
from analyzer.forge.instruments.ct import CurrentTransformer, KneePoint
from analyzer.forge.instruments.filters import AntiAlias, RelayFilter
from analyzer.forge.instruments.vt import CapacitiveVT
from analyzer.forge.instruments.wiring import Wiring

RATE = 4800.0
OMEGA = 2 * np.pi * 50
INCEPTION = 0.0612345
ANGLES = np.radians([0.0, -120.0, 120.0])[:, None]
LOAD, FAULT, CREST = 600.0, 14000.0, 90e3
TAU = 15 / OMEGA


def currents(t):
    """Load, then a three-phase fault whose offset keeps each current continuous."""
    after = np.maximum(t - INCEPTION, 0)
    before = LOAD * np.cos(OMEGA * t + ANGLES - 0.4)
    psi = np.pi + ANGLES
    jump = LOAD * np.cos(OMEGA * INCEPTION + ANGLES - 0.4) - FAULT * np.cos(psi)
    return np.where(t < INCEPTION, before, FAULT * np.cos(OMEGA * after + psi) + jump * np.exp(-after / TAU))


def voltages(t):
    return np.where(t < INCEPTION, 1.0, 0.2) * CREST * np.cos(OMEGA * t + ANGLES)


def load(t):
    return LOAD * np.cos(OMEGA * t + ANGLES - 0.4)


def healthy(t):
    return CREST * np.cos(OMEGA * t + ANGLES)


def record(chain, *, seed=1, current=currents, voltage=voltages, n=1200, breaks=(INCEPTION,), freq=50.0):
    return record_signals(
        chain,
        current=current,
        voltage=voltage,
        start_s=0.0,
        n_samples=n,
        prefault_freq_hz=freq,
        rng=np.random.default_rng(seed),
        breaks_s=breaks,
    )


def chain(**parts):
    return InstrumentChain(sample_rate_hz=RATE, nominal_freq_hz=50.0, **parts)


CONVERTER = Converter(bits=16, current_range_a=60e3, voltage_range_v=200e3)
FILTER = AntiAlias(kind="butterworth", order=4, cutoff_hz=1500.0)
KNEE = KneePoint(voltage_v=300.0, exciting_current_a=0.1, freq_hz=50.0)
FULL = {
    "ct": CurrentTransformer.with_time_constant(3.0, ratio=240, winding_ohm=0.5, burden_ohm=1.5, knee=KNEE),
    "vt": CapacitiveVT.from_rating(
        capacitance_f=6e-8, intermediate_voltage_v=12e3, burden_va=300, tuned_freq_hz=50
    ),
    "ct_errors": ErrorsByClass(class_name="5P", kind="ct"),
    "vt_errors": ErrorsByClass(class_name="3P", kind="vt"),
    "background": (harmonic(5, on="voltage", fundamental_hz=50, rms=500.0),),
    "wiring": Wiring(reversed_polarity=("ib",)),
    "anti_alias": FILTER,
    "skew_s": (("vb", 2e-5),),
    "noise": Noise(current_rms_a=5.0, voltage_rms_v=100.0, lag1_autocorrelation=0.3),
    "converter": CONVERTER,
}


def codes(recording):
    return [put.code for put in recording.truth.departures]


def test_an_ideal_chain_returns_the_primary():
    out = record(chain())
    t = np.arange(1200) / RATE
    np.testing.assert_allclose(out.time_s, t, rtol=0, atol=1e-12)
    kept = np.abs(t - INCEPTION) > 1 / RATE
    i, v = currents(t), voltages(t)
    expected = np.vstack([i, i.sum(axis=0), v, v.sum(axis=0)])
    np.testing.assert_allclose(out.values[:, kept], expected[:, kept], rtol=0, atol=1e-6)
    assert out.channels == CHANNELS
    assert out.truth.departures == ()
    assert out.counts is None


def test_an_honest_chain_puts_no_departure_in():
    linear = CurrentTransformer.with_time_constant(3.0, ratio=240, winding_ohm=0.5, burden_ohm=1.5)
    parts = {**FULL, "ct": linear, "vt": None, "wiring": None}
    assert codes(record(chain(**parts))) == []
    sound = CurrentTransformer.with_time_constant(
        3.0,
        ratio=240,
        winding_ohm=0.5,
        burden_ohm=1.5,
        knee=KneePoint(voltage_v=5e3, exciting_current_a=0.1, freq_hz=50),
    )
    out = record(chain(**{**parts, "ct": sound}))
    assert codes(out) == []
    assert out.truth.saturation.first_crossing_s == (None, None, None)


@pytest.mark.parametrize("freq", [50.0, 49.3])
def test_no_element_starts_up_within_the_record(freq):
    omega = 2 * np.pi * freq

    def steady(crest):
        return lambda t: crest * np.cos(omega * t + ANGLES)

    parts = {k: v for k, v in FULL.items() if k not in ("noise", "converter", "background")}
    out = record(chain(**parts), current=steady(LOAD), voltage=steady(CREST), breaks=(), freq=freq)
    t = out.time_s
    basis = np.stack([np.cos(omega * t), np.sin(omega * t)], axis=1)
    for row, name in zip(out.values, out.channels, strict=True):
        rest = row - basis @ np.linalg.lstsq(basis, row, rcond=None)[0]
        crest = LOAD if name[0] == "i" else CREST
        # The steady third harmonic of the exciting current at load is all that may be left.
        assert np.abs(rest).max() < 2e-6 * crest, name


def test_fundamental_is_turned_by_what_the_truth_says():
    stated = (
        TransformerError(ratio_pu=0.01, phase_minutes=60),
        TransformerError(phase_minutes=-120),
        TransformerError(ratio_pu=-0.02),
    )
    out = record(chain(vt_errors=stated, anti_alias=FILTER), current=load, voltage=healthy, breaks=())
    t = out.time_s
    va, vb, vc = out.values[4:7]
    for row, error, angle in zip((va, vb, vc), stated, ANGLES[:, 0], strict=True):
        phasor = 2 * (row * np.exp(-1j * OMEGA * t))[: 96 * 12].mean()
        expected = CREST * np.exp(1j * angle) * error.complex_gain * out.truth.filter_gain
        assert phasor == pytest.approx(expected, rel=1e-8)
    turned = np.angle(out.truth.filter_gain)
    assert out.truth.filter_delay_s == pytest.approx(-turned / OMEGA, rel=2e-3)
    assert out.truth.vt_errors == stated


def test_skew_is_a_later_instant():
    out = record(chain(skew_s=(("ib", 30e-6), ("vc", -12e-6))), current=load, voltage=healthy, breaks=())
    np.testing.assert_allclose(out.values[1], load(out.time_s + 30e-6)[1], atol=1e-9)
    np.testing.assert_allclose(out.values[6], healthy(out.time_s - 12e-6)[2], atol=1e-6)
    np.testing.assert_allclose(out.values[0], load(out.time_s)[0], atol=1e-9)
    assert out.truth.skew_s == (0, 30e-6, 0, 0, 0, 0, -12e-6, 0)


def test_saturation_is_in_the_truth_and_in_the_record():
    out = record(chain(ct=FULL["ct"]))
    put = out.truth.departures[0]
    assert put.code == "ct-saturation"
    assert "ia" in put.channels
    assert "in" in put.channels
    assert not any(name.startswith("v") for name in put.channels)
    assert put.time_s == min(x for x in out.truth.saturation.first_crossing_s if x is not None)
    missing = currents(out.time_s)[0] - out.values[0]
    before = (out.time_s > INCEPTION + 1e-3) & (out.time_s < out.truth.saturation.first_crossing_s[0])
    assert np.abs(missing[before]).max() < 0.05 * np.abs(missing).max()
    assert np.abs(missing).max() == pytest.approx(out.truth.saturation.peak_magnetising_a[0], rel=0.02)


def test_gapped_core_and_its_class():
    gapped = CurrentTransformer.with_time_constant(
        0.06, ratio=240, winding_ohm=0.5, burden_ohm=1.5, core="gapped"
    )
    out = record(chain(ct=gapped, ct_errors=ErrorsByClass(class_name="TPZ", kind="ct")))
    (put,) = out.truth.departures
    assert (put.code, put.strength) == ("gapped-ct", pytest.approx(0.06))
    # The gap's own lead of 180 minutes is in the core and is not added once more.
    assert max(abs(e.phase_minutes) for e in out.truth.ct_errors) <= 18


def test_voltage_transformer_transient_begins_with_the_collapse():
    out = record(chain(vt=FULL["vt"], background=FULL["background"]))
    (put,) = out.truth.departures
    assert put.code == "voltage-transformer-transient"
    assert put.time_s == pytest.approx(INCEPTION, abs=1 / RATE)
    assert put.strength > 0.02
    assert codes(record(chain(vt=FULL["vt"]), voltage=healthy, breaks=())) == []


def test_clipping_counts_what_was_clipped():
    small = Converter(bits=12, current_range_a=20e3, voltage_range_v=200e3)
    out = record(chain(converter=small))
    (put,) = out.truth.departures
    largest = np.abs(currents(out.time_s)).max(axis=1)
    expected = tuple(n for n, peak in zip(("ia", "ib", "ic"), largest, strict=True) if peak > 20e3)
    assert put.code == "clipped-channel"
    assert put.channels == expected
    assert put.strength == (np.abs(out.counts) == 2047).sum(axis=1).max()
    assert np.abs(out.values[:4]).max() == pytest.approx(20e3)


def test_counts_times_their_value_are_the_values():
    out = record(chain(**FULL))
    np.testing.assert_array_equal(out.values, out.counts * out.value_per_count[:, None])
    assert out.counts.dtype.kind == "i"
    assert out.truth.value_per_count[0] == pytest.approx(60e3 / 32767)


def test_relay_filter_stores_few_samples_without_offset():
    spec = RelayFilter(kind="mimic-full-cycle-cosine", mimic_time_constant_s=TAU, keep_every=6)
    out = record(chain(relay_filter=spec, converter=CONVERTER), n=200)
    assert out.sample_rate_hz == 800.0
    np.testing.assert_allclose(out.time_s, np.arange(200) / 800, atol=1e-12)
    (put,) = out.truth.departures
    assert (put.code, put.channels) == ("filtered-record", ("ia", "ib", "ic", "in"))
    assert put.strength == pytest.approx(0.02)
    later = out.time_s > INCEPTION + 0.021
    settled = out.values[0, later]
    whole = settled[: settled.size // 16 * 16].reshape(-1, 16)
    assert np.abs(whole.mean(axis=1)).max() < 3e-4 * FAULT
    assert abs(currents(out.time_s)[0, later][:16].mean()) > 0.3 * FAULT
    np.testing.assert_allclose(out.values[4], voltages(out.time_s)[0], atol=2 * 200e3 / 32767)


def test_wiring_mistakes_reach_the_residual():
    out = record(chain(wiring=Wiring(reversed_polarity=("ia",), exchanged=(("vb", "vc"),))))
    (put,) = out.truth.departures
    assert put.code == "wiring"
    assert put.channels == ("ia", "in", "vb", "vc")
    assert put.strength == 2.0
    true = currents(out.time_s)
    np.testing.assert_allclose(out.values[3], true.sum(axis=0) - 2 * true[0], atol=1e-5)
    # A ratio set wrongly but for nothing else.
    scaled = record(chain(wiring=Wiring(wrong_scale=(("ic", 1.2),))))
    assert scaled.truth.departures[0].channels == ("ic", "in")
    assert scaled.truth.departures[0].strength == pytest.approx(0.2)


def test_saturation_is_named_where_it_arrives():
    # Ks is 10.9; the whole offset of phase A asks for 16, the half ones of B and C for 8.5.
    knee = KneePoint(voltage_v=900.0, exciting_current_a=0.1, freq_hz=50.0)
    ct = CurrentTransformer.with_time_constant(30.0, ratio=240, winding_ohm=0.5, burden_ohm=1.5, knee=knee)
    channels = ("ia", "ib", "ic", "in", "va")
    out = record(chain(ct=ct, wiring=Wiring(exchanged=(("ia", "ib"),)), channels=channels))
    assert [c is None for c in out.truth.saturation.first_crossing_s] == [False, True, True]
    put = next(p for p in out.truth.departures if p.code == "ct-saturation")
    assert put.channels == ("ib", "in")


def test_same_seed_same_record_and_elements_do_not_disturb_each_other():
    first, again = record(chain(**FULL)), record(chain(**FULL))
    np.testing.assert_array_equal(first.counts, again.counts)
    assert first.truth == again.truth
    other = record(chain(**FULL), seed=2)
    assert (first.counts != other.counts).any()
    silent = record(chain(**{**FULL, "noise": None}))
    assert silent.truth.ct_errors == first.truth.ct_errors
    without = record(chain(**{**FULL, "ct_errors": None, "vt_errors": None}))
    stated = {"ct_errors": first.truth.ct_errors, "vt_errors": first.truth.vt_errors}
    np.testing.assert_array_equal(record(chain(**{**FULL, **stated})).counts, first.counts)
    assert (without.counts != first.counts).any()


def test_noise_is_what_the_truth_says():
    quiet = record(chain(), current=load, voltage=healthy, breaks=())
    noisy = record(chain(noise=Noise(current_rms_a=4.0, voltage_rms_v=90.0)), current=load, voltage=healthy)
    rest = noisy.values - quiet.values
    np.testing.assert_allclose(rest.std(axis=1), noisy.truth.noise_rms, rtol=5 / np.sqrt(2 * 1200))


def test_samples_on_the_fine_grid_are_the_same_path():
    spec = chain(**FULL)
    grid = fine_grid(spec, start_s=0.0, n_samples=1200, prefault_freq_hz=50.0)
    t = grid.times_s()
    out = record_samples(
        spec,
        current=load(t),
        voltage=healthy(t),
        grid=grid,
        prefault_freq_hz=50.0,
        rng=np.random.default_rng(1),
    )
    same = record(spec, current=load, voltage=healthy, breaks=())
    np.testing.assert_array_equal(out.counts, same.counts)
    with pytest.raises(ForgeError, match="shape"):
        record_samples(
            spec,
            current=load(t)[:, 1:],
            voltage=healthy(t),
            grid=grid,
            prefault_freq_hz=50.0,
            rng=np.random.default_rng(1),
        )
    spoilt = load(t)
    spoilt[0, 5] = np.nan
    with pytest.raises(ForgeError, match="finite"):
        record_samples(
            spec,
            current=spoilt,
            voltage=healthy(t),
            grid=grid,
            prefault_freq_hz=50.0,
            rng=np.random.default_rng(1),
        )


def test_oversampling_hardly_matters():
    parts = {k: v for k, v in FULL.items() if k not in ("noise", "converter")}
    coarse = record(chain(**parts, oversampling=8)).values
    fine = record(chain(**parts, oversampling=32)).values
    t = np.arange(1200) / RATE
    away = np.abs(t - INCEPTION) > 1.5 / RATE
    for name, low, high in zip(CHANNELS, coarse, fine, strict=True):
        scale = np.abs(high).max() if name != "vn" else CREST
        assert np.abs(low - high)[away].max() < 1e-3 * scale, name
        assert np.abs(low - high)[t > INCEPTION + 0.01].max() < 1e-4 * scale, name


def test_truth_is_plain_json():
    text = json.dumps(record(chain(**FULL)).truth.to_dict(), allow_nan=False)
    back = json.loads(text)
    assert {d["code"] for d in back["departures"]} >= {"ct-saturation", "wiring"}
    assert back["filter_gain"]["angle_deg"] < 0
    assert len(back["saturation"]["saturated_fraction"]) == 3


@pytest.mark.parametrize(
    ("key", "parts"),
    [
        ("channels", {"channels": ("ia", "ia")}),
        ("channels", {"channels": ("i1",)}),
        ("channels", {"channels": ()}),
        ("channels", {"skew_s": (("x", 1e-6),)}),
        ("skew_s", {"skew_s": (("ia", 1.0),)}),
        ("oversampling", {"oversampling": 0}),
        ("ct_errors", {"ct_errors": (TransformerError(),)}),
        ("ct_errors", {"ct_errors": ErrorsByClass(class_name="3P", kind="vt")}),
        ("relay_filter", {"sample_rate_hz": 5010.0, "relay_filter": RelayFilter(kind="full-cycle-cosine")}),
        ("sample_rate_hz", {"sample_rate_hz": 0.0}),
        ("nominal_freq_hz", {"nominal_freq_hz": math.inf}),
    ],
)
def test_wrong_chain_names_the_key(key, parts):
    with pytest.raises(ForgeError) as caught:
        InstrumentChain(**{"sample_rate_hz": RATE, "nominal_freq_hz": 50.0, **parts})
    assert caught.value.where == key


def test_grid_leads_in_and_out():
    spec = chain(skew_s=(("ia", 1e-4),))
    grid = fine_grid(spec, start_s=0.5, n_samples=100, prefault_freq_hz=50.0)
    t = grid.times_s()
    assert (t[0], t[-1]) == (grid.start_s, pytest.approx(grid.end_s, abs=1e-12))
    assert t[grid.first_converted] == pytest.approx(0.5, abs=1e-12)
    assert grid.start_s < 0.5 - 2 / 50
    assert grid.end_s > 0.5 + 99 / RATE + 1e-4


def test_too_few_samples_are_refused():
    with pytest.raises(ForgeError, match="n_samples"):
        fine_grid(chain(), start_s=0.0, n_samples=1, prefault_freq_hz=50.0)


def test_a_beat_and_a_slow_recorder_run():
    parts = {"background": (Component(on="current", freq_hz=48.0, rms=5.0, drift_hz_per_s=1.0),)}
    spec = InstrumentChain(sample_rate_hz=200.0, nominal_freq_hz=50.0, channels=("ib",), **parts)
    assert spec.fine_per_sample * 200.0 >= 20e3
    out = record(spec, current=load, voltage=healthy, breaks=(), n=20)
    t = out.time_s
    beat = 5 * np.sqrt(2) * np.cos(2 * np.pi * (48 + 0.5 * t) * t - 2 * np.pi / 3)
    np.testing.assert_allclose(out.values[0], load(t)[1] + beat, atol=1e-6)
