"""The files of a record: grammar of the configuration, names, text encodings, combined files, parts."""

from __future__ import annotations

import codecs
from functools import partial
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_array_equal

from analyzer.records import ReadOptions, Record, RecordError, read
from tests.records.comtrade.makers import (
    FOUR,
    TRIPS,
    analog_line,
    ascii_rows,
    binary_rows,
    cfg,
    codes,
    combined,
    four_samples,
    put,
    record_of,
)


def assert_reads_as_usual(record: Record) -> None:
    assert_array_equal(record.signal("IA"), 0.5 * np.array(FOUR))
    assert_array_equal(record.states("TRIP"), TRIPS)
    assert_array_equal(record.times(), np.arange(4) / 1000)


# Grammar


@pytest.mark.parametrize("newline", ["\r\n", "\n", "\r"])
def test_line_ends(tmp_path: Path, newline: str) -> None:
    assert_reads_as_usual(record_of(tmp_path, cfg(newline=newline), four_samples(newline=newline)))


def test_no_line_end_at_the_end(tmp_path: Path) -> None:
    assert_reads_as_usual(record_of(tmp_path, cfg().rstrip("\r\n"), four_samples().rstrip(b"\r\n")))


@pytest.mark.parametrize("tail", ["\x1a", "\x1a\x1a\x1a\r\n", "\r\n\r\n\x1a", "\x1a" * 500])
def test_trailing_ctrl_z(tmp_path: Path, tail: str) -> None:
    record = record_of(tmp_path, cfg() + tail, four_samples() + tail.encode())
    assert_reads_as_usual(record)
    assert codes(record) == set()


def test_ctrl_z_inside_the_configuration(tmp_path: Path) -> None:
    text = cfg().replace("ASCII\r\n", "ASCII\r\n\x1a")
    assert_reads_as_usual(record_of(tmp_path, text, four_samples()))


def test_padding_with_nul_after_ascii_data(tmp_path: Path) -> None:
    assert_reads_as_usual(record_of(tmp_path, cfg(), four_samples() + b"\0" * 100))


def test_blank_lines(tmp_path: Path) -> None:
    text = cfg().replace("\r\n", "\r\n\r\n")
    data = four_samples().replace(b"\r\n", b"\r\n  \r\n\r\n")
    record = record_of(tmp_path, text, data)
    assert_reads_as_usual(record)
    assert "blank-line" in codes(record)


def test_blanks_around_every_field(tmp_path: Path) -> None:
    text = cfg().replace(",", " , ").replace("\r\n", " \r\n")
    assert_reads_as_usual(record_of(tmp_path, text, four_samples().replace(b",", b" , ")))


@pytest.mark.parametrize("fields", [7, 8, 9, 10, 11, 12])
def test_missing_trailing_fields_of_an_analog_line(tmp_path: Path, fields: int) -> None:
    record = record_of(tmp_path, cfg(analog=[analog_line(fields=fields)]), four_samples())
    assert_reads_as_usual(record)
    assert {"short-line", "side-unstated"} <= codes(record)


def test_too_few_fields_of_an_analog_line_name_the_line(tmp_path: Path) -> None:
    with pytest.raises(RecordError) as caught:
        record_of(tmp_path, cfg(analog=[analog_line(fields=6)]), four_samples())
    assert (caught.value.code, caught.value.line) == ("short-line", 3)
    assert "rec.cfg, line 3" in str(caught.value)


@pytest.mark.parametrize(
    ("line", "normal", "circuit"),
    [
        ("1,TRIP,0", 0, ""),
        ("1,TRIP,,1", 1, ""),
        ("1,TRIP,A,BAY,1", 1, "BAY"),
        ("1,TRIP,A,BAY,1,", 1, "BAY"),
        ("1,TRIP,A,BAY,", None, "BAY"),
        ("1,TRIP", None, ""),
        ("1,TRIP,,,spare", None, ""),
    ],
)
def test_digital_lines_of_any_width(tmp_path: Path, line: str, normal: int | None, circuit: str) -> None:
    record = record_of(tmp_path, cfg(digital=[line]), four_samples())
    channel = record.digital_channel("TRIP")
    assert (channel.normal_state, channel.circuit) == (normal, circuit)
    assert ("normal-state-unstated" in codes(record)) == (normal is None)
    assert_reads_as_usual(record)


