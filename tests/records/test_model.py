"""The record, its channels, times and moments by themselves."""

from __future__ import annotations

import dataclasses
import pickle
from datetime import datetime, timedelta

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose, assert_array_equal

from analyzer.records import AnalogChannel, Clock, Moment, Problem, Record, RecordError
from analyzer.records.channels import unique_ids
from analyzer.records.problems import gathered
from analyzer.records.sources import ArraySource
from analyzer.records.text import decode_text, printable
from analyzer.records.timebase import TimeBase
from analyzer.records.units import parse_unit

# from_arrays


def test_from_arrays_scales_to_si() -> None:
    record = Record.from_arrays(
        {"I": ([1, 2, 3], "kA"), "V": (np.array([1.5, np.nan, 2]), "V")},
        sample_rate_hz=1000,
        digital={"T": [0, 1, 1]},
        station="S",
    )
    assert_array_equal(record.signals(), [[1000, 2000, 3000], [1.5, np.nan, 2]])
    assert_array_equal(record.times(), [0, 0.001, 0.002])
    assert_array_equal(record.states("T"), [0, 1, 1])
    assert (record.n_samples, record.origin.format, record.origin.sha256()) == (3, "memory", None)


def test_from_arrays_keeps_no_hold_of_what_it_was_given() -> None:
    values, times = np.arange(3.0), np.array([5.0, 6.0, 8.0])
    record = Record.from_arrays({"I": (values, "A")}, times_s=times)
    values[:] = times[:] = 99
    assert_array_equal(record.signal("I"), [0, 1, 2])
    assert_array_equal(record.times(), [0, 1, 3])


@pytest.mark.parametrize(
    "arguments",
    [
        {},
        {"sample_rate_hz": 1000.0, "times_s": [0, 1, 2]},
        {"sample_rate_hz": 0.0},
        {"sample_rate_hz": -50.0},
        {"sample_rate_hz": float("nan")},
        {"sample_rate_hz": float("inf")},
        {"times_s": [0, 1]},
        {"times_s": [0, 1, 1]},
        {"times_s": [0, 2, 1]},
        {"times_s": [0, 1, float("nan")]},
        {"sample_rate_hz": 1000.0, "digital": {"T": [0, 1]}},
    ],
)
def test_from_arrays_refuses_what_makes_no_record(arguments: dict[str, object]) -> None:
    with pytest.raises(ValueError):  # noqa: PT011 - each has a message of its own
        Record.from_arrays({"I": ([1, 2, 3], "A")}, **arguments)  # type: ignore[arg-type]


def test_from_arrays_refuses_channels_of_different_length() -> None:
    with pytest.raises(ValueError):  # noqa: PT011 - numpy's own
        Record.from_arrays({"I": ([1, 2, 3], "A"), "V": ([1, 2], "V")}, sample_rate_hz=1.0)


def test_record_of_digital_channels_alone_and_of_nothing() -> None:
    record = Record.from_arrays({}, sample_rate_hz=10.0, digital={"T": [1, 0]})
    assert (record.n_samples, record.signals().shape) == (2, (0, 2))
    empty = Record.from_arrays({}, sample_rate_hz=10.0)
    assert (empty.n_samples, empty.duration_s, empty.segments) == (0, 0.0, ())
    assert empty.survey().problems == ()


def test_record_cannot_be_changed() -> None:
    record = Record.from_arrays({"I": ([1, 2, 3], "A")}, sample_rate_hz=1.0)
    with pytest.raises(dataclasses.FrozenInstanceError):
        record.first = 1  # type: ignore[misc]
    with pytest.raises(ValueError, match="read-only"):
        record.signal("I")[0] = 5
    with pytest.raises(ValueError, match="read-only"):
        record.times()[0] = 5


def test_names_of_frame_columns_never_collide() -> None:
    record = Record.from_arrays(
        {"T": ([1.0], "A"), "T (digital)": ([2.0], "A")}, sample_rate_hz=1.0, digital={"T": [1]}
    )
    frame = record.to_frame()
    assert list(frame.columns) == ["T", "T (digital)", "T (digital) (digital)"]
    assert frame.iloc[0].tolist() == [1.0, 2.0, 1.0]


def test_array_source_needs_two_equal_lengths() -> None:
    with pytest.raises(ValueError, match="equal length"):
        ArraySource(np.zeros((1, 3)), np.zeros((1, 2), dtype=np.uint8))


