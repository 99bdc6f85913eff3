"""Signals on common times: skew taken off, missing samples bridged."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.examine import examine
from analyzer.records import Record
from analyzer.terminals import Terminal
from analyzer.waveform.sampling import aligned_signals
from analyzer.waveform.stretches import Stretch
from tests.simulated import Case, simulate

RATE_HZ, N = 3200.0, 640
TIMES_S = np.arange(N) / RATE_HZ
TURNS = -2 * np.pi / 3 * np.arange(3)
NAMES = ("IA", "IB", "IC", "VA", "VB", "VC")


def signal(k: int, times_s: np.ndarray) -> np.ndarray:
    return (10.0 if k < 3 else 100.0) * np.cos(2 * np.pi * 50.0 * times_s + TURNS[k % 3])


def record_of(skews_s: dict[str, float] | None = None, missing: dict[str, slice] | None = None) -> Record:
    skews_s, missing = skews_s or {}, missing or {}
    signals = {}
    for k, name in enumerate(NAMES):
        values = signal(k, TIMES_S + skews_s.get(name, 0.0))
        if name in missing:
            values[missing[name]] = np.nan
        signals[name] = (values, "A" if k < 3 else "V")
    record = Record.from_arrays(signals, sample_rate_hz=RATE_HZ)
    return replace(record, analog=tuple(replace(c, skew_s=skews_s.get(c.id, 0.0)) for c in record.analog))


TERMINAL = Terminal(name="f", currents=NAMES[:3], voltages=NAMES[3:])
ALL = Stretch(first=0, stop=N, rate_hz=RATE_HZ)


@settings(deadline=None, derandomize=True, max_examples=25)
@given(st.lists(st.floats(-300e-6, 300e-6), min_size=6, max_size=6))
def test_skew_is_taken_off(skews_s):
    times_s, currents, voltages = aligned_signals(
        record_of(dict(zip(NAMES, skews_s, strict=True))), TERMINAL, ALL
    )
    inner = slice(4, -4)  # at the ends a moved channel is drawn out a little
    for k in range(6):
        found = (currents if k < 3 else voltages)[k % 3]
        np.testing.assert_allclose(
            found[inner], signal(k, times_s)[inner], atol=2e-4 * (10 if k < 3 else 100)
        )


def test_what_has_no_skew_is_left_as_it_is():
    _, currents, voltages = aligned_signals(record_of({"IB": 1e-9}), TERMINAL, ALL)
    for k in (0, 2):
        np.testing.assert_array_equal(currents[k], signal(k, TIMES_S))
        np.testing.assert_array_equal(voltages[k], signal(3 + k, TIMES_S))
    np.testing.assert_array_equal(currents[1], signal(1, TIMES_S + 1e-9))


def test_missing_samples_are_bridged_by_a_line():
    record = record_of(missing={"IA": slice(100, 103), "VB": slice(0, 5)})
    _, currents, voltages = aligned_signals(record, TERMINAL, ALL)
    clean = signal(0, TIMES_S)
    np.testing.assert_allclose(currents[0, 100:103], np.interp([100, 101, 102], [99, 103], clean[[99, 103]]))
    np.testing.assert_array_equal(np.delete(currents[0], [100, 101, 102]), np.delete(clean, [100, 101, 102]))
    assert np.all(voltages[1, :5] == signal(4, TIMES_S)[5])  # the end is held
    assert np.isfinite(currents).all()
    assert np.isfinite(voltages).all()


def test_a_channel_with_much_missing_reads_as_zero():
    _, currents, _ = aligned_signals(record_of(missing={"IC": slice(0, 70)}), TERMINAL, ALL)
    assert not currents[2].any()
    _, currents, _ = aligned_signals(record_of(missing={"IC": slice(0, 60)}), TERMINAL, ALL)
    assert currents[2].any()


def test_a_stretch_has_its_own_samples_and_a_terminal_may_lack_voltages():
    part = Stretch(first=200, stop=400, rate_hz=RATE_HZ)
    times_s, currents, voltages = aligned_signals(record_of(), replace(TERMINAL, voltages=()), part)
    assert voltages is None
    np.testing.assert_allclose(times_s, TIMES_S[200:400])
    np.testing.assert_array_equal(currents[1], signal(1, TIMES_S[200:400]))


def test_the_record_itself_stays_as_it_was():
    record = record_of(missing={"IA": slice(100, 103)})
    aligned_signals(record, TERMINAL, ALL)
    assert np.isnan(record.signal("IA")[100:103]).all()


def test_a_fault_with_skew_and_gaps_is_examined_as_one_without():
    record, truth = simulate(Case(fault_type="BC", snr_db=70.0))
    (plain,) = examine(record).events
    values = np.array(record.signals())
    values[1, 300:303] = np.nan  # before the fault
    values[4, 500] = np.nan  # and in it
    skewed = {}
    for k, channel in enumerate(record.analog):
        times_s = record.times()
        skew_s = 40e-6 * k
        present = np.isfinite(values[k])
        moved = np.interp(times_s + skew_s, times_s[present], values[k][present])
        if k in (1, 4):
            moved[~present] = np.nan
        skewed[channel.id] = (moved, channel.unit)
    other = Record.from_arrays(skewed, sample_rate_hz=3200.0, nominal_frequency_hz=50.0)
    other = replace(other, analog=tuple(replace(c, skew_s=40e-6 * k) for k, c in enumerate(other.analog)))
    (event,) = examine(other).events
    assert event.fault_type == plain.fault_type == "BC"
    assert event.inception.time_s.value == pytest.approx(truth.inception_s, abs=1e-4)
    found, expected = (e.impedance.source.z1.magnitude_ohm.value for e in (event, plain))
    assert found == pytest.approx(expected, rel=5e-3)
