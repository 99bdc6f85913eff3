"""Scaling, units, sides and missing samples."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_array_equal

from analyzer.records import ReadOptions, RecordError
from analyzer.records.comtrade.binary import missing_in_1991
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

NAN = float("nan")


def test_value_is_multiplier_times_stored_plus_addend(tmp_path: Path) -> None:
    line = analog_line(a="0.123456789", b="0.5")
    record = record_of(tmp_path, cfg(analog=[line]), four_samples())
    assert_array_equal(record.signal("IA"), 0.123456789 * np.array(FOUR) + 0.5)
    assert_array_equal(record.stored(["IA"])[0], FOUR)
    assert_array_equal(record.states("TRIP"), TRIPS)


@pytest.mark.parametrize(
    ("unit", "factor"),
    [
        ("A", 1.0),
        (" kA ", 1e3),
        ("mA", 1e-3),
        ("ampere", 1.0),
        ("Amps", 1.0),
        ("KILOAMPERE", 1e3),
        ("\u0410", 1.0),  # Cyrillic
        ("\u043a\u0410", 1e3),  # both letters Cyrillic
        ("k\u0410", 1e3),  # one of them
        ("\u0430\u043c\u043f\u0435\u0440", 1.0),
        ("[A]", 1.0),
    ],
)
def test_units_of_current(tmp_path: Path, unit: str, factor: float) -> None:
    record = record_of(tmp_path, cfg(analog=[analog_line(unit=unit, a="1")]), four_samples())
    channel = record.channel("IA")
    assert (channel.quantity, channel.si_unit) == ("current", "A")
    assert_array_equal(record.signal("IA"), np.array(FOUR) * factor)


@pytest.mark.parametrize(
    ("unit", "factor"),
    [("V", 1.0), ("kV", 1e3), ("volt", 1.0), ("Volts", 1.0), ("\u0412", 1.0), ("\u043a\u0412", 1e3)],
)
def test_units_of_voltage(tmp_path: Path, unit: str, factor: float) -> None:
    line = analog_line(name="VA", unit=unit, a="1")
    record = record_of(tmp_path, cfg(analog=[line]), four_samples())
    assert (record.channel("VA").quantity, record.channel("VA").si_unit) == ("voltage", "V")
    assert_array_equal(record.signal("VA"), np.array(FOUR) * factor)


@pytest.mark.parametrize("unit", ["", "Q7", "MV", "MA", "A/V", "primary"])
def test_unknown_unit_is_an_error_of_its_channel_alone(tmp_path: Path, unit: str) -> None:
    lines = [analog_line(1, "X", unit), analog_line(2, "IA", "A", a="1")]
    record = record_of(tmp_path, cfg(analog=lines), ascii_rows([FOUR, FOUR], [TRIPS])).survey()
    with pytest.raises(RecordError) as caught:
        record.signal("X")
    assert caught.value.code == "unknown-unit"
    assert "X" in caught.value.where
    with pytest.raises(RecordError):
        record.signals()
    assert_array_equal(record.signal("IA"), FOUR)
    assert_array_equal(record.as_written(["X"])[0], 0.5 * np.array(FOUR))
    assert "unknown-unit" in codes(record)
    frame = record.to_frame()
    assert frame.attrs["units"] == {"X": f"as written: {unit}", "IA": "A"}


def test_stated_unit_goes_before_the_file(tmp_path: Path) -> None:
    line = analog_line(name="X", unit="Q7", a="1")
    record = record_of(tmp_path, cfg(analog=[line]), four_samples(), options=ReadOptions(units={"X": "kA"}))
    assert_array_equal(record.signal("X"), 1e3 * np.array(FOUR))


def test_rms_and_angle_channels_among_instantaneous_ones(tmp_path: Path) -> None:
    lines = [
        analog_line(1, "IA", "A", a="1", primary="600", secondary="1", side="S"),
        analog_line(2, "IA RMS", "A", a="1", primary="600", secondary="1", side="S"),
        analog_line(3, "IA angle", "\u00b0", a="1", primary="600", secondary="1", side="S"),
        analog_line(4, "f", "Hz", a="0.001", primary="600", secondary="1", side="S"),
    ]
    data = ascii_rows([FOUR, FOUR, [-179, 180, 0, 90], [50000] * 4], [TRIPS])
    record = record_of(tmp_path, cfg(analog=lines), data)
    assert [c.quantity for c in record.analog] == ["current", "current", "angle", "frequency"]
    assert_array_equal(record.signal("IA"), 600.0 * np.array(FOUR))
    # An angle or a frequency has no side: no ratio applies.
    assert_array_equal(record.signal("IA angle"), [-179, 180, 0, 90])
    assert_array_equal(record.signal("f"), [50.0] * 4)


@pytest.mark.parametrize(("side", "ratio"), [("S", 240.0), ("s", 240.0), ("P", 1.0), ("p", 1.0)])
def test_secondary_values_come_as_primary_ones(tmp_path: Path, side: str, ratio: float) -> None:
    line = analog_line(a="1", primary="1200", secondary="5", side=side)
    record = record_of(tmp_path, cfg(analog=[line]), four_samples())
    assert_array_equal(record.signal("IA"), ratio * np.array(FOUR))
    assert_array_equal(record.as_written(["IA"])[0], FOUR)


@pytest.mark.parametrize(
    ("primary", "secondary"), [("0", "0"), ("600", "0"), ("", ""), ("-600", "5"), ("x", "5")]
)
def test_secondary_without_ratio_is_refused(tmp_path: Path, primary: str, secondary: str) -> None:
    line = analog_line(primary=primary, secondary=secondary, side="S")
    record = record_of(tmp_path, cfg(analog=[line]), four_samples())
    with pytest.raises(RecordError) as caught:
        record.signal("IA")
    assert caught.value.code == "unknown-ratio"


@pytest.mark.parametrize("side", ["", "X", "primary?"])
def test_unstated_side_is_a_problem(tmp_path: Path, side: str) -> None:
    record = record_of(tmp_path, cfg(analog=[analog_line(side=side, a="1")]), four_samples())
    assert record.channel("IA").side == ("primary" if side.startswith("p") else "unstated")
    assert ("side-unstated" in codes(record)) == (not side.startswith("p"))
    assert_array_equal(record.signal("IA"), FOUR)


@pytest.mark.parametrize(
    "line",
    [
        analog_line(a="1e308"),
        analog_line(b="-1e300"),
        analog_line(a="1e100", primary="1e100", secondary="1e-100", side="S"),
    ],
)
def test_scaling_beyond_reason_is_an_error_of_its_channel(tmp_path: Path, line: str) -> None:
    record = record_of(tmp_path, cfg(analog=[line]), four_samples()).survey()
    assert "absurd-scale" in codes(record)
    with pytest.raises(RecordError) as caught:
        record.signal("IA")
    assert caught.value.code == "absurd-scale"
    assert record.to_frame().shape == (4, 2)


def test_multiplier_zero_is_noted(tmp_path: Path) -> None:
    record = record_of(tmp_path, cfg(analog=[analog_line(a="0", b="3")]), four_samples())
    assert_array_equal(record.signal("IA"), [3.0] * 4)
    assert "zero-multiplier" in codes(record)


def test_blank_multiplier_addend_and_skew(tmp_path: Path) -> None:
    line = analog_line(a="", b="", skew="")
    record = record_of(tmp_path, cfg(analog=[line]), four_samples())
    assert_array_equal(record.signal("IA"), FOUR)
    assert record.channel("IA").skew_s == 0.0
    assert [p.code for p in record.problems].count("blank-field") == 2  # multiplier and addend, not skew


def test_declared_range_may_be_real_numbers(tmp_path: Path) -> None:
    line = analog_line(low="-3.4E38", high="3.4028235E+38")
    channel = record_of(tmp_path, cfg(analog=[line]), four_samples()).channel("IA")
    assert (channel.stored_min, channel.stored_max) == (-3.4e38, 3.4028235e38)


# Codes of missing samples, by revision and encoding.


@pytest.mark.parametrize(
    ("revision", "code", "expected"),
    [
        # C37.111-1991 clause 6.3.4, -1999 clause 6.3, IEC 60255-24:2013 clause 8.4
        (None, "999999", NAN),
        (None, "99998", 99998.0),
        ("1999", "99999", NAN),
        ("1999", "99998", 99998.0),
        ("2013", "", NAN),
        ("2013", "-3.4028235E38", NAN),
        ("2013", "12.5", 12.5),
        ("2013", "-99999", -99999.0),
    ],
)
def test_missing_in_ascii(tmp_path: Path, revision: str | None, code: str, expected: float) -> None:
    line = analog_line(a="1", low="-99999", high="99998", fields=10 if revision is None else 13)
    digital = "1,TRIP,0" if revision is None else "1,TRIP,,,0"
    start = "02/01/2023,10:00:00.000000" if revision is None else "01/02/2023,10:00:00.000000"
    text = cfg(revision=revision, analog=[line], digital=[digital], start=start, trigger=start)
    record = record_of(tmp_path, text, ascii_rows([[100, code, 102, 103]], [TRIPS])).survey()
    assert_array_equal(record.signal("IA"), [100, expected, 102, 103])
    assert ("missing-samples" in codes(record)) == np.isnan(expected)


@pytest.mark.parametrize(
    ("revision", "code", "high", "expected", "severity"),
    [
        ("2013", "99999", "99998", NAN, "warning"),
        ("2013", "99999", "99999", 99999.0, "note"),
        ("1999", "999999", "99998", NAN, "warning"),
        ("1999", "999999", "1e9", 999999.0, "note"),
    ],
)
def test_code_of_another_revision_is_judged_by_the_declared_range(
    tmp_path: Path, revision: str, code: str, high: str, expected: float, severity: str
) -> None:
    text = cfg(revision=revision, analog=[analog_line(a="1", high=high)])
    record = record_of(tmp_path, text, ascii_rows([[100, code, 102, 103]], [TRIPS]))
    assert_array_equal(record.signal("IA"), [100, expected, 102, 103])
    assert [p.severity for p in record.problems if p.code == "foreign-missing-code"] == [severity]


@pytest.mark.parametrize(
    ("revision", "kind", "code", "expected"),
    [
        ("1999", "BINARY", -32768, NAN),
        ("2013", "BINARY", -32768, NAN),
        ("1999", "BINARY", -1, -1.0),
        ("2013", "BINARY32", -(2**31), NAN),
        ("2013", "BINARY32", -32768, -32768.0),
        ("2013", "FLOAT32", np.float32(-3.4028235e38), NAN),
        ("2013", "FLOAT32", NAN, NAN),
        ("2013", "FLOAT32", np.inf, NAN),
        ("2013", "FLOAT32", -np.inf, NAN),
        ("2013", "FLOAT32", -1.0, -1.0),
        ("2013", "FLOAT32", 99999.0, 99999.0),
        ("2013", "FLOAT32", np.float32(3.4028235e38), float(np.float32(3.4028235e38))),
    ],
)
def test_missing_in_binary(tmp_path: Path, revision: str, kind: str, code: float, expected: float) -> None:
    text = cfg(revision=revision, analog=[analog_line(a="1")], kind=kind)
    record = record_of(tmp_path, text, binary_rows([[100, code, 102, 103]], [TRIPS], kind=kind)).survey()
    assert_array_equal(record.signal("IA"), [100, expected, 102, 103])
    assert_array_equal(record.stored(["IA"])[0], [100, expected, 102, 103])
    assert ("missing-samples" in codes(record)) == np.isnan(expected)


def test_missing_in_binary_of_1991(tmp_path: Path) -> None:
    # 0xFFFF marks a missing sample and is -1 too: the second is a crossing, the fifth is not.
    line = analog_line(a="1", fields=10)
    text = cfg(revision=None, analog=[line], digital=["1,T,0"], rates=["1000,8"], kind="BINARY",
               start="02/01/2023,10:00:00", trigger="02/01/2023,10:00:00", tail=())  # fmt: skip
    values = [100, -1, -102, -200, -1, -400, -480, -560]
    record = record_of(tmp_path, text, binary_rows([values], [[0] * 8]))
    assert_array_equal(record.signal("IA"), [100, -1, -102, -200, NAN, -400, -480, -560])
    part = record.between(0.004, 0.0045)  # judged by its neighbours although they are not asked for
    assert_array_equal(part.signal("IA"), [NAN])
    assert_array_equal(record.between(0.001, 0.002).signal("IA"), [-1, -102])
    assert_array_equal(record.between(0.0, 0.001).signal("IA"), [100, -1])


@pytest.mark.parametrize(
    ("stored", "missing"),
    [
        ([], []),
        ([-1], [True]),  # the standard's rule, where nothing speaks against it
        ([-1, -1, -1], [True] * 3),
        ([0, -1, 0, -1, -2, -1, -1, 0], [False] * 8),  # an idle channel
        ([25, 40, -1, 33, -60], [False] * 5),  # noise
        ([500, 520, -1, 540, 560], [False, False, True, False, False]),
        ([-300, -200, -1, -1, -1, 200, 300], [False, False, True, True, True, False, False]),
        ([-3, -2, -1, 0, 1], [False] * 5),
        ([900, 850, -1, -1], [False, False, True, True]),
        ([-1, 99, 199], [False] * 3),
        ([-1, 900, 901], [True, False, False]),
        ([32767, -1, -32768], [False] * 3),
    ],
)
def test_which_minus_one_of_1991_is_a_sample(stored: list[int], missing: list[bool]) -> None:
    assert_array_equal(missing_in_1991(np.array(stored, dtype=np.int16)), missing)


def test_a_run_of_minus_one_longer_than_any_idle_one_is_missing() -> None:
    stored = np.zeros(10_000, dtype=np.int16)
    stored[100:5000] = -1
    assert_array_equal(missing_in_1991(stored), stored == -1)
    stored[200:5000:100] = 0
    assert not missing_in_1991(stored).any()


def test_part_of_1991_equals_part_of_the_whole(tmp_path: Path) -> None:
    rng = np.random.default_rng(4)
    values = np.rint(rng.normal(0, 1.2, 3000)).astype(int)
    values[1000:1300] = -1
    values[2000:2300] = 4000
    values[2100:2120] = -1
    text = cfg(revision=None, analog=[analog_line(a="1", fields=10)], digital=[], rates=["1000,3000"],
               kind="BINARY", start=",", trigger=",", tail=())  # fmt: skip
    record = record_of(tmp_path, text, binary_rows([values], []))
    whole = record.signal("IA")
    assert np.isnan(whole).sum() >= 20
    for first, stop in [(0, 5), (990, 1310), (1000, 1001), (1100, 1101), (2099, 2105), (2119, 3000)]:
        part = record.between(first * 1e-3, (stop - 1) * 1e-3)
        assert_array_equal(part.signal("IA"), whole[first:stop])


def test_digital_states_in_all_bits_of_all_words(tmp_path: Path) -> None:
    rng = np.random.default_rng(1)
    states = rng.integers(0, 2, size=(40, 6))
    text = cfg(
        digital=[f"{k + 1},D{k},,,0" for k in range(40)],
        analog=[analog_line()],
        rates=["1000,6"],
        kind="BINARY",
    )
    record = record_of(tmp_path, text, binary_rows([range(6)], states.tolist()))
    for k in range(40):
        assert_array_equal(record.states(f"D{k}"), states[k])
        edges = record.edges(f"D{k}")
        assert edges.initial == states[k, 0]
        changed = np.flatnonzero(np.diff(states[k])) + 1
        assert_array_equal(edges.times_s, changed / 1000.0)
        assert_array_equal(edges.states, states[k, changed])


def test_odd_states_in_ascii_are_noted(tmp_path: Path) -> None:
    data = b"1,0,100,0\r\n2,1000,101,\r\n3,2000,102,7\r\n4,3000,103,1\r\n"
    record = record_of(tmp_path, cfg(), data)
    assert_array_equal(record.states("TRIP"), [0, 0, 1, 1])
    assert "states-odd" in codes(record)


def test_analog_channels_without_digital_and_the_reverse(tmp_path: Path) -> None:
    record = record_of(tmp_path, cfg(digital=[]), ascii_rows([FOUR]))
    assert record.signals().shape == (1, 4)
    assert record.digital == ()
    record = record_of(tmp_path, cfg(analog=[], kind="BINARY"), binary_rows([], [TRIPS]))
    assert record.signals().shape == (0, 4)
    assert_array_equal(record.states("TRIP"), TRIPS)
