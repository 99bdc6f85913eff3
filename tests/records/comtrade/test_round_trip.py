"""What is written is read back, to the encoding's resolution."""

from __future__ import annotations

import tempfile
from dataclasses import replace
from datetime import datetime, timedelta
from pathlib import Path
from typing import get_args

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp
from numpy.testing import assert_allclose, assert_array_equal
from numpy.typing import NDArray

from analyzer.records import Clock, Moment, Record, RecordError, read
from analyzer.records.comtrade import write_comtrade
from analyzer.records.comtrade.cfg import Encoding, Revision
from analyzer.records.timebase import TimeBase
from tests.records.comtrade.makers import (
    NUMBER_TYPES,
    analog_line,
    ascii_rows,
    binary_rows,
    cfg,
    codes,
    record_of,
)

# Revision, encoding, combined in one file: all that the standard knows.
KINDS: list[tuple[Revision, Encoding, bool]] = [
    (1991, "ascii", False),
    (1991, "binary", False),
    (1999, "ascii", False),
    (1999, "binary", False),
    *((2013, encoding, in_one) for encoding in get_args(Encoding) for in_one in (False, True)),
]
COUNTS = {"ascii": 99_998, "binary": 32_767, "binary32": 2_147_483_647}


def written(record: Record, folder: Path, kind: tuple[Revision, Encoding, bool], stem: str = "out") -> Record:
    revision, encoding, in_one = kind
    target = folder / f"{stem}{'.cff' if in_one else '.cfg'}"
    paths = write_comtrade(record, target, revision=revision, encoding=encoding)
    assert paths[0] == target
    assert all(path.is_file() for path in paths)
    return read(target)


def largest_error(values: NDArray[np.float64], kind: tuple[Revision, Encoding, bool]) -> float:
    """Half a step of the encoding over the channel's own range, and what doubles themselves lose."""
    revision, encoding, _ = kind
    present = values[np.isfinite(values)]
    if not present.size:
        return 0.0
    peak = float(np.abs(present).max())
    if encoding == "ascii" and revision == 2013:
        return 1e-15 * peak
    if encoding == "float32":
        return 6e-8 * peak
    half_span = float(present.max() / 2 - present.min() / 2)
    steps = 1.5 if (revision, encoding) == (1991, "binary") else 0.5  # there is no -1 there
    return steps * half_span / COUNTS[encoding] * (1 + 1e-9) + 1e-15 * peak + 1e-300


def assert_same_missing(
    back: Record, key: str, expected: NDArray[np.float64], kind: tuple[Revision, Encoding, bool]
) -> None:
    stored = back.stored([key])[0]
    if kind[:2] == (1991, "binary"):  # a missing sample between small ones cannot be told from -1 there
        stored = np.where(stored == -1, np.nan, stored)
    assert_array_equal(np.isnan(stored), np.isnan(expected))


numbers = st.floats(-1e6, 1e6) | st.sampled_from([np.nan, 0.0, -0.0, 1.0, -1.0, 99_999.0, 999_999.0])
scales = st.sampled_from([1.0, 1e-290, 1e-40, 1e-12, 1e9, 1e30, 1e50])


@st.composite
def records(draw: st.DrawFn) -> Record:
    n = draw(st.integers(1, 30))
    n_analog, n_digital = draw(st.integers(0, 20)), draw(st.integers(0, 40))
    if n_analog + n_digital == 0:
        n_digital = 1
    values = draw(hnp.arrays(np.float64, (n_analog, n), elements=numbers, fill=numbers))
    for row in values:
        shape = draw(st.sampled_from(["as drawn", "constant", "missing", "offset"]))
        row *= draw(scales)
        if shape == "constant":
            row[:] = row[0]
        elif shape == "missing":
            row[:] = np.nan
        elif shape == "offset":
            row += 1e7
    states = draw(hnp.arrays(np.uint8, (n_digital, n), elements=st.integers(0, 1)))
    record = Record.from_arrays(
        {f"I{k}": (row, draw(st.sampled_from(["A", "V"]))) for k, row in enumerate(values)},
        digital={f"D{k}": row for k, row in enumerate(states)},
        sample_rate_hz=1000.0,
        nominal_frequency_hz=draw(st.sampled_from([None, 50.0, 60.0, 16.7])),
        start=Moment(second=datetime(2024, 2, 29, 23, 59, 59), nanosecond=999_999_000),
    )
    if draw(st.booleans()):  # microseconds, so that every revision's stamps can tell them
        steps = draw(hnp.arrays(np.int64, n, elements=st.integers(1, 10**6)))
        return replace(record, timebase=TimeBase.from_stamps(np.cumsum(steps) * 1e-6))
    rates = draw(st.lists(st.sampled_from([400.0, 50.0, 3200.0, 30707.244140625]), min_size=1, max_size=4))
    stops = sorted(draw(st.sets(st.integers(1, 40), min_size=len(rates), max_size=len(rates))))
    return replace(record, timebase=TimeBase.from_rates(rates, stops, n_samples=n))