def test_digital_lines_of_mixed_width_in_one_file(tmp_path: Path) -> None:
    lines = ["1,A,0", "2,B,,1", "3,C,X,Y,0", "4,D", "5"]
    record = record_of(tmp_path, cfg(digital=lines), ascii_rows([FOUR], [TRIPS] * 5))
    assert [c.id for c in record.digital] == ["A", "B", "C", "D", "digital 5"]
    assert [c.normal_state for c in record.digital] == [0, 1, 0, None, None]


@pytest.mark.parametrize(
    ("revision", "rules", "noted"),
    [("1991", 1999, True), ("1997", 1999, True), ("1999", 1999, False), ("2000", 1999, True),
     ("2001", 1999, True), ("2013", 2013, False), ("2014", 2013, True), ("0000", 1999, True),
     ("x", 1999, True), (None, 1999, True)],
)  # fmt: skip
def test_revision_years_that_are_none(tmp_path: Path, revision: str | None, rules: int, noted: bool) -> None:
    record = record_of(tmp_path, cfg(revision=revision), four_samples())
    assert record.origin.revision == rules
    assert ("odd-revision" in codes(record)) == noted
    assert_reads_as_usual(record)


def test_1991_is_told_by_its_lines(tmp_path: Path) -> None:
    text = cfg(
        revision=None, analog=[analog_line(fields=10)], digital=["1,TRIP,0"], start=",", trigger=",", tail=()
    )
    record = record_of(tmp_path, text, four_samples())
    assert (record.origin.revision, record.channel("IA").side) == (1991, "unstated")
    assert "side-unstated" in codes(record)
    assert_reads_as_usual(record)


def test_commas_in_names(tmp_path: Path) -> None:
    line = analog_line(name="I, phase A")
    text = cfg(analog=[line], station="Test, burg", revision="1999")
    record = record_of(tmp_path, text, four_samples())
    assert record.station == "Test, burg"
    assert [c.id for c in record.analog] == ["I, phase A"]
    assert "comma-in-name" in codes(record)


def test_names_are_made_unique_and_safe(tmp_path: Path) -> None:
    lines = [
        analog_line(k + 1, name) for k, name in enumerate(["IA", "IA", "", " ", "\x1b[31mred", "x" * 500])
    ]
    record = record_of(tmp_path, cfg(analog=lines), ascii_rows([FOUR] * 6, [TRIPS]))
    ids = [c.id for c in record.analog]
    assert ids[:4] == ["IA", "IA #2", "analog 3", "analog 4"]
    assert ids[4].isprintable()
    assert len(ids[5]) == 256
    assert len(set(ids)) == 6


@pytest.mark.parametrize("kind", ["ascii", "Ascii", " ASCII ", "ASCII,"])
def test_file_type_in_any_case(tmp_path: Path, kind: str) -> None:
    assert_reads_as_usual(record_of(tmp_path, cfg(kind=kind), four_samples()))


@pytest.mark.parametrize("kind", ["BINARY", "ASCII"])
def test_file_type_that_the_data_contradict(tmp_path: Path, kind: str) -> None:
    data = four_samples() if kind == "BINARY" else binary_rows([FOUR], [TRIPS])
    record = record_of(tmp_path, cfg(kind=kind), data)
    assert "type-mismatch" in codes(record)
    assert_reads_as_usual(record)


@pytest.mark.parametrize("kind", ["BINARY", "BINARY32", "FLOAT32", "ASCII"])
def test_file_type_that_is_missing(tmp_path: Path, kind: str) -> None:
    text = cfg(revision="2013").split("ASCII")[0]
    stored = [-100, 101, 102, -103]
    data = (ascii_rows if kind == "ASCII" else partial(binary_rows, kind=kind))([stored], [TRIPS])
    record = record_of(tmp_path, text, data)
    assert record.origin.encoding == kind.lower()
    assert "type-unstated" in codes(record)
    assert_array_equal(record.stored()[0], stored)


