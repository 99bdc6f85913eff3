from datetime import datetime, timedelta

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.records.delimited.timing import regular_rate
from tests.records.delimited.helpers import codes, message, read, refused


def timed(stamps: list[str], name: str = "time [s]") -> str:
    return f"{name},IA [A]\n" + "".join(f"{stamp},{k}.5\n" for k, stamp in enumerate(stamps))


@pytest.mark.parametrize(
    "rate_hz", [1000.0, 3200.0, 3840.0, 4800.0, 5000.0, 6400.0, 12800.0, 15360.0, 1e6 / 300]
)
@pytest.mark.parametrize("decimals", [5, 6, 9])
def test_rate_is_found_behind_rounded_times(rate_hz: float, decimals: int) -> None:
    times = [f"{k / rate_hz:.{decimals}f}" for k in range(400)]
    record = read(timed(times))
    assert record.sample_rates_hz == pytest.approx((rate_hz,), rel=1e-12)
    assert record.timebase.stamps_s is None
    np.testing.assert_allclose(record.times(), np.array(times, dtype=float), atol=0.51 * 10**-decimals)


def test_whole_microseconds_and_cut_decimals() -> None:
    assert read(timed([str(int(k * 312.5)) for k in range(64)], "t (us)")).sample_rates_hz == (3200.0,)


def test_numbers_of_a_fixed_count_of_digits() -> None:
    # Six significant digits get coarser from 1 s on: 1.00031 is printed to 10 µs, 0.000312500 to 0.1 ns.
    record = read(timed([f"{k / 3200:.6g}" for k in range(4000)]))
    assert record.sample_rates_hz == (3200.0,)


def test_stamps_coarser_than_the_step_are_enough_when_there_are_many() -> None:
    record = read(timed([f"{k / 3200:.3f}" for k in range(3200)]))
    assert record.sample_rates_hz == (3200.0,)


def test_coarse_stamps_of_a_short_record_are_refused() -> None:
    error = refused(timed([f"{k / 3200:.3f}" for k in range(40)]))
    assert error.code == "time-too-coarse"
    assert "rate" in error.hint


def test_one_displaced_sample_is_not_smoothed_away() -> None:
    times = [k / 1000 for k in range(100)]
    times[50] += 0.0002
    record = read(timed([f"{t:.4f}" for t in times]))
    assert "irregular-times" in codes(record)
    np.testing.assert_allclose(record.times(), times, atol=1e-12)


def test_gap_keeps_its_times() -> None:
    times = [k / 1000 for k in range(40) if k not in (20, 21)]
    record = read(timed([f"{t:.3f}" for t in times]))
    np.testing.assert_allclose(record.times(), times, atol=1e-12)
    assert "0.003 s" in message(record, "irregular-times")


def test_times_that_go_back_are_an_error_with_the_line() -> None:
    times = [*range(10), *range(5, 15)]
    error = refused(timed([f"{k / 1000:.3f}" for k in times]))
    assert (error.code, error.line) == ("time-not-rising", 12)


def test_a_few_times_that_go_back_are_left_out() -> None:
    times = [k / 1000 for k in range(500)]
    times[250] = 0.1
    record = read(timed([f"{t:.3f}" for t in times]))
    assert record.n_samples == 499
    assert "1 row left out" in message(record, "time-not-rising")
    assert 250.5 not in record.signal("IA")


def test_times_before_zero_count_from_the_first_sample() -> None:
    record = read(timed([f"{k / 1000 - 0.1:.3f}" for k in range(300)]))
    assert record.times()[0] == 0.0
    assert "-0.1 s" in message(record, "times-from-first")


@pytest.mark.parametrize(("scale", "unit"), [(1.0, "s"), (1e3, "ms"), (1e6, "us")])
def test_unit_of_unlabelled_times_is_guessed_from_the_rate(scale: float, unit: str) -> None:
    record = read(timed([f"{k / 4000 * scale:.6f}" for k in range(50)], "Time"))
    assert record.sample_rates_hz == (4000.0,)
    assert f"in {unit}," in message(record, "time-unit-guessed")


def test_unit_that_cannot_be_guessed_is_asked_for() -> None:
    error = refused(timed([str(k * 10**9) for k in range(20)], "Time"))
    assert error.code == "time-unit-unknown"
    assert read(timed([str(k * 10**9) for k in range(20)], "Time"), time_unit="ns").sample_rates_hz == (1.0,)


