"""Long stretches are scanned: every change is in one window, quiet parts are in none, events are the same."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import replace
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.examine import examine
from analyzer.records import Record, RecordError, read
from analyzer.terminals import Terminal
from analyzer.theory.modes import FAULT_TYPES
from analyzer.waveform import scan
from analyzer.waveform.events import Event, find_events
from analyzer.waveform.frequency import power_frequency
from analyzer.waveform.scan import active_windows, is_long, searched_parts
from analyzer.waveform.stretches import Stretch, part_of, stretches_of, usable_stretches
from tests.long_records import Dropped, write_long_record
from tests.simulated import Case, simulate

NAMES = ("IA", "IB", "IC", "VA", "VB", "VC")
SIGNALS = tuple(((name, 1.0),) for name in NAMES)
TERMINAL = Terminal(name="f", currents=NAMES[:3], voltages=NAMES[3:])
DURATION_S = 12.0


@contextmanager
def limits(**values: float) -> Iterator[None]:
    """Other limits of the scan, for as long as it takes."""
    with pytest.MonkeyPatch.context() as patch:
        for name, value in values.items():
            patch.setattr(scan, name, value)
        yield


def waves(
    samples_per_cycle: int = 64, *, hz: float = 50.0, noise: float = 0.01, seed: int = 1
) -> tuple[np.ndarray, np.ndarray]:
    """Times and six sinusoids of RMS one with noise and a tenth of fifth harmonic."""
    times_s = np.arange(round(DURATION_S * 50 * samples_per_cycle)) / (50 * samples_per_cycle)
    angle = 2 * np.pi * hz * times_s - 2 * np.pi / 3 * np.arange(6)[:, None]
    clean = np.sqrt(2) * (np.cos(angle) + 0.05 * np.cos(5 * angle))
    return times_s, clean + np.random.default_rng(seed).normal(scale=noise, size=clean.shape)


def record_of(times_s: np.ndarray, values: np.ndarray) -> Record:
    signals = {name: (row, name[0].replace("I", "A")) for name, row in zip(NAMES, values, strict=True)}
    rate_hz = (len(times_s) - 1) / times_s[-1]
    return Record.from_arrays(signals, sample_rate_hz=rate_hz, nominal_frequency_hz=50.0)


def windows_of(record: Record) -> tuple[Stretch, ...]:
    (stretch,) = stretches_of(record)
    with limits(_PART_NUMBERS=1):  # parts as short as they get, 64 half cycles: many borders
        return active_windows(record, SIGNALS, stretch, frequency_hz=50.0)


@settings(deadline=None, derandomize=True, max_examples=60)
@given(
    at=st.floats(0.01, 0.97),
    samples_per_cycle=st.sampled_from([16, 33, 64, 200]),
    hz=st.floats(49.0, 51.0),
    angle=st.floats(0.0, 2 * np.pi),
    channel=st.integers(0, 5),
    seed=st.integers(0, 99),
)
def test_a_change_by_a_fifth_is_found_wherever_it_is(at, samples_per_cycle, hz, angle, channel, seed):
    times_s, values = waves(samples_per_cycle, hz=hz, seed=seed)
    first = round(at * len(times_s))
    change = 0.2 * np.sqrt(2) * np.cos(2 * np.pi * hz * times_s[first:] + angle)
    values[channel, first:] += change
    (window,) = windows_of(record_of(times_s, values))
    assert window.first <= max(0, first - 12 * samples_per_cycle)
    assert window.stop >= min(len(times_s), first + 48 * samples_per_cycle)
    assert window.stop - window.first <= 76 * samples_per_cycle


def test_changes_at_every_border_of_parts():
    """The property above again, at and around the sample at which one part ends and the next begins."""
    times_s, values = waves(16)
    half, lag, per_part = 8, 16, 64
    n_half_cycles = (len(times_s) - 2 * lag) // half
    n_parts = n_half_cycles // per_part
    for k in range(1, n_parts):
        border = 2 * lag + half * (n_half_cycles * k // n_parts)
        for first in range(border - 2 * lag - 1, border + 2, 3):
            changed = values.copy()
            changed[1, first:] *= 1.2
            (window,) = windows_of(record_of(times_s, changed))
            assert window.first <= max(0, first - 12 * 16)
            assert window.stop > first


@pytest.mark.parametrize("samples_per_cycle", [16, 33, 200])
@pytest.mark.parametrize("hz", [49.0, 50.0, 50.6, 51.0])
@pytest.mark.parametrize("noise", [0.0, 0.01, 0.1])
def test_nothing_is_found_in_quiet_waves(samples_per_cycle, hz, noise):
    assert windows_of(record_of(*waves(samples_per_cycle, hz=hz, noise=noise))) == ()


def test_nothing_is_found_in_ramps_drifts_and_swings():
    times_s, values = waves()
    values[0] *= 1.0 + times_s / 2.0  # sevenfold within the record
    values[1] *= np.exp(-times_s / 3.0)
    values[2] *= 1.0 + 0.2 * np.sin(2 * np.pi * 0.5 * times_s)
    values[3] += 3.0 * np.sin(2 * np.pi * 0.1 * times_s)
    wandering_hz = 50.0 + 0.5 * np.sin(2 * np.pi * 0.1 * times_s)
    values[4] = np.cos(2 * np.pi * np.cumsum(wandering_hz) * times_s[1])
    assert windows_of(record_of(times_s, values)) == ()


def test_nothing_is_found_in_dead_channels_that_flicker_by_a_step():
    times_s, values = waves()
    rng = np.random.default_rng(5)
    values[1] = 0.25 * (rng.random(len(times_s)) < 1e-3)
    values[2] = 0.0
    values[2, 20_000] = 0.25
    values[5] = 3.0
    assert windows_of(record_of(times_s, values)) == ()
    values[2, 20_000:] = np.sqrt(2) * np.cos(2 * np.pi * 50.0 * times_s[20_000:])  # the line comes alive
    (window,) = windows_of(record_of(times_s, values))
    assert window.first < 20_000 - 12 * 64 < 20_000 + 48 * 64 < window.stop


def test_missing_samples_are_no_change_and_hide_none_beside_them():
    times_s, values = waves()
    values[0, 5_000:5_400] = np.nan
    values[1, 20_000::17] = np.nan
    values[2, :30_000] = np.nan
    values[3] = np.nan
    record = record_of(times_s, values)
    assert windows_of(record) == ()
    values[1, 25_000:] *= 1.5
    (window,) = windows_of(record_of(times_s, values))
    assert window.first < 25_000 - 12 * 64 < 25_000 + 48 * 64 < window.stop


def test_a_tenth_is_seen_where_a_cycle_is_no_whole_number_of_samples():
    times_s = np.arange(12_000) / 1000.0
    values = np.cos(2 * np.pi * 61.0 * times_s - 2 * np.pi / 3 * np.arange(6)[:, None])
    values += np.random.default_rng(4).normal(scale=1e-3, size=values.shape)
    (stretch,) = stretches_of(record_of(times_s, values))
    assert active_windows(record_of(times_s, values), SIGNALS, stretch, frequency_hz=60.0) == ()
    values[1, 6_000:] *= 1.1
    (window,) = active_windows(record_of(times_s, values), SIGNALS, stretch, frequency_hz=60.0)
    assert window.first < 6_000 < window.stop


def test_half_cycles_with_few_samples_do_not_tell_what_is_quiet():
    times_s, values = waves(noise=0.1)
    part = 64 * 32
    k = np.arange(len(times_s))
    values[0, (k % part < 0.6 * part) & (k % 32 > 1)] = np.nan
    assert windows_of(record_of(times_s, values)) == ()


def test_a_disturbance_that_fills_parts_is_found():
    """From early in one part to late in another, so that it is what is usual in each."""
    times_s, values = waves()
    n_half_cycles = (len(times_s) - 2 * 64) // 32
    n_parts = n_half_cycles // 64
    borders = [2 * 64 + 32 * (n_half_cycles * k // n_parts) for k in range(n_parts + 1)]
    first, stop = borders[5] + 600, borders[9] - 600
    values[0, first:stop] += np.random.default_rng(6).normal(scale=0.5, size=stop - first)
    windows = windows_of(record_of(times_s, values))
    assert any(window.first < first - 12 * 64 < first < window.stop for window in windows)


def test_a_change_that_is_still_on_and_its_end_are_one_window():
    times_s, values = waves()
    values[0, 10_000:28_000] *= 8.0  # 280 cycles
    (window,) = windows_of(record_of(times_s, values))
    assert window.first < 10_000 < 28_000 < window.stop


def test_changes_far_apart_have_windows_of_their_own():
    times_s, values = waves()
    for first in (8_000, 24_000):
        values[0, first : first + 640] *= 8.0
    one, other = windows_of(record_of(times_s, values))
    assert one.first < 8_000 - 12 * 64 < 8_640 < one.stop < other.first < 24_000 - 12 * 64
    assert other.stop > 24_640


def test_windows_end_where_they_would_get_too_long_and_share_no_change():
    times_s, values = waves()
    firsts = range(3_000, 36_000, 1_500)
    for k, first in enumerate(firsts):
        values[k % 3, first : first + 320] *= 3.0
    with limits(_LONGEST_WINDOW=8_000):
        windows = windows_of(record_of(times_s, values))
    assert len(windows) > 3
    for window in windows:
        assert window.stop - window.first <= 8_000 + 70 * 64
    for first in firsts:
        assert sum(window.first < first + 320 and window.stop > first for window in windows) == 1


def test_endless_change_is_cut_into_windows_that_meet():
    times_s, values = waves()
    values[0, 16_000:] = np.random.default_rng(3).normal(scale=50.0, size=len(times_s) - 16_000)
    with limits(_LONGEST_WINDOW=4_000, _NOISE_FACTOR=0.5):
        windows = windows_of(record_of(times_s, values))
    assert windows[0].first < 16_000
    assert windows[-1].stop == len(times_s)
    assert all(a.stop <= b.first + 64 for a, b in pairwise(windows))


def test_sums_are_scanned_and_not_their_channels():
    """Of two breakers the currents are large and opposite; what flows out changes by a third."""
    times_s, values = waves(noise=1e-4)
    values[1] = -0.97 * values[0]
    first = 15_000
    values[1, first:] = -0.96 * values[0, first:]
    record = record_of(times_s, values)
    (stretch,) = stretches_of(record)
    assert active_windows(record, SIGNALS[:2], stretch, frequency_hz=50.0) == ()
    (window,) = active_windows(record, [(("IA", 1.0), ("IB", 1.0))], stretch, frequency_hz=50.0)
    assert window.first < first < window.stop


def test_a_part_of_a_record_is_scanned_in_its_own_samples():
    times_s, values = waves()
    values[0, 20_000:] *= 1.5
    record = record_of(times_s, values)
    (whole,) = windows_of(record)
    part = part_of(record, Stretch(first=4_000, stop=len(times_s), rate_hz=3200.0))
    (window,) = windows_of(part)
    assert abs(window.first + 4_000 - whole.first) <= 32
    np.testing.assert_array_equal(part.times(), record.times()[4_000:])


def test_a_channel_without_a_known_unit_is_refused():
    record = record_of(*waves())
    (stretch,) = stretches_of(record)
    record = replace(record, analog=tuple(replace(channel, unit="?") for channel in record.analog))
    with pytest.raises(RecordError):
        active_windows(record, SIGNALS, stretch, frequency_hz=50.0)


def test_what_is_long():
    assert not is_long(Stretch(first=0, stop=64_000, rate_hz=3200.0))
    assert is_long(Stretch(first=0, stop=64_001, rate_hz=3200.0))
    assert is_long(Stretch(first=5, stop=6 + (1 << 19), rate_hz=1e6))
    assert not is_long(Stretch(first=5, stop=5 + (1 << 19), rate_hz=1e6))


def test_a_short_stretch_is_searched_as_it_is():
    times_s, values = waves()
    values[0, 20_000:] *= 1.5
    record = record_of(times_s, values)
    (stretch,) = stretches_of(record)
    assert searched_parts(record, SIGNALS, stretch, frequency_hz=50.0) == (stretch,)
    with limits(LONG_S=10.0):
        (part,) = searched_parts(record, SIGNALS, stretch, frequency_hz=50.0)
    assert part.stop - part.first < 100 * 64


def events_of(record: Record, *, scanned: bool) -> tuple[Event, ...]:
    stretches, _ = usable_stretches(record, frequency_hz=50.0)
    with limits(LONG_S=0.0 if scanned else 1e9, LONG_SAMPLES=1 << 40):
        return find_events(record, TERMINAL, stretches, nominal_hz=50.0)


@pytest.mark.parametrize("fault_type", FAULT_TYPES)
@pytest.mark.parametrize("samples_per_cycle", [16, 96])
def test_scanned_or_not_the_events_of_a_short_record_are_the_same(fault_type, samples_per_cycle):
    case = Case(
        fault_type=fault_type,
        samples_per_cycle=samples_per_cycle,
        inception_s=1.23456,
        open_s=1.33,
        duration_s=4.0,
        load_ohm=60 + 20j,
        load_place="end",
        snr_db=50.0,
    )
    record, _ = simulate(case)
    with limits(_PART_NUMBERS=1):
        scanned = events_of(record, scanned=True)
    plain = events_of(record, scanned=False)
    assert [(event.kind, event.fault_type) for event in plain] == [("fault", fault_type)]
    (one,), (other,) = scanned, plain
    assert (one.kind, one.fault_type, one.first_s) == (other.kind, other.fault_type, other.first_s)
    assert one.times_s.size < other.times_s.size
    assert one.prefault.window_s == other.prefault.window_s
    assert one.prefault.frequency_hz == other.prefault.frequency_hz
    ends = [{p: end and end.time_s for p, end in event.interruptions.items()} for event in (one, other)]
    assert ends[0] == ends[1]


FAULTS = (
    Dropped(at_s=3.1234, fault_type="AG"),
    Dropped(at_s=14.7, fault_type="BC", lasts_s=0.12),
    Dropped(at_s=17.2503, fault_type="BG", resistance_ohm=8.0),
    Dropped(at_s=36.4, fault_type="CAG", lasts_s=6.0),
    Dropped(at_s=58.5, fault_type="ABC"),
)
FIRST_FEEDER = Terminal(
    name="F1",
    currents=tuple(f"F1 I{p}" for p in "ABC"),
    voltages=tuple(f"Bus V{p}" for p in "ABC"),
)


@pytest.fixture(scope="module")
def minute(tmp_path_factory: pytest.TempPathFactory) -> Record:
    folder = tmp_path_factory.mktemp("minute")
    return read(write_long_record(folder, FAULTS, duration_s=60.0, samples_per_cycle=64, seed=11))


def test_each_fault_of_a_minute_is_found_and_nothing_else(minute):
    findings = examine(minute)
    assert [(event.kind, event.fault_type) for event in findings.events] == [
        ("fault", fault.fault_type) for fault in FAULTS
    ]
    for event, fault in zip(findings.events, FAULTS, strict=True):
        assert event.inception.time_s.value == pytest.approx(fault.at_s, abs=1 / 3200.0)
        # It ends at a current zero, within half a cycle and what the offset adds to it.
        assert 0.0 < event.clearing.time_s.value - fault.at_s - fault.lasts_s < 0.015


def test_events_of_a_minute_are_those_of_the_search_without_a_scan(minute):
    stretches, _ = usable_stretches(minute, frequency_hz=50.0)
    scanned = find_events(minute, FIRST_FEEDER, stretches, nominal_hz=50.0)
    with limits(LONG_S=1e9):
        plain = find_events(minute, FIRST_FEEDER, stretches, nominal_hz=50.0)
    assert [(event.fault_type, event.first_s) for event in scanned] == [
        (event.fault_type, event.first_s) for event in plain
    ]


def test_a_long_record_may_hold_more_faults_than_a_short_one(tmp_path: Path):
    faults = [Dropped(at_s=1.5 + 1.65 * k, fault_type=("AG", "BC", "ABC")[k % 3]) for k in range(36)]
    record = read(write_long_record(tmp_path, faults, duration_s=62.0, samples_per_cycle=64, seed=13))
    stretches, _ = usable_stretches(record, frequency_hz=50.0)
    events = find_events(record, FIRST_FEEDER, stretches, nominal_hz=50.0)
    assert [event.fault_type for event in events] == [fault.fault_type for fault in faults]


def test_no_event_in_a_quiet_minute(tmp_path: Path):
    record = read(write_long_record(tmp_path, (), duration_s=60.0, samples_per_cycle=64, seed=12))
    findings = examine(record)
    assert findings.terminals
    assert findings.events == ()


def test_not_all_of_a_long_record_is_read_for_its_frequency(monkeypatch):
    times_s, values = waves()
    record = record_of(times_s, values)
    lengths = []

    def noted(self: Record, keys: object = None) -> np.ndarray:
        lengths.append(self.n_samples)
        return original(self, keys)

    original = Record.signals
    monkeypatch.setattr(Record, "signals", noted)
    monkeypatch.setattr("analyzer.waveform.frequency.LONG_S", 2.0)
    assert power_frequency(record, TERMINAL) == (50.0, ())
    assert lengths == [6_400]