def test_rows_cut_short_and_too_long(tmp_path: Path) -> None:
    data = b"1,0,100,0\r\n2,1000,101\r\n3,2000,102,1,9,9\r\n4,3000,103,1\r\n"
    record = record_of(tmp_path, cfg(), data).survey()
    assert_reads_as_usual(record)
    assert {"lines-short", "lines-long", "states-odd"} <= codes(record)


def test_words_among_the_numbers(tmp_path: Path) -> None:
    data = b"n,t,IA,TRIP\r\n1,0,-----,0\r\n2,1000,101,0\r\n3,2000,#N/A,1\r\n4,3000,103,1\r\nend of file\r\n"
    record = record_of(tmp_path, cfg(), data).survey()
    assert_array_equal(record.signal("IA"), [np.nan, 50.5, np.nan, 51.5])
    assert {"lines-left-out", "fields-not-numbers", "missing-samples"} <= codes(record)


def test_binary_rest_that_is_no_whole_sample(tmp_path: Path) -> None:
    record = record_of(tmp_path, cfg(kind="BINARY"), binary_rows([FOUR], [TRIPS]) + b"\x1a" * 8)
    assert_reads_as_usual(record)
    assert "data-cut-short" in codes(record)


# Names


@pytest.mark.parametrize("suffixes", [(".cfg", ".dat"), (".CFG", ".DAT"), (".Cfg", ".dAt"), (".cFG", ".Dat")])
def test_letter_cases_of_suffixes(tmp_path: Path, suffixes: tuple[str, str]) -> None:
    path = put(tmp_path, cfg(), four_samples(), suffixes=suffixes)
    for name in (path, path.with_suffix(suffixes[1]), tmp_path / "rec"):
        assert_reads_as_usual(read(name))


@pytest.mark.parametrize("folder", ["with spaces", "ünï çodé", "фидер 7", "a.b.c", "what!now", "x.zip!y"])
@pytest.mark.parametrize("stem", ["rec", "Störung 1", "2023-02-01,10.00.00", "a!b", "rec.cfg"])
def test_odd_names_of_folders_and_files(tmp_path: Path, folder: str, stem: str) -> None:
    place = tmp_path / folder
    place.mkdir()
    path = put(place, cfg(), four_samples(), stem=stem)
    for name in (path, path.with_suffix(".dat"), place / stem, place):
        assert_reads_as_usual(read(name))


def test_header_and_information_open_the_record_too(tmp_path: Path) -> None:
    path = put(tmp_path, cfg(), four_samples())
    path.with_suffix(".HDR").write_text("Störung\r\n", encoding="utf-8")
    path.with_suffix(".inf").write_text("[Public]\r\n", encoding="utf-8")
    for suffix in (".HDR", ".inf", ".cfg"):
        record = read(path.with_suffix(suffix))
        assert_reads_as_usual(record)
        assert record.origin.header_text.strip() == "Störung"
        assert record.origin.information_text.strip() == "[Public]"


@pytest.mark.parametrize("lost", [".cfg", ".dat"])
def test_missing_member_is_named(tmp_path: Path, lost: str) -> None:
    path = put(tmp_path, cfg(), four_samples())
    path.with_suffix(lost).unlink()
    left = path.with_suffix(".dat" if lost == ".cfg" else ".cfg")
    with pytest.raises(RecordError) as caught:
        read(left)
    assert caught.value.code == "missing-member"
    assert f"rec{lost}" in caught.value.message