@pytest.mark.parametrize(
    ("zone", "offset"),
    [
        ("", None),
        ("Z", timedelta()),
        ("+02:00", timedelta(hours=2)),
        ("-0330", timedelta(hours=-3.5)),
        (" +05", timedelta(hours=5)),
    ],
)
@pytest.mark.parametrize("between", ["T", " "])
def test_iso_stamps_with_zone(zone: str, offset: timedelta | None, between: str) -> None:
    stamps = [f"2024-02-29{between}23:59:59.{999_000_000 + k * 250_000:09d}{zone}" for k in range(4)]
    record = read(timed([*stamps, f"2024-03-01{between}00:00:00.000000000{zone}"], "Timestamp"))
    assert record.sample_rates_hz == (4000.0,)
    assert record.start is not None
    assert record.start.second == datetime(2024, 2, 29, 23, 59, 59)
    assert (record.start.nanosecond, record.start.digits) == (999_000_000, 9)
    assert record.start.utc_offset == offset


def test_stamps_to_the_nanosecond_keep_it() -> None:
    stamps = [f"2024-05-01T12:00:00.{123_456_789 + k:09d}" for k in range(10)]
    record = read(timed(stamps, "t"))
    assert record.start is not None
    assert record.start.nanosecond == 123_456_789
    np.testing.assert_allclose(record.times(), np.arange(10) * 1e-9, rtol=1e-12)


def test_decimal_comma_in_stamps_and_apart_date_and_time() -> None:
    rows = "".join(f"2024/05/01;12:00:00,{k * 500:06d};{k},5\n" for k in range(12))
    record = read("Date;Time;IA [A]\n" + rows)
    assert record.sample_rates_hz == (2000.0,)
    assert record.start is not None
    assert record.start.isoformat() == "2024-05-01T12:00:00.000000"
    assert [c.name for c in record.analog] == ["IA"]


def test_zones_that_change_are_brought_to_utc() -> None:
    stamps = [
        "2024-10-27T02:59:59.999+02:00",
        "2024-10-27T02:00:00.000+01:00",
        "2024-10-27T02:00:00.001+01:00",
    ]
    record = read(timed(stamps, "t"))
    assert record.sample_rates_hz == (1000.0,)
    assert record.start is not None
    assert record.start.isoformat() == "2024-10-27T00:59:59.999+00:00"
    assert "time-zones-differ" in codes(record)


def test_times_of_day_pass_midnight() -> None:
    stamps = [f"23:59:59.{k:03d}" for k in range(990, 1000)] + [f"00:00:00.{k:03d}" for k in range(10)]
    record = read(timed(stamps, "time"))
    assert record.sample_rates_hz == (1000.0,)
    assert record.start is None


@pytest.mark.parametrize(
    "stamp", ["2024-13-01T00:00:0{}", "2024-02-30T00:00:0{}", "01/05/2024 12:00:0{}", "1.5.24 12:00:0{}"]
)
def test_stamps_that_are_none_are_one_clear_error(stamp: str) -> None:
    error = refused(timed([stamp.format(k) for k in range(5)], "time"))
    assert error.code == "time-stamps-not-read"
    assert "ISO 8601" in error.message + error.hint


def test_one_unreadable_time_among_regular_ones_keeps_its_row() -> None:
    record = read(timed(["0.000", "0.001", "what", "0.003", "0.004", "0.005"]))
    assert record.n_samples == 6
    assert record.sample_rates_hz == (1000.0,)
    assert "unreadable-cells" in codes(record)


@settings(deadline=None, derandomize=True, max_examples=60)
@given(
    rate_hz=st.integers(200, 200_000).map(float),
    n=st.integers(50, 3000),
    decimals=st.integers(6, 12),
    start=st.floats(-1.0, 1.0),
)
def test_found_rate_gives_times_within_the_printed_rounding(
    rate_hz: float, n: int, decimals: int, start: float
) -> None:
    printed = np.round(start + np.arange(n) / rate_hz, decimals)
    quantum = 10.0**-decimals
    found = regular_rate(printed, quantum)
    assert found is not None
    rate, deviation_s = found
    assert deviation_s <= quantum + 1e-14
    misfit = (printed - printed[0]) - np.arange(n) / rate
    assert np.ptp(misfit) <= quantum + 1e-14


@settings(deadline=None, derandomize=True, max_examples=60)
@given(
    rate_hz=st.integers(200, 20_000).map(float),
    n=st.integers(20, 500),
    at=st.integers(1, 18),
    shift=st.floats(0.02, 0.9),
)
def test_shift_of_one_sample_beyond_rounding_is_never_called_regular(
    rate_hz: float, n: int, at: int, shift: float
) -> None:
    times = np.arange(n) / rate_hz
    times[at] += shift / rate_hz
    assert regular_rate(times, 1e-9) is None