@pytest.mark.parametrize("kind", KINDS, ids=str)
@settings(deadline=None, derandomize=True, max_examples=15)
@given(record=records())
def test_any_record_reads_back_to_the_encodings_resolution(
    kind: tuple[Revision, Encoding, bool], record: Record
) -> None:
    with tempfile.TemporaryDirectory() as folder:
        back = written(record, Path(folder), kind)
        assert (back.origin.revision, back.origin.encoding) == kind[:2]
        assert back.n_samples == record.n_samples
        assert [(c.id, c.unit) for c in back.analog] == [(c.id, c.unit) for c in record.analog]
        for channel in record.analog:
            expected, got = record.signal(channel.id), back.signal(channel.id)
            assert_same_missing(back, channel.id, expected, kind)
            error = np.nanmax(np.abs(got - expected), initial=0.0, where=~np.isnan(expected))
            assert error <= largest_error(expected, kind), channel.id
        for digital in record.digital:
            assert_array_equal(back.states(digital.id), record.states(digital.id))
        assert_allclose(back.times(), record.times(), rtol=1e-12, atol=1e-11)
        assert back.nominal_frequency_hz == record.nominal_frequency_hz
        assert back.start == record.start
        del back  # its file is mapped, which some systems do not let go of


@pytest.mark.parametrize("kind", KINDS, ids=str)
@settings(deadline=None, derandomize=True, max_examples=10)
@given(stored=hnp.arrays(np.int16, (3, 12), elements=st.integers(-32_768, 32_767)))
def test_counts_of_a_binary_file_pass_through_unchanged(
    kind: tuple[Revision, Encoding, bool], stored: NDArray[np.int16]
) -> None:
    lines = [
        analog_line(1, "IA", a="0.123456789", b="-0.5", skew="12.5"),
        analog_line(2, "IB", "kA", a="3e-7"),
        analog_line(3, "VA", "V", a="-0.25", b="1e4"),
    ]
    if kind[:2] == (1991, "binary"):
        stored = np.where(stored == -1, 0, stored)  # see the test after this one
    with tempfile.TemporaryDirectory() as folder:
        text = cfg(analog=lines, digital=[], rates=["1000,12"], kind="BINARY")
        record = record_of(Path(folder), text, binary_rows(stored.tolist()))
        back = written(record, Path(folder), kind)
        for channel, expected in zip(record.analog, record.stored(), strict=True):
            assert_same_missing(back, channel.id, expected, kind)
            present = ~np.isnan(expected)
            assert_array_equal(back.stored([channel.id])[0, present], expected[present])
            assert_array_equal(back.signal(channel.id)[present], record.signal(channel.id)[present])
        assert [(c.multiplier, c.addend, c.skew_s) for c in back.analog] == [
            (c.multiplier, c.addend, c.skew_s) for c in record.analog
        ]
        del record, back


def test_minus_one_of_a_binary_file_becomes_minus_two_in_1991(tmp_path: Path) -> None:
    text = cfg(digital=[], kind="BINARY")
    record = record_of(tmp_path, text, binary_rows([[500, -1, -500, -1000]]))
    back = written(record, tmp_path, (1991, "binary", False))
    assert_array_equal(back.stored()[0], [500, -2, -500, -1000])


@pytest.mark.parametrize("kind", ["BINARY32", "FLOAT32"])
def test_four_byte_numbers_pass_through_unchanged(tmp_path: Path, kind: str) -> None:
    rng = np.random.default_rng(7)
    stored = rng.integers(-(2**31), 2**31, size=(2, 50))
    text = cfg(revision="2013", analog=[analog_line(1, "IA", a="0.1"), analog_line(2, "IB", a="3")],
               digital=[], rates=["1000,50"], kind=kind)  # fmt: skip
    record = record_of(tmp_path, text, binary_rows(stored.tolist(), kind=kind))
    for encoding in (kind.lower(), "ascii"):
        back = written(record, tmp_path, (2013, encoding, False), stem=encoding)  # type: ignore[arg-type]
        assert_array_equal(back.stored(), record.stored())
        assert_array_equal(back.signals(), record.signals())


def test_largest_numbers_of_single_precision(tmp_path: Path) -> None:
    most = float(np.finfo(np.float32).max)
    below = float(np.nextafter(np.float32(most), np.float32(0)))
    values = [-most, -below, below, most, 1e300, -1e300, 5e-324]
    record = Record.from_arrays({f"I{k}": ([v, 0.0], "A") for k, v in enumerate(values)}, sample_rate_hz=1.0)
    for encoding in ("float32", "ascii"):
        back = written(record, tmp_path, (2013, encoding, False), stem=encoding)
        assert_allclose(back.as_written(), record.as_written(), rtol=6e-8, atol=1e-300)
        assert not np.isnan(back.as_written()).any()


