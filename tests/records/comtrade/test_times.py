"""Sample times: rates, stamps, skew, dates and clocks."""

from __future__ import annotations

from datetime import datetime, timedelta
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from analyzer.records import Record, RecordError
from analyzer.records.comtrade.dates import parse_moment, parse_offset
from tests.records.comtrade.makers import (
    FOUR,
    TRIPS,
    analog_line,
    ascii_rows,
    binary_rows,
    cfg,
    codes,
    four_samples,
    record_of,
)


def one_channel(folder: Path, stamps: list[object], **options: object) -> Record:
    """A record whose stamps alone tell the time, unless rates are given."""
    settings: dict[str, object] = {"rates": [f"0,{len(stamps)}"], "n_rates": "0", "digital": []}
    settings.update(options)
    data = ascii_rows([range(len(stamps))], stamps=stamps)
    return record_of(folder, cfg(**settings), data)  # type: ignore[arg-type]


# Rates


def test_times_are_samples_over_the_rate(tmp_path: Path) -> None:
    record = one_channel(tmp_path, [0, 0, 0], rates=["30707.244140625,3"], n_rates=None)
    assert_array_equal(record.times(), np.arange(3) / 30707.244140625)
    assert record.sample_rates_hz == (30707.244140625,)


def test_rates_that_alias_the_power_frequency(tmp_path: Path) -> None:
    # Stretches at the power frequency itself, between fast ones; the step at a change is the earlier rate's.
    rates, stops = [3200.0, 50.0, 3200.0, 50.0], [32, 40, 72, 80]
    steps = np.repeat([1 / r for r in rates], np.diff([0, *stops]))[:-1]
    times = np.concatenate(([0.0], np.cumsum(steps)))
    stamps = np.rint(times * 1e6).astype(int)
    lines = [f"{r:g},{s}" for r, s in zip(rates, stops, strict=True)]
    text = cfg(digital=[], rates=lines, kind="BINARY")
    record = record_of(tmp_path, text, binary_rows([range(80)], stamps=stamps.tolist()))
    assert_allclose(record.times(), times, rtol=0, atol=1e-12)
    assert [(s.first, s.stop, s.rate_hz) for s in record.segments] == [
        (0, 32, 3200.0), (32, 40, 50.0), (40, 72, 3200.0), (72, 80, 50.0)]  # fmt: skip
    assert_allclose([s.start_s for s in record.segments], times[[0, 32, 40, 72]], rtol=0, atol=1e-12)
    assert record.sample_rates_hz == (3200.0, 50.0)
    assert not codes(record.survey()) & {"stamps-jump", "stamps-disagree", "stamps-wrap"}


def test_step_at_a_change_of_rate_follows_the_stamps(tmp_path: Path) -> None:
    # Other recorders put the first sample of a stretch one period of its own rate after the last.
    stamps = [0, 1000, 2000, 4000, 6000, 8000]
    record = one_channel(tmp_path, stamps, rates=["1000,3", "500,6"], n_rates=None)
    assert_allclose(record.times(), np.array(stamps) * 1e-6, rtol=0, atol=1e-15)
    stamps = [0, 1000, 2000, 3000, 5000, 7000]
    record = one_channel(tmp_path, stamps, rates=["1000,3", "500,6"], n_rates=None)
    assert_allclose(record.times(), np.array(stamps) * 1e-6, rtol=0, atol=1e-15)


def test_hundreds_of_rate_lines_that_follow_the_frequency(tmp_path: Path) -> None:
    rates = 2400.0 + np.sin(np.arange(300)) * 5
    lines = [f"{rate:.6f},{24 * (k + 1)}" for k, rate in enumerate(rates)]
    n = 24 * 300
    text = cfg(digital=[], rates=lines, kind="BINARY")
    record = record_of(tmp_path, text, binary_rows([np.zeros(n)], stamps=[0] * n))
    periods = np.repeat([1 / round(rate, 6) for rate in rates], 24)[:-1]
    assert_allclose(record.times(), np.concatenate(([0.0], np.cumsum(periods))), rtol=0, atol=1e-12)
    assert len(record.segments) == 300