def test_segments_of_a_part_count_from_its_own_first_sample() -> None:
    record = Record.from_arrays({"I": (np.arange(10.0), "A")}, sample_rate_hz=1.0)
    record = dataclasses.replace(record, timebase=TimeBase.from_rates([10.0, 100.0], [4, 10], n_samples=10))
    part = record.between(0.2, 0.42)
    assert [(s.first, s.stop, s.rate_hz) for s in part.segments] == [(0, 2, 10.0), (2, 5, 100.0)]
    assert_allclose([s.start_s for s in part.segments], [0.2, 0.4], rtol=0, atol=1e-15)
    assert part.duration_s == pytest.approx(0.22)


# Time base


@settings(deadline=None, derandomize=True, max_examples=60)
@given(
    rates=st.lists(st.floats(0.01, 1e6), min_size=1, max_size=5),
    lengths=st.lists(st.integers(0, 20), min_size=5, max_size=5),
    data=st.data(),
)
def test_times_by_rates_in_any_part(rates: list[float], lengths: list[int], data: st.DataObject) -> None:
    stops = np.cumsum(lengths)[: len(rates)].tolist()
    n = data.draw(st.integers(1, 120))
    base = TimeBase.from_rates(rates, stops, n_samples=n)
    times = base.times()
    assert times.shape == (n,)
    assert times[0] == 0.0
    assert np.all(np.diff(times) > 0)
    assert base.duration_s == times[-1]
    first = data.draw(st.integers(0, n))
    stop = data.draw(st.integers(first, n))
    assert_array_equal(base.times(first, stop), times[first:stop])
    for k in {0, n // 2, n - 1}:
        if k == 0 or times[k] - times[k - 1] > 4e-9:
            assert base.index_at(float(times[k])) == k
    assert base.index_at(float(times[-1]) + 1.0) == n


def test_index_at_the_ends_of_time() -> None:
    for base in (
        TimeBase.from_rates([10.0], [4], n_samples=4),
        TimeBase.from_stamps(np.array([0.0, 0.1, 0.2, 0.3])),
    ):
        assert base.index_at(-np.inf) == 0
        assert base.index_at(np.inf) == 4
        assert base.index_at(np.nan) == 4
        assert base.index_at(0.1 + 0.2) == 3  # 0.30000000000000004
        assert base.index_at(0.11) == 2


@pytest.mark.parametrize("rate_hz", [0.0, -1.0, np.nan, np.inf])
def test_rates_must_be_positive(rate_hz: float) -> None:
    with pytest.raises(ValueError, match="positive"):
        TimeBase.from_rates([rate_hz], [3], n_samples=3)


def test_step_at_a_change_of_rate() -> None:
    base = TimeBase.from_rates([10.0, 100.0], [2, 4], n_samples=4)
    assert_allclose(base.times(), [0, 0.1, 0.2, 0.21], rtol=0, atol=1e-15)
    base = TimeBase.from_rates([10.0, 100.0], [2, 4], n_samples=4, own_step_first={2})
    assert_allclose(base.times(), [0, 0.1, 0.11, 0.12], rtol=0, atol=1e-15)


def test_stamps_of_one_sample_and_none() -> None:
    assert TimeBase.from_stamps(np.array([7.0])).times().tolist() == [0.0]
    assert TimeBase.from_stamps(np.empty(0)).n_samples == 0


# Moments and clocks


def moment(nanosecond: int = 0, digits: int = 6) -> Moment:
    return Moment(second=datetime(2024, 12, 31, 23, 59, 59), nanosecond=nanosecond, digits=digits)


@pytest.mark.parametrize(
    ("digits", "text"),
    [(0, "2024-12-31T23:59:59"), (3, "2024-12-31T23:59:59.123"), (6, "2024-12-31T23:59:59.123456"),
     (9, "2024-12-31T23:59:59.123456789")],
)  # fmt: skip
def test_moment_in_iso_8601(digits: int, text: str) -> None:
    assert moment(123_456_789, digits).isoformat() == text
    assert (
        moment(123_456_789, digits).in_zone(timedelta(hours=-3, minutes=-30)).isoformat() == f"{text}-03:30"
    )
    assert moment(123_456_789, digits).in_zone(timedelta(0)).isoformat() == f"{text}+00:00"


def test_moment_of_an_early_year_has_four_digits() -> None:
    assert Moment(second=datetime(87, 1, 2), nanosecond=0).isoformat() == "0087-01-02T00:00:00.000000"


def test_seconds_between_moments_to_the_nanosecond() -> None:
    later = Moment(second=datetime(2025, 1, 1), nanosecond=1, digits=9)
    assert later.seconds_after(moment(999_999_999, 9)) == pytest.approx(2e-9, abs=1e-16)
    assert moment().seconds_after(moment(500_000_000)) == -0.5


@given(seconds=st.floats(-1e5, 1e5), start=st.integers(0, 999_999_999))
@settings(deadline=None, derandomize=True, max_examples=50)
def test_a_later_moment_is_that_much_later(seconds: float, start: int) -> None:
    earlier = moment(start, 9)
    later = earlier.later(seconds)
    assert 0 <= later.nanosecond < 10**9
    assert later.seconds_after(earlier) == pytest.approx(seconds, abs=1e-9)
    assert moment(0, 6).later(seconds).nanosecond % 1000 == 0


@pytest.mark.parametrize(
    ("code", "words"),
    [(None, "not stated"), (0, "locked to a reliable source"), (1, "unlocked, within 10^-9 s"),
     (11, "unlocked, within 10^1 s"), (15, "clock failed, time not reliable")],
)  # fmt: skip
def test_clock_quality_in_words(code: int | None, words: str) -> None:
    assert Clock(quality_code=code).quality == words


# Units


@pytest.mark.parametrize(
    ("text", "quantity", "si", "factor"),
    [
        ("A", "current", "A", 1.0), ("kA", "current", "A", 1e3), ("mA", "current", "A", 1e-3),
        ("µA", "current", "A", 1e-6), ("V", "voltage", "V", 1.0), ("kV", "voltage", "V", 1e3),
        ("MW", "power", "W", 1e6), ("Mvar", "power", "var", 1e6), ("Hz", "frequency", "Hz", 1.0),
        ("rad", "angle", "deg", 180 / np.pi), ("%", "ratio", "1", 0.01), ("one", "ratio", "1", 1.0),
        ("ms", "time", "s", 1e-3), ("°C", "temperature", "°C", 1.0), ("(kV)", "voltage", "V", 1e3),
        ("安", "current", "A", 1.0), ("千伏", "voltage", "V", 1e3), ("КВ", "voltage", "V", 1e3),
    ],
)  # fmt: skip
def test_known_units(text: str, quantity: str, si: str, factor: float) -> None:
    unit = parse_unit(text)
    assert unit is not None
    assert (unit.quantity, unit.si) == (quantity, si)
    assert unit.factor == pytest.approx(factor, rel=1e-15)


@pytest.mark.parametrize(
    "text", ["", "   ", "MV", "MA", "mega", "A V", "k", "volt ampere hour", "\x00", "V\n?"]
)
def test_unknown_units_are_never_a_factor_of_one(text: str) -> None:
    assert parse_unit(text) is None
    channel = AnalogChannel(number=0, id="X", name="X", unit=text)
    assert channel.refusal is not None
    assert (channel.refusal.code, channel.quantity, channel.si_unit) == ("unknown-unit", None, "")


# Names, texts, problems


def test_unique_ids() -> None:
    assert unique_ids(["a", "a", "", "a", "a #2"], kind="analog") == [
        "a",
        "a #2",
        "analog 3",
        "a #4",
        "a #2 #5",
    ]
    assert unique_ids(["", "digital 1"], kind="digital") == ["digital 1", "digital 1 #2"]


def test_printable_text_is_one_line_without_control_codes() -> None:
    assert printable(" a\tb\r\nc\x1b[2J\u202e\ud800 ") == "a b  c [2J"
    assert len(printable("x" * 999, limit=10)) == 10


def test_text_without_letters_beyond_ascii_is_utf_8() -> None:
    assert decode_text(b"abc") == ("abc", "utf-8")
    with pytest.raises(LookupError):
        decode_text(b"abc", encoding="no-such")


def test_problems_of_many_places_are_one() -> None:
    problems = [Problem(code="c", message="m", where=f"line {k}") for k in range(20)]
    (one,) = gathered([*problems, problems[0]])
    assert one.where == "line 0; line 1; line 2; line 3; line 4; line 5; line 6; line 7 and 13 more"


def test_errors_say_where_and_survive_pickling() -> None:
    error = RecordError("bad-x", "is odd", path="a\nb.cfg", line=7, field="skew", hint="mend it")
    assert str(error) == "a b.cfg, line 7, skew: is odd (mend it)"
    again = pickle.loads(pickle.dumps(error))
    assert (str(again), again.code, again.path, again.line, again.field) == (
        str(error), "bad-x", "a\nb.cfg", 7, "skew")  # fmt: skip