def test_all_that_is_said_of_a_record_reads_back(tmp_path: Path) -> None:
    line = analog_line(name="IA", phase="A", a="0.5", skew="-2.5", primary="600", secondary="5", side="S")
    text = cfg(
        station="Übergabe Süd", device="R 7", revision="2013", analog=[line], digital=["1,T,B,Q0,1"],
        start="29/02/2024,10:00:00.123456789", trigger="29/02/2024,10:00:00.125000001",
        tail=["1", "-5h30,x", "B,2"],
    )  # fmt: skip
    record = record_of(tmp_path, text, ascii_rows([[1, 2, 3, 4]], [[0, 1, 1, 0]]))
    for kind in KINDS[4:]:
        back = written(record, tmp_path, kind, stem=f"{kind[1]}{kind[2]}")
        for name in ("station", "device", "start", "trigger", "clock", "nominal_frequency_hz"):
            assert getattr(back, name) == getattr(record, name)
        a, b = back.analog[0], record.analog[0]
        for name in ("id", "phase", "circuit", "unit", "skew_s", "primary", "secondary", "side"):
            assert getattr(a, name) == getattr(b, name)
        assert back.digital == record.digital
        assert back.trigger_s == pytest.approx(0.001543212, abs=1e-12)
        assert codes(back) <= {"counts-from-zero"}


def test_header_and_information_go_along(tmp_path: Path) -> None:
    (tmp_path / "rec.hdr").write_text("seen by nobody", encoding="utf-8")
    (tmp_path / "rec.INF").write_bytes("[Größe]\r\n".encode("cp1252"))
    record = record_of(tmp_path, cfg(digital=[]), ascii_rows([[1, 2, 3, 4]]))
    for name in ("out.cfg", "out.cff", "OUT2.CFG"):
        write_comtrade(record, tmp_path / name)
        back = read(tmp_path / name)
        assert back.origin.header_text.strip() == "seen by nobody"
        assert back.origin.information_text.strip() == "[Größe]"
    assert (tmp_path / "OUT2.DAT").is_file()


def test_secondary_values_become_primary_ones_in_1991(tmp_path: Path) -> None:
    line = analog_line(a="0.5", b="1", primary="600", secondary="5", side="S")
    record = record_of(tmp_path, cfg(analog=[line], digital=[]), ascii_rows([[1, 2, 3, 4]]))
    back = written(record, tmp_path, (1991, "ascii", False))
    assert_allclose(back.signals(), record.signals(), rtol=1e-15)
    assert_allclose(back.as_written(), record.signals(), rtol=1e-15)


def test_secondary_values_without_ratio_cannot_be_said_in_1991(tmp_path: Path) -> None:
    line = analog_line(primary="0", secondary="0", side="S")
    record = record_of(tmp_path, cfg(analog=[line], digital=[]), ascii_rows([[1, 2, 3, 4]]))
    with pytest.raises(RecordError) as caught:
        write_comtrade(record, tmp_path / "old.cfg", revision=1991, encoding="ascii")
    assert caught.value.code == "unknown-ratio"
    back = written(record, tmp_path, (1999, "ascii", False))
    assert (back.analog[0].side, back.analog[0].ratio) == ("secondary", None)


def test_part_of_a_record_starts_at_its_own_first_sample(tmp_path: Path) -> None:
    text = cfg(digital=[], rates=["1000,4"], start="01/02/2023,10:00:00.999000",
               trigger="01/02/2023,10:00:01.001000")  # fmt: skip
    record = record_of(tmp_path, text, ascii_rows([[1, 2, 3, 4]]))
    back = written(record.between(0.002, 0.003), tmp_path, (2013, "float32", False))
    assert back.start is not None
    assert back.start.isoformat() == "2023-02-01T10:00:01.001000"
    assert_array_equal(back.times(), [0.0, 0.001])
    assert back.trigger_s == 0.0
    assert_array_equal(back.stored()[0], [3, 4])


@pytest.mark.parametrize("year", [1, 987, 1979, 1980, 2026, 2079, 2080, 9999])
def test_every_year_reads_back_in_every_revision(tmp_path: Path, year: int) -> None:
    start = Moment(second=datetime(year, 12, 3, 4, 5, 6), nanosecond=7000)
    record = Record.from_arrays({"I": ([1.0, 2.0], "A")}, sample_rate_hz=1.0, start=start)
    for revision in get_args(Revision):
        back = written(record, tmp_path, (revision, "ascii", False), stem=str(revision))
        assert back.start == start