def test_rate_lines_with_the_same_last_sample_are_noted(tmp_path: Path) -> None:
    record = one_channel(tmp_path, [0, 0, 0, 0], rates=["1000,2", "1000,4", "1000,4", "500,4"], n_rates=None)
    assert_allclose(record.times(), np.arange(4) / 1000, rtol=0, atol=1e-15)
    assert "empty-rate" in codes(record)


@pytest.mark.parametrize(("declared", "noted"), [(4, False), (3, False), (885, True), (2, True), (0, True)])
def test_last_sample_that_disagrees_with_the_data(tmp_path: Path, declared: int, noted: bool) -> None:
    record = record_of(tmp_path, cfg(rates=[f"1000,{declared}"]), four_samples())
    assert record.n_samples == 4
    assert_allclose(record.times(), np.arange(4) / 1000, rtol=0, atol=1e-15)
    assert ("sample-count" in codes(record)) == noted


def test_sample_numbers_from_zero_shift_the_change_of_rate(tmp_path: Path) -> None:
    data = ascii_rows([range(4)], first=0, stamps=["", "", "", ""])
    record = record_of(tmp_path, cfg(digital=[], rates=["1000,1", "500,3"]), data)
    assert_allclose(record.times(), [0, 0.001, 0.002, 0.004], rtol=0, atol=1e-15)
    assert "counts-from-zero" in codes(record)


@pytest.mark.parametrize("kind", ["ASCII", "BINARY"])
def test_sample_numbers_that_jump_are_noted(tmp_path: Path, kind: str) -> None:
    rows = ascii_rows if kind == "ASCII" else binary_rows
    data = rows([[1, 2]], [[0, 0]]) + rows([[3, 4, 5, 6]], [[0] * 4], first=8)
    record = record_of(tmp_path, cfg(kind=kind, rates=["1000,6"]), data).survey()
    assert record.n_samples == 6
    assert "numbers-jump" in codes(record)


def test_nominal_frequency_is_handed_on_whatever_the_wave_does(tmp_path: Path) -> None:
    wave = np.rint(1000 * np.sin(2 * np.pi * 60 * np.arange(200) / 1000)).astype(int)
    record = record_of(tmp_path, cfg(digital=[], rates=["1000,200"]), ascii_rows([wave]))
    assert record.nominal_frequency_hz == 50.0


@pytest.mark.parametrize("text", ["0", "0.000000", "", "fifty", "-50", "1e300"])
def test_nominal_frequency_that_is_none(tmp_path: Path, text: str) -> None:
    configuration = cfg(frequency=text or ",")
    record = record_of(tmp_path, configuration, four_samples())
    assert record.nominal_frequency_hz is None
    assert "frequency-unstated" in codes(record)


# Stamps


def test_stamps_alone_with_a_time_multiplier(tmp_path: Path) -> None:
    record = one_channel(tmp_path, [0, 100, 250, 300], tail=["10"])
    assert_allclose(record.times(), [0, 1e-3, 2.5e-3, 3e-3], rtol=0, atol=1e-15)
    assert "times-from-stamps" in codes(record)
    assert record.sample_rates_hz == (pytest.approx(1000.0),)


@pytest.mark.parametrize("lines", [["0,4"], []])
def test_no_rate_line_at_all_or_a_rate_of_zero(tmp_path: Path, lines: list[str]) -> None:
    record = one_channel(tmp_path, [0, 625, 1250, 1875], rates=lines)
    assert_allclose(record.times(), np.arange(4) / 1600, rtol=0, atol=1e-15)


def test_one_rate_line_of_zero(tmp_path: Path) -> None:
    record = one_channel(tmp_path, [0, 625, 1250, 1875], n_rates="1")
    assert_allclose(record.times(), np.arange(4) / 1600, rtol=0, atol=1e-15)


def test_a_stretch_without_rate_leaves_all_to_the_stamps(tmp_path: Path) -> None:
    record = one_channel(tmp_path, [0, 1000, 3000, 7000], rates=["1000,2", "0,4"], n_rates=None)
    assert_allclose(record.times(), [0, 1e-3, 3e-3, 7e-3], rtol=0, atol=1e-15)