@pytest.mark.parametrize("suffixes", [(".D00", ".D01", ".D02"), (".d00", ".d01", ".d02")])
@pytest.mark.parametrize("kind", ["ASCII", "BINARY"])
def test_data_in_parts(tmp_path: Path, suffixes: tuple[str, ...], kind: str) -> None:
    data = four_samples() if kind == "ASCII" else binary_rows([FOUR], [TRIPS])
    path = put(tmp_path, cfg(kind=kind), data[:17], suffixes=(".cfg", suffixes[0]))
    path.with_suffix(suffixes[1]).write_bytes(data[17:25])  # the cut goes through a sample
    path.with_suffix(suffixes[2]).write_bytes(data[25:])
    for name in (path, path.with_suffix(suffixes[1])):
        record = read(name)
        assert_reads_as_usual(record)
        assert "data-in-parts" in codes(record)


def test_parts_end_at_the_first_gap(tmp_path: Path) -> None:
    data = four_samples()
    path = put(tmp_path, cfg(), data, suffixes=(".CFG", ".D00"))
    path.with_suffix(".D02").write_bytes(data)
    assert read(path).n_samples == 4


# Text encodings

CYRILLIC = ["Линия Западная", "Ток фазы А", "Напряжение секции"]
CHINESE = ["220千伏线路保护", "主变高压侧电流", "母线电压"]
LATIN = ["Estação São João", "Tensión de línea", "Störung Übertragung"]


@pytest.mark.parametrize(
    ("encoding", "names", "read_as"),
    [
        ("utf-8", LATIN + CYRILLIC + CHINESE, None),
        ("utf-8-sig", LATIN + CYRILLIC + CHINESE, None),
        ("latin-1", LATIN, "cp1252"),
        ("cp1252", [*LATIN, "Œuvre – ligne"], "cp1252"),
        ("cp1251", CYRILLIC, "cp1251"),
        ("cp866", CYRILLIC, "cp866"),
        ("gbk", CHINESE, "gb18030"),
        ("utf-16", LATIN, "utf-16"),
    ],
)
def test_text_encodings(tmp_path: Path, encoding: str, names: list[str], read_as: str | None) -> None:
    lines = [analog_line(k + 1, name) for k, name in enumerate(names)]
    text = cfg(station=names[0], analog=lines)
    record = record_of(tmp_path, text.encode(encoding), ascii_rows([FOUR] * len(names), [TRIPS]))
    assert record.station == names[0]
    assert [c.id for c in record.analog] == names
    assert_array_equal(record.signal(names[0]), 0.5 * np.array(FOUR))
    notes = [p.message for p in record.problems if p.code == "text-encoding"]
    assert notes == ([] if read_as is None else [f"text read as {read_as}"])


def test_stated_text_encoding_goes_before_the_guess(tmp_path: Path) -> None:
    data = cfg(station="Ä").encode("latin-1")
    record = record_of(tmp_path, data, four_samples(), options=ReadOptions(text_encoding="cp1251"))
    assert record.station == "Д"  # the same byte there


@pytest.mark.parametrize("encoding", ["no-such", "hex", "rot13", "\0", ""])
def test_stated_text_encoding_that_is_none(tmp_path: Path, encoding: str) -> None:
    with pytest.raises(RecordError) as caught:
        record_of(tmp_path, cfg(), four_samples(), options=ReadOptions(text_encoding=encoding))
    assert caught.value.code == "unknown-encoding"


def test_byte_order_mark_in_the_data(tmp_path: Path) -> None:
    assert_reads_as_usual(record_of(tmp_path, cfg(), codecs.BOM_UTF8 + four_samples()))


# Combined files


def cff(folder: Path, content: bytes, name: str = "rec.cff") -> Path:
    path = folder / name
    path.write_bytes(content)
    return path


@pytest.mark.parametrize("name", ["rec.cff", "rec.CFF", "REC.Cff"])
def test_combined_ascii(tmp_path: Path, name: str) -> None:
    path = cff(tmp_path, combined(cfg(revision="2013"), four_samples(), inf="a\r\n", hdr="b\r\n"), name)
    record = read(path)
    assert_reads_as_usual(record)
    assert (record.origin.information_text.strip(), record.origin.header_text.strip()) == ("a", "b")
    assert codes(record) == set()
    assert_reads_as_usual(read(path.with_suffix("")))  # by its stem