def test_nanoseconds_of_stamps_alone(tmp_path: Path) -> None:
    times_s = np.array([0, 1, 3, 1000, 10**6]) * 1e-9
    record = Record.from_arrays({"I": (times_s, "A")}, times_s=times_s)
    back = written(record, tmp_path, (2013, "binary", False))
    assert_allclose(back.times(), times_s, rtol=1e-12)


def test_longer_than_stamps_of_microseconds_can_count(tmp_path: Path) -> None:
    times_s = np.array([0.0, 1.0, 7200.0, 86_400.0])
    record = Record.from_arrays({"I": (times_s, "A")}, times_s=times_s)
    for kind in KINDS[2:]:
        back = written(record, tmp_path, kind, stem=f"{kind}")
        assert_allclose(back.times(), times_s, rtol=0, atol=1e-4)


def test_separators_in_names_do_not_break_lines(tmp_path: Path) -> None:
    record = Record.from_arrays(
        {"a,b\nc": ([1.0, 2.0], "A"), "a b c": ([3.0, 4.0], "V")},
        sample_rate_hz=1.0, station="x,\r\ny", device="\x1b[2J",
    )  # fmt: skip
    back = written(record, tmp_path, (2013, "ascii", False))
    assert back.station == "x   y"
    assert len({c.id for c in back.analog}) == 2
    assert_array_equal(back.signals(), [[1, 2], [3, 4]])


def test_clock_offset_is_kept_by_2013_alone(tmp_path: Path) -> None:
    start = Moment(second=datetime(2024, 5, 6), nanosecond=0, utc_offset=timedelta(hours=-3))
    record = Record.from_arrays({"I": ([1.0, 2.0], "A")}, sample_rate_hz=1.0, start=start)
    record = replace(record, clock=Clock(time_code="-3", local_code="-3", quality_code=0, leap_second="none"))
    back = written(record, tmp_path, (2013, "ascii", False))
    assert (back.start, back.clock) == (start, record.clock)


@pytest.mark.parametrize(
    ("name", "revision", "encoding", "code"),
    [
        ("out.cff", 1999, "ascii", "no-such-encoding"),
        ("out.cfg", 1999, "float32", "no-such-encoding"),
        ("out.cfg", 1991, "binary32", "no-such-encoding"),
        ("out.dat", 2013, "ascii", "bad-suffix"),
        ("out", 2013, "ascii", "bad-suffix"),
    ],
)
def test_what_cannot_be_written(
    tmp_path: Path, name: str, revision: Revision, encoding: Encoding, code: str
) -> None:
    record = Record.from_arrays({"I": ([1.0, 2.0], "A")}, sample_rate_hz=1.0)
    with pytest.raises(RecordError) as caught:
        write_comtrade(record, tmp_path / name, revision=revision, encoding=encoding)
    assert caught.value.code == code
    assert list(tmp_path.iterdir()) == []


def test_no_sample_is_not_written(tmp_path: Path) -> None:
    record = Record.from_arrays({"I": ([1.0, 2.0], "A")}, sample_rate_hz=1.0).between(5.0, 6.0)
    with pytest.raises(RecordError) as caught:
        write_comtrade(record, tmp_path / "out.cfg")
    assert caught.value.code == "no-samples"


@pytest.mark.parametrize("name", ["rec.cfg", "REC.cff", "rec.CFG"])
def test_a_record_is_never_written_over_itself(tmp_path: Path, name: str) -> None:
    record = record_of(tmp_path, cfg(digital=[]), ascii_rows([[1, 2, 3, 4]]))
    before = {path.name: path.read_bytes() for path in tmp_path.iterdir()}
    if not (tmp_path / name).exists():  # nothing to be overwritten there on this system
        write_comtrade(record, tmp_path / name)
    else:
        with pytest.raises(RecordError) as caught:
            write_comtrade(record, tmp_path / name, existing="replace")
        assert caught.value.code == "would-overwrite-input"
    assert all((tmp_path / kept).read_bytes() == data for kept, data in before.items())


def test_long_records_are_written_block_by_block(tmp_path: Path) -> None:
    n = 150_000
    rng = np.random.default_rng(2)
    record = Record.from_arrays(
        {"I": (rng.integers(-30_000, 30_000, n), "A")},
        digital={"D": rng.integers(0, 2, n)},
        sample_rate_hz=10_000.0,
    )
    for encoding in NUMBER_TYPES:
        back = written(record, tmp_path, (2013, encoding.lower(), False), stem=encoding)  # type: ignore[arg-type]
        assert_array_equal(back.signals(), record.signals())
        assert_array_equal(back.states("D"), record.states("D"))
        assert codes(back.survey()) == {"date-unstated", "frequency-unstated"}