@pytest.mark.parametrize(
    ("start", "trigger", "unit_s"),
    [
        ("01/02/2023,10:00:00.000000", "01/02/2023,10:00:00.001000", 1e-6),
        ("01/02/2023,10:00:00.000000000", "01/02/2023,10:00:00.001000000", 1e-9),
        ("01/02/2023,10:00:00.000000", "01/02/2023,10:00:00.001000000", 1e-9),
        ("01/02/2023,10:00:00.0", "01/02/2023,10:00:00.001", 1e-6),
    ],
)
def test_nine_decimals_make_the_nanosecond_the_base(
    tmp_path: Path, start: str, trigger: str, unit_s: float
) -> None:
    record = one_channel(tmp_path, [0, 200_000, 400_000], revision="2013", start=start, trigger=trigger)
    assert_allclose(record.times(), np.array([0, 2e5, 4e5]) * unit_s, rtol=1e-12)


@pytest.mark.parametrize("modulus", [1 << 16, 1 << 32])
@pytest.mark.parametrize("kind", ["ASCII", "BINARY"])
def test_stamps_that_wrap(tmp_path: Path, modulus: int, kind: str) -> None:
    true = modulus - 1500 + 625 * np.arange(300)
    stamps = (true % modulus).tolist()
    text = cfg(digital=[], rates=["0,300"], n_rates="0", kind=kind)
    data = (ascii_rows if kind == "ASCII" else binary_rows)([range(300)], stamps=stamps)
    record = record_of(tmp_path, text, data)
    assert_allclose(record.times(), np.arange(300) * 625e-6, rtol=0, atol=1e-12)
    assert "stamps-wrap" in codes(record)


def test_stamps_that_wrap_beside_a_rate_do_no_harm(tmp_path: Path) -> None:
    stamps = (np.arange(1000) * 174 % 65536).tolist()
    text = cfg(digital=[], rates=["5760,1000"], kind="BINARY")
    record = record_of(tmp_path, text, binary_rows([range(1000)], stamps=stamps)).survey()
    assert_array_equal(record.times(), np.arange(1000) / 5760)
    assert "stamps-wrap" in codes(record)
    assert "stamps-disagree" not in codes(record)


def test_missing_stamps_lie_between_the_others(tmp_path: Path) -> None:
    missing = 0xFFFFFFFF
    stamps = [missing, 1000, 2000, missing, missing, 5000, missing]
    for kind, rows in (("ASCII", ascii_rows), ("BINARY", binary_rows)):
        text = cfg(digital=[], rates=["0,7"], n_rates="0", kind=kind)
        record = record_of(tmp_path, text, rows([range(7)], stamps=stamps))
        assert_allclose(record.times(), np.arange(7) * 1e-3, rtol=0, atol=1e-12)
        assert "stamps-missing" in codes(record)


def test_missing_stamps_beside_a_rate_do_no_harm(tmp_path: Path) -> None:
    text = cfg(digital=[], rates=["1000,3"], kind="BINARY")
    record = record_of(tmp_path, text, binary_rows([range(3)], stamps=[0xFFFFFFFF] * 3)).survey()
    assert_array_equal(record.times(), np.arange(3) / 1000)
    assert codes(record) == set()


def test_empty_stamp_column(tmp_path: Path) -> None:
    record = one_channel(tmp_path, ["", "", ""], rates=["1000,3"], n_rates=None)
    assert_array_equal(record.times(), np.arange(3) / 1000)
    with pytest.raises(RecordError) as caught:
        one_channel(tmp_path, ["", "", ""])
    assert caught.value.code == "no-time"


@pytest.mark.parametrize("stamp", [0, 5, 0xFFFFFFFF, "nan", "inf", "1e300"])
def test_stamps_that_tell_no_time_are_an_error_and_no_guess(tmp_path: Path, stamp: object) -> None:
    with pytest.raises(RecordError) as caught:
        one_channel(tmp_path, [stamp] * 4)
    assert caught.value.code == "no-time"


def test_stamps_that_step_back_once_are_mended(tmp_path: Path) -> None:
    record = one_channel(tmp_path, [0, 1000, 2000, 1500, 2500, 3500])
    assert np.all(np.diff(record.times()) > 0)
    assert "stamps-backward" in codes(record)