@pytest.mark.parametrize("kind", ["BINARY", "BINARY32", "FLOAT32"])
@pytest.mark.parametrize("tail", [b"", b"\r\n", b"\x1a", b"\r\n\x1a\x1a"])
def test_combined_binary(tmp_path: Path, kind: str, tail: bytes) -> None:
    data = binary_rows([FOUR], [TRIPS], kind=kind)
    content = combined(cfg(revision="2013", kind=kind), data + tail, mark=f"{kind}: {len(data)}")
    record = read(cff(tmp_path, content))
    assert_reads_as_usual(record)
    assert record.origin.encoding == kind.lower()
    assert codes(record) == set()


def test_combined_binary_whose_samples_look_like_marks(tmp_path: Path) -> None:
    mark = np.frombuffer(b"\n\n--- file type: CFG ---\r\n", dtype="<i2").tolist()
    data = binary_rows([mark])
    content = combined(cfg(revision="2013", digital=[], kind="BINARY"), data, mark=f"BINARY: {len(data)}")
    assert_array_equal(read(cff(tmp_path, content)).stored()[0], mark)


@pytest.mark.parametrize(
    ("old", "new"),
    [
        (b"--- file type: CFG", b"--- file type  CFG"),
        (b"--- file type: INF", b"-- file type  INF"),
        (b"--- file type: HDR ---", b"---file type:HDR---"),
        (b"--- file type: DAT", b"--- FILE TYPE: dat"),
        (b"--- file type: DAT", b"  ---\tFile Type :\tDAT"),
        (b"DAT ASCII ---", b"DAT ---"),
        (b"DAT ASCII ---", b"DAT ASCII --"),
    ],
)
def test_malformed_marks(tmp_path: Path, old: bytes, new: bytes) -> None:
    content = combined(cfg(revision="2013"), four_samples())
    assert old in content
    assert_reads_as_usual(read(cff(tmp_path, content.replace(old, new))))


@pytest.mark.parametrize("newline", [b"\n", b"\r"])
def test_combined_with_other_line_ends(tmp_path: Path, newline: bytes) -> None:
    content = combined(cfg(revision="2013"), four_samples()).replace(b"\r\n", newline)
    assert_reads_as_usual(read(cff(tmp_path, content)))


def test_combined_with_byte_order_mark(tmp_path: Path) -> None:
    content = codecs.BOM_UTF8 + combined(cfg(revision="2013", station="Łódź"), four_samples())
    record = read(cff(tmp_path, content))
    assert_reads_as_usual(record)
    assert record.station == "Łódź"


@pytest.mark.parametrize("declared", [0, 5, 1000])
def test_combined_with_a_wrong_byte_count(tmp_path: Path, declared: int) -> None:
    data = binary_rows([FOUR], [TRIPS])
    record = read(
        cff(tmp_path, combined(cfg(revision="2013", kind="BINARY"), data, mark=f"BINARY: {declared}"))
    )
    assert_reads_as_usual(record)
    assert codes(record) == {0: set(), 5: {"data-bytes-declared"}, 1000: {"data-cut-short"}}[declared]


def test_combined_with_a_section_after_the_data(tmp_path: Path) -> None:
    data = binary_rows([FOUR], [TRIPS])
    content = combined(cfg(revision="2013", kind="BINARY"), data, mark=f"BINARY: {len(data)}")
    record = read(cff(tmp_path, content + b"\r\n--- file type: INF ---\r\nmore\r\n"))
    assert_reads_as_usual(record)


@pytest.mark.parametrize("lost", [b"--- file type: CFG ---", b"--- file type: DAT ASCII ---"])
def test_combined_without_a_section(tmp_path: Path, lost: bytes) -> None:
    with pytest.raises(RecordError) as caught:
        read(cff(tmp_path, combined(cfg(revision="2013"), four_samples()).replace(lost, b"")))
    assert caught.value.code == "missing-section"