def test_large_stamps_keep_their_differences(tmp_path: Path) -> None:
    base = 10**14
    record = one_channel(tmp_path, [base, base + 1, base + 3])
    assert_allclose(record.times(), [0, 1e-6, 3e-6], rtol=0, atol=1e-15)


def test_equal_stamps_beside_a_rate_are_noted(tmp_path: Path) -> None:
    record = one_channel(tmp_path, [7, 7, 7], rates=["1000,3"], n_rates=None)
    assert "stamps-constant" in codes(record)


def test_stamps_of_another_interval_than_the_rate_are_noted(tmp_path: Path) -> None:
    record = one_channel(tmp_path, [0, 10, 20, 30], rates=["1000,4"], n_rates=None)
    assert "stamps-disagree" in codes(record)
    assert_array_equal(record.times(), np.arange(4) / 1000)


def test_a_gap_that_only_the_stamps_tell_is_noted(tmp_path: Path) -> None:
    stamps = [0, 1000, 2000, 900_000, 901_000]
    record = one_channel(tmp_path, stamps, rates=["1000,5"], n_rates=None)
    messages = [p.message for p in record.problems if p.code == "stamps-jump"]
    assert len(messages) == 1
    assert "0.0020 s (0.8980 s)" in messages[0]


def test_stamps_of_a_long_binary_file_are_compared_block_by_block(tmp_path: Path) -> None:
    n = (1 << 20) + 10
    stamps = np.arange(n) * 100
    stamps[1 << 20 :] += 50_000  # between the last sample of one block and the first of the next
    record = record_of(
        tmp_path, cfg(digital=[], rates=[f"10000,{n}"], kind="BINARY"),
        binary_rows([np.zeros(n)], stamps=stamps.tolist()),
    ).survey()  # fmt: skip
    assert [p.code for p in record.problems] == ["stamps-jump"]


@pytest.mark.parametrize("text", ["0", "-1", "x", "1e300", "1e-300", "nan", "inf"])
def test_time_multiplier_that_is_none_counts_as_one(tmp_path: Path, text: str) -> None:
    record = one_channel(tmp_path, [0, 1000, 2000], tail=[text])
    assert_allclose(record.times(), [0, 1e-3, 2e-3], rtol=0, atol=1e-15)
    assert "bad-multiplier" in codes(record)


# Skew


def test_skew_belongs_to_its_channel_alone(tmp_path: Path) -> None:
    lines = [
        analog_line(1, "IA", skew="250"),
        analog_line(2, "IB", skew="0"),
        analog_line(3, "IC", skew="-50.5"),
    ]
    record = record_of(tmp_path, cfg(analog=lines), ascii_rows([FOUR] * 3, [TRIPS]))
    times = np.arange(4) / 1000
    assert_array_equal(record.times(), times)
    assert_allclose(record.channel_times("IA"), times + 250e-6, rtol=0, atol=1e-15)
    assert_array_equal(record.channel_times("IB"), times)
    assert_allclose(record.channel_times("IC"), times - 50.5e-6, rtol=0, atol=1e-15)


# Dates


@pytest.mark.parametrize(
    ("text", "month_first", "expected"),
    [
        ("01/02/2023,10:00:00.000001", False, "2023-02-01T10:00:00.000001"),
        ("01/02/2023,10:00:00.000001", True, "2023-01-02T10:00:00.000001"),
        ("13/02/2023,10:00:00.5", True, "2023-02-13T10:00:00.500000"),
        ("02/13/2023,10:00:00.5", False, "2023-02-13T10:00:00.500000"),
        ("1/2/23, 9:05:07", False, "2023-02-01T09:05:07.000000"),
        ("02/01/91,10:00:00.25", True, "1991-02-01T10:00:00.250000"),
        ("01/02/79,10:00:00", False, "2079-02-01T10:00:00.000000"),
        ("01/02/80,10:00:00", False, "1980-02-01T10:00:00.000000"),
        ("2023/02/01,10:00:00.123456789", False, "2023-02-01T10:00:00.123456789"),
        ("01-02-2023,10:00:00.", False, "2023-02-01T10:00:00.000000"),
        ("01.02.2023,10:00:00.000100", False, "2023-02-01T10:00:00.000100"),
        ("31/12/2016,23:59:60.5", False, "2017-01-01T00:00:00.500000"),
        ("31/12/2016,24:00:00", False, "2017-01-01T00:00:00.000000"),
        ("01/02/2023,10:00:00.1234567899999", False, "2023-02-01T10:00:00.123456789"),
        ("01/02/2023,10:00:00.1,extra", False, "2023-02-01T10:00:00.100000"),
    ],
)
def test_dates(text: str, month_first: bool, expected: str) -> None:
    moment, _ = parse_moment(text, month_first=month_first)
    assert moment is not None
    assert moment.isoformat() == expected


@pytest.mark.parametrize(
    "text",
    ["", ",", "00/00/0000,00:00:00", "32/01/2023,10:00:00", "01/02/2023", "01/02/2023,25:00:00",
     "29/02/2023,10:00:00", "31/12/9999,24:00:00", "01/02/2023,10:61:00", "a,b", "99/99/99,99:99:99"],
)  # fmt: skip
def test_dates_that_are_none(text: str) -> None:
    moment, remark = parse_moment(text, month_first=False)
    assert moment is None
    assert remark


def test_record_without_dates_is_read(tmp_path: Path) -> None:
    record = record_of(tmp_path, cfg(start=",", trigger="00/00/0000,00:00:00.000"), four_samples())
    assert (record.start, record.trigger, record.trigger_s) == (None, None, None)
    assert "date-unstated" in codes(record)


def test_month_comes_first_in_1991_only(tmp_path: Path) -> None:
    old = cfg(revision=None, analog=[analog_line(fields=10)], digital=["1,T,0"],
              start="02/01/91,10:00:00.000000", trigger="02/01/91,10:00:00.001000", tail=())  # fmt: skip
    record = record_of(tmp_path, old, four_samples())
    assert record.origin.revision == 1991
    assert record.start is not None
    assert record.start.second == datetime(1991, 2, 1, 10)
    assert record.trigger_s == pytest.approx(1e-3, abs=1e-12)
    record = record_of(
        tmp_path, cfg(start="02/01/1999,10:00:00", trigger="02/01/1999,10:00:00"), four_samples()
    )
    assert record.start is not None
    assert record.start.second == datetime(1999, 1, 2, 10)


def test_trigger_outside_the_record_is_noted(tmp_path: Path) -> None:
    record = record_of(tmp_path, cfg(trigger="01/01/1970,00:00:00.000000"), four_samples())
    assert "trigger-outside" in codes(record)
    assert record.trigger_s is not None
    assert record.trigger_s < -1e9


@pytest.mark.parametrize(
    ("code", "hours"),
    [("0", 0.0), ("-4", -4.0), ("+5h30", 5.5), ("-5h30", -5.5), ("5:45", 5.75), ("x", None), ("", None),
     ("+19", None), ("3h75", None)],
)  # fmt: skip
def test_offsets_from_utc(code: str, hours: float | None) -> None:
    assert parse_offset(code) == (None if hours is None else timedelta(hours=hours))


def test_clock_of_2013(tmp_path: Path) -> None:
    text = cfg(revision="2013", tail=["1", "-5h30,-5h30", "B,3"], start="12/01/2011,05:55:30.075011")
    record = record_of(tmp_path, text, four_samples())
    clock = record.clock
    assert (clock.time_code, clock.local_code, clock.quality_code) == ("-5h30", "-5h30", 11)
    assert clock.leap_second == "unknown"
    assert clock.quality == "unlocked, within 10^1 s"
    assert record.start is not None
    assert record.start.isoformat() == "2011-01-12T05:55:30.075011-05:30"


@pytest.mark.parametrize(
    ("tail", "quality", "leap"),
    [(["1", "0,0", "0,0"], 0, "none"), (["1", "0,0", "F,1"], 15, "added"),
     (["1", "0,0", "4,2"], 4, "subtracted"), (["1", "0,0"], None, "unknown"), (["1"], None, "unknown"),
     ([], None, "unknown"), (["1", "x", "G"], None, "unknown")],
)  # fmt: skip
def test_clock_that_is_cut_short(tmp_path: Path, tail: list[str], quality: int | None, leap: str) -> None:
    record = record_of(tmp_path, cfg(revision="2013", tail=tail), four_samples())
    assert (record.clock.quality_code, record.clock.leap_second) == (quality, leap)
