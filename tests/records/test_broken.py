"""Broken and hostile files: each reads with its problem listed, or is a one-line error; none costs much."""

from __future__ import annotations

import io
import os
import pickle
import re
import struct
import sys
import time
import zipfile
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from analyzer.records import RecordError, find_records, read
from analyzer.records.options import ReadOptions
from tests.records.comtrade.makers import (
    FOUR,
    TRIPS,
    analog_line,
    ascii_rows,
    binary_rows,
    cfg,
    combined,
    four_samples,
    put,
)
from tests.records.memory import grown_memory

MOST_SECONDS = 2.0
MOST_BYTES = 300 << 20
PNG = b"\x89PNG\r\n\x1a\n\0\0\0\rIHDR\0\0\0\x10\0\0\0\x10\x08\x06" + bytes(range(256)) * 40
NOISE = np.random.default_rng(3).integers(0, 256, 20_000, dtype=np.uint8).tobytes()


def use(path: Path) -> set[str]:
    """Read all records behind a path and all that is in them; return the codes of problems and errors."""
    codes: set[str] = set()
    try:
        for found in find_records(path):
            try:
                record = found.read(options=ReadOptions()).survey()
            except RecordError as error:
                codes.add(checked(error))
                continue
            codes |= {problem.code for problem in record.problems}
            assert all(p.message.isprintable() and p.where.isprintable() for p in record.problems)
            assert np.all(np.diff(record.times()) > 0)
            for channel in record.analog[:50]:
                try:
                    values = record.signal(channel.id)
                except RecordError as error:
                    codes.add(checked(error))
                else:
                    assert not np.isinf(values).any()
            for digital in record.digital[:50]:
                record.edges(digital.id)
            if len(record.analog) < 1000:
                record.to_frame()
    except RecordError as error:
        codes.add(checked(error))
    return codes


def checked(error: RecordError) -> str:
    """The code of an error whose text can be shown as it is."""
    assert re.fullmatch(r"[a-z]+(-[a-z0-9]+)*", error.code)
    text = str(error)
    assert text.isprintable()
    assert len(text) < 3000
    assert error.message
    again = pickle.loads(pickle.dumps(error))
    assert (str(again), again.code, again.path, again.line) == (text, error.code, error.path, error.line)
    return error.code


def use_cheaply(path: Path) -> set[str]:
    """As :func:`use`, within the limits of time and memory."""
    start = time.perf_counter()
    with grown_memory() as grown:
        codes = use(path)
        assert grown() < MOST_BYTES
    assert time.perf_counter() - start < MOST_SECONDS
    return codes


# One file or a pair, and the codes that must be among what is found; "" where it just reads.

TEXT = cfg()
BINARY = cfg(kind="BINARY")
ONLY_STAMPS = cfg(kind="BINARY", rates=["0,4"], n_rates="0")
ROWS = binary_rows([FOUR], [TRIPS])

PAIRS: dict[str, tuple[str | bytes, bytes, str]] = {
    "cfg is empty": (b"", four_samples(), "cut-short"),
    "cfg is blank": (b"\r\n \r\n\t\r\n", four_samples(), "cut-short"),
    "cfg is Ctrl-Z": (b"\x1a" * 10_000, four_samples(), "cut-short"),
    "cfg is NUL": (b"\0" * 10_000, four_samples(), "cut-short"),
    "cfg is a picture": (PNG, four_samples(), "bad-counts"),
    "cfg is noise": (NOISE, four_samples(), "bad-counts"),
    "cfg has NULs": (TEXT.replace(",", "\0,").encode(), four_samples(), "bad-counts"),
    "cfg has a NUL in a number": (TEXT.replace("0.5", "0\0.5"), four_samples(), "bad-number"),
    "cfg has terminal codes": (
        cfg(station="\x1b[31m\x07", frequency="\x1b[2J"), four_samples(), "frequency-unstated"),
    "cfg is UTF-16 without mark": (TEXT.encode("utf-16-le"), four_samples(), "bad-counts"),
    "cfg is one endless line": ("x" * (4 << 20), four_samples(), "cut-short"),
    "cfg is endless commas": ("," * (4 << 20) + "\n" + "," * (3 << 20), four_samples(), "bad-counts"),
    "cfg is endless blank lines": (TEXT + "\n" * (6 << 20), four_samples(), ""),
    "cfg has endless blank lines within": (
        TEXT.replace("50\r\n", "50" + "\n" * (1 << 20)), four_samples(), "blank-line"),
    "cfg has endless lines after": (TEXT + "a\n" * (3 << 20), four_samples(), ""),
    "cfg is too large": ("\n" * (9 << 20), four_samples(), "too-large"),
    "cfg promises 999999 channels": (cfg(counts="1000000,999999A,1D"), four_samples(), "bad-counts"),
    "cfg promises 9999999 digital ones": (cfg(counts="9,1A,9999999D"), four_samples(), "bad-counts"),
    "cfg promises 10^30 channels": (cfg(counts=f"1,{10**30}A,1D"), four_samples(), "bad-counts"),
    "cfg promises fewer channels": (
        cfg(digital=["1,A,,,0"] * 3, counts="2,1A,1D"), four_samples(), "bad-rates"),
    "cfg promises more channels": (cfg(counts="4,3A,1D"), four_samples(), "short-line"),
    "cfg counts are negative": (cfg(counts="1,-1A,2D"), four_samples(), "bad-counts"),
    "cfg counts are words": (cfg(counts="two,oneA,oneD"), four_samples(), "bad-counts"),
    "cfg counts are swapped": (cfg(counts="2,1D,1A"), four_samples(), "bad-counts"),
    "cfg has lines for 60000 channels": (
        cfg(analog=["1,I,,,A,1,0"] * 60_000), four_samples(), "too-many-channels"),
    "multiplier is a word": (cfg(analog=[analog_line(a="x")]), four_samples(), "bad-number"),
    "multiplier is not a number": (cfg(analog=[analog_line(a="nan")]), four_samples(), "bad-number"),
    "multiplier is infinite": (cfg(analog=[analog_line(a="inf")]), four_samples(), "bad-number"),
    "multiplier is 1e400": (cfg(analog=[analog_line(a="1e400")]), four_samples(), "bad-number"),
    "multiplier is 1_000": (cfg(analog=[analog_line(a="1_000")]), four_samples(), "bad-number"),
    "multiplier is 1e308": (cfg(analog=[analog_line(a="1e308")]), four_samples(), "absurd-scale"),
    "multiplier has thousands of digits": (
        cfg(analog=[analog_line(a="1" * 9000)]), four_samples(), "bad-number"),
    "skew is infinite": (cfg(analog=[analog_line(skew="-inf")]), four_samples(), "bad-number"),
    "number of rates is huge": (cfg(n_rates="99999999"), four_samples(), "bad-rates"),
    "number of rates is not there": (cfg(n_rates="999"), four_samples(), "bad-rates"),
    "number of rates is negative": (cfg(n_rates="-1"), four_samples(), "bad-rates"),
    "number of rates is nan": (cfg(n_rates="nan"), four_samples(), "bad-rates"),
    "rate is negative": (cfg(rates=["-1000,4"]), four_samples(), "bad-rates"),
    "rate is infinite": (cfg(rates=["inf,4"]), four_samples(), "bad-rates"),
    "rate is 1e308": (cfg(rates=["1e308,4"]), four_samples(), "bad-rates"),
    "rate is 1e-300": (cfg(rates=["1e-300,4"]), four_samples(), "bad-rates"),
    "last sample is 1e308": (cfg(rates=["1000,1e308"]), four_samples(), "bad-rates"),
    "last sample is 10^14": (cfg(rates=[f"1000,{10**14}"]), four_samples(), "sample-count"),
    "last sample is negative": (cfg(rates=["1000,-4"]), four_samples(), "bad-rates"),
    "date is absurd": (
        cfg(start="99/99/9999,99:99:99.9", trigger="-1/0/0,::"), four_samples(), "date-unstated"),
    "date is of the year 1": (
        cfg(start="01/01/0001,00:00:00", trigger="31/12/9999,23:59:59"), four_samples(), "trigger-outside"),
    "file type is none": (cfg(kind="EBCDIC"), four_samples(), "bad-type"),
    "file type is endless": (cfg(kind="A" * 100_000), four_samples(), "bad-type"),
    "dat is empty": (TEXT, b"", "no-samples"),
    "dat is blank": (TEXT, b"\r\n \r\n", "no-samples"),
    "dat is Ctrl-Z": (TEXT, b"\x1a" * 1000, "no-samples"),
    "dat is NUL": (TEXT, b"\0" * 1000, "bad-data"),
    "dat is a picture": (TEXT, PNG, "bad-data"),
    "dat is noise": (TEXT, NOISE, "bad-data"),
    "dat is words": (TEXT, b"these are no numbers, not one of them\r\n" * 500, "bad-data"),
    "dat is one endless line": (TEXT, b"1" * (6 << 20), "bad-data"),
    "dat is endless commas": (TEXT, b"," * (3 << 20), "bad-data"),
    "dat line of endless fields": (TEXT, b"1,0,1,1," + b"1," * (3 << 20), "lines-long"),
    "dat has too few columns": (TEXT, b"1,0\r\n2,1000\r\n3,2000\r\n", "bad-data"),
    "dat has too many columns": (TEXT, ascii_rows([FOUR] * 9, [TRIPS]), "lines-long"),
    "dat is numbers of a thousand digits": (TEXT, ascii_rows([["9" * 1000] * 4], [TRIPS]), "missing-samples"),
    "dat values are infinite": (
        TEXT, ascii_rows([["inf", "-inf", "nan", "1e999"]], [TRIPS]), "missing-samples"),
    "dat numbers are infinite": (TEXT, b"inf,inf,1,0\r\nnan,nan,2,1\r\n-inf,0,3,1\r\n1e400,1,2,0\r\n", ""),
    "dat states are huge": (TEXT, ascii_rows([FOUR], [[0, 1, 10**30, -5]]), "states-odd"),
    "dat states are words": (TEXT, b"1,0,1,ON\r\n2,1000,2,OFF\r\n3,2000,3,ON\r\n", "states-odd"),
    "dat lines are far too short for the channels": (
        cfg(analog=["1,I,,,A,1,0"] * 10_000), b"1,0,1\n" * 30_000, "bad-data"),
    "binary dat is shorter than a sample": (BINARY, ROWS[:11], "no-samples"),
    "binary dat is cut": (BINARY, ROWS[:-1], "data-cut-short"),
    "binary dat is noise": (BINARY, NOISE, "numbers-jump"),
    "binary dat is a picture": (BINARY, PNG, "numbers-jump"),
    "binary dat is NUL": (cfg(kind="FLOAT32", revision="2013"), b"\0" * 10_000, "numbers-jump"),
    "binary dat is all ones": (cfg(kind="BINARY32", revision="2013"), b"\xff" * 10_000, "numbers-jump"),
    "stamps alone that all miss": (
        ONLY_STAMPS, binary_rows([FOUR], [TRIPS], stamps=[2**32 - 1] * 4), "no-time"),
    "stamps alone that run backward": (
        ONLY_STAMPS, binary_rows([FOUR], [TRIPS], stamps=[9, 7, 5, 3]), "no-time"),
    "stamps alone at random": (
        ONLY_STAMPS, binary_rows([FOUR], [TRIPS], stamps=[9, 1, 2**31, 3]), "stamps-backward"),
    "names are all the same": (
        cfg(analog=["1,I,,,A,1,0"] * 3000), ascii_rows([range(4)] * 3000, [TRIPS]), "short-line"),
}  # fmt: skip


@pytest.mark.parametrize("name", PAIRS)
def test_broken_pair(name: str, tmp_path: Path) -> None:
    configuration, data, expected = PAIRS[name]
    codes = use_cheaply(put(tmp_path, configuration, data))
    if expected:
        assert expected in codes


@pytest.mark.parametrize("name", ["cfg has endless blank lines within", "dat line of endless fields"])
def test_what_is_tolerated_there_still_reads(name: str, tmp_path: Path) -> None:
    configuration, data, _ = PAIRS[name]
    assert read(put(tmp_path, configuration, data)).n_samples >= 1


# Files cut short anywhere


def test_configuration_cut_anywhere(tmp_path: Path) -> None:
    full = TEXT.encode()
    seen = set()
    for stop in range(0, len(full), 3):
        seen |= use(put(tmp_path, full[:stop], four_samples()))
    assert {"cut-short", "bad-counts", "short-line", "bad-type", "date-unstated"} <= seen


@pytest.mark.parametrize("kind", ["ASCII", "BINARY", "BINARY32", "FLOAT32"])
def test_data_cut_anywhere(kind: str, tmp_path: Path) -> None:
    full = four_samples() if kind == "ASCII" else binary_rows([FOUR], [TRIPS], kind=kind)
    for stop in range(1, len(full)):
        path = put(tmp_path, cfg(revision="2013", kind=kind), full[:stop])
        codes = use(path)
        if "no-samples" not in codes and "bad-data" not in codes:
            n = read(path).n_samples
            assert 1 <= n <= 4
            assert n >= 3 or "sample-count" in codes


@pytest.mark.parametrize("kind", ["ASCII", "BINARY"])
def test_combined_file_cut_anywhere(kind: str, tmp_path: Path) -> None:
    data = four_samples() if kind == "ASCII" else ROWS
    mark = "ASCII" if kind == "ASCII" else f"BINARY: {len(ROWS)}"
    full = combined(cfg(revision="2013", kind=kind), data, mark=mark)
    seen = set()
    for stop in range(0, len(full), 4):
        (tmp_path / "rec.cff").write_bytes(full[:stop])
        seen |= use(tmp_path / "rec.cff")
    assert {"missing-section", "no-samples", "sample-count"} <= seen


# Combined files

COMBINED: dict[str, tuple[bytes, str]] = {
    "empty": (b"", "missing-section"),
    "noise": (NOISE, "missing-section"),
    "marks alone": (b"--- file type: CFG ---\r\n--- file type: DAT ASCII ---\r\n", "cut-short"),
    "dashes": (b"-" * (3 << 20), "missing-section"),
    "lines of dashes": (b"---\n" * (2 << 20), "missing-section"),
    "lines that begin like marks": (b"--file\n" * (3 << 20), "missing-section"),
    "a mark of endless blanks": (b"--- file type" + b" " * (3 << 20) + b"CFG", "missing-section"),
    "marks with many blanks": ((b"--- file type" + b" " * 80 + b"\n") * 40_000, "missing-section"),
    "a hundred thousand sections": (b"--- file type: HDR ---\n" * 100_000, "missing-section"),
    "a byte count of a thousand digits": (
        combined(cfg(revision="2013"), four_samples(), mark="ASCII: " + "9" * 1000), "missing-section"),
    "a byte count of 18 digits": (
        combined(cfg(revision="2013"), four_samples(), mark="ASCII: " + "9" * 18), "data-cut-short"),
}  # fmt: skip


@pytest.mark.parametrize("name", COMBINED)
def test_broken_combined_file(name: str, tmp_path: Path) -> None:
    content, expected = COMBINED[name]
    (tmp_path / "rec.cff").write_bytes(content)
    assert expected in use_cheaply(tmp_path / "rec.cff")


# Archives


def archive(folder: Path, members: dict[str, bytes], *, method: int = zipfile.ZIP_DEFLATED) -> Path:
    path = folder / "records.zip"
    with zipfile.ZipFile(path, "w", method) as file:
        for name, content in members.items():
            file.writestr(name, content)
    return path


GOOD = {"rec.cfg": TEXT.encode(), "rec.dat": four_samples()}


def encrypted(folder: Path) -> Path:
    path = archive(folder, GOOD)
    content = bytearray(path.read_bytes())
    for mark, at in ((b"PK\x03\x04", 6), (b"PK\x01\x02", 8)):
        for match in re.finditer(re.escape(mark), bytes(content)):
            content[match.start() + at] |= 1
    path.write_bytes(content)
    return path


def lying(folder: Path, *, size: int) -> Path:
    """An archive whose list says another size of its data than is true."""
    path = archive(folder, GOOD)
    n = len(GOOD["rec.dat"])
    content = path.read_bytes()
    at = content.rindex(b"PK\x01\x02")  # the data are the last member
    assert struct.unpack_from("<I", content, at + 24) == (n,)
    path.write_bytes(content[: at + 24] + struct.pack("<I", size) + content[at + 28 :])
    return path


def cut(folder: Path, share: float) -> Path:
    path = archive(folder, GOOD)
    content = path.read_bytes()
    path.write_bytes(content[: int(len(content) * share)])
    return path


def flipped(folder: Path) -> Path:
    path = archive(folder, {"rec.cfg": TEXT.encode(), "rec.dat": four_samples() * 50})
    content = bytearray(path.read_bytes())
    at = content.index(b"rec.dat") + 20
    content[at] ^= 0xFF
    path.write_bytes(content)
    return path


def nested(folder: Path) -> Path:
    inner = io.BytesIO()
    with zipfile.ZipFile(inner, "w", zipfile.ZIP_DEFLATED) as file:
        file.writestr("rec.cfg", TEXT)
    return archive(folder, {"inner.zip": inner.getvalue(), "rec.cfg": inner.getvalue(), "rec.dat": b"1"})


def written(folder: Path, content: bytes) -> Path:
    path = folder / "records.zip"
    path.write_bytes(content)
    return path


ARCHIVES: dict[str, tuple[Callable[[Path], Path], str]] = {
    "empty file": (lambda f: written(f, b""), "archive-damaged"),
    "noise": (lambda f: written(f, NOISE), "archive-damaged"),
    "end mark alone": (lambda f: written(f, b"PK\x05\x06" + b"\xff" * 18), "archive-damaged"),
    "cut to a half": (lambda f: cut(f, 0.5), "archive-damaged"),
    "cut by a little": (lambda f: cut(f, 0.99), "archive-damaged"),
    "path up": (lambda f: archive(f, {"../rec.cfg": TEXT.encode(), **GOOD}), "archive-path"),
    "path up within": (lambda f: archive(f, {"a/../../rec.cfg": TEXT.encode()}), "archive-path"),
    "absolute path": (lambda f: archive(f, {"/etc/rec.cfg": TEXT.encode()}), "archive-path"),
    "path of a drive": (lambda f: archive(f, {"C:/rec.cfg": TEXT.encode()}), "archive-path"),
    "backslashes": (lambda f: archive(f, {"..\\rec.cfg": TEXT.encode()}), "archive-path"),
    "terminal codes in a name": (lambda f: archive(f, {"\x1b[2Jrec.cfg": TEXT.encode()}), "archive-path"),
    "bomb as data": (lambda f: archive(f, {**GOOD, "rec.dat": b"0" * (60 << 20)}), "archive-ratio"),
    "bomb as configuration": (lambda f: archive(f, {**GOOD, "rec.cfg": b"\n" * (60 << 20)}), "archive-ratio"),
    "bomb as header": (lambda f: archive(f, {**GOOD, "rec.hdr": b" " * (60 << 20)}), "archive-ratio"),
    "bombs in sixty parts": (
        lambda f: archive(
            f, {"rec.cfg": TEXT.encode(), **{f"rec.d{k:02d}": b"0" * (3 << 20) for k in range(60)}}),
        "too-large"),
    "encrypted": (encrypted, "archive-encrypted"),
    "size understated": (lambda f: lying(f, size=10), "archive-damaged"),
    "size overstated": (lambda f: lying(f, size=10**6), "archive-damaged"),
    "size of gigabytes": (lambda f: lying(f, size=2**32 - 2), "too-large"),
    "a byte is wrong": (flipped, "archive-damaged"),
    "unusual method": (lambda f: archive(f, GOOD, method=zipfile.ZIP_LZMA), "archive-method"),
    "name in the file and its list differ": (
        lambda f: written(f, archive(f, GOOD).read_bytes().replace(b"rec.dat", b"bad.dat", 1)),
        "archive-damaged"),
    "a member is missing": (lambda f: archive(f, {"rec.cfg": TEXT.encode()}), "missing-member"),
    "archive in an archive": (nested, "bad-counts"),
    "members in different folders": (
        lambda f: archive(f, {"a/rec.cfg": TEXT.encode(), "b/rec.dat": b"1"}), "missing-member"),
    "a folder named like a member": (
        lambda f: archive(f, {"rec.cfg": TEXT.encode(), "rec.dat/": b""}), "missing-member"),
}  # fmt: skip


@pytest.mark.parametrize("name", ARCHIVES)
def test_broken_archive(name: str, tmp_path: Path) -> None:
    make, expected = ARCHIVES[name]
    path = make(tmp_path)
    before = sorted(p.name for p in tmp_path.iterdir())
    assert expected in use_cheaply(path)
    assert sorted(p.name for p in tmp_path.iterdir()) == before  # nothing is unpacked to disk


def test_archive_of_thousands_of_members(tmp_path: Path) -> None:
    members = {f"{k:05d}.{kind}": b"x" for k in range(1000) for kind in ("cfg", "dat")}
    path = archive(tmp_path, members, method=zipfile.ZIP_STORED)
    start = time.perf_counter()
    assert len(list(find_records(path))) == 1000
    assert use(path) == {"cut-short"}
    assert time.perf_counter() - start < MOST_SECONDS


def test_archive_of_too_many_members(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("analyzer.records.archive._MAX_MEMBERS", 3)
    path = archive(tmp_path, {f"{k}.txt": b"" for k in range(4)})
    assert use(path) == {"archive-members"}


def test_list_of_members_is_measured_before_it_is_read(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("analyzer.records.archive._MAX_DIRECTORY_BYTES", 300)
    path = archive(tmp_path, {f"{k}.txt": b"" for k in range(10)})
    assert use(path) == {"archive-members"}
    assert use(archive(tmp_path, GOOD)) & {"archive-members"} == set()


# The file system


def test_folder_in_place_of_a_member(tmp_path: Path) -> None:
    path = put(tmp_path, TEXT, four_samples())
    path.with_suffix(".dat").unlink()
    path.with_suffix(".dat").mkdir()
    assert use_cheaply(path) == {"missing-member"}


@pytest.mark.parametrize(
    "name", ["x" * 5000 + ".cfg", "\0.cfg", "no/such/folder/rec.cfg", "other.cfg/rec.cfg"]
)
def test_paths_that_lead_nowhere(name: str, tmp_path: Path) -> None:
    put(tmp_path, TEXT, four_samples(), stem="other")
    codes = use(tmp_path / name)
    assert codes
    assert codes <= {"no-such-file", "unreadable-file"}


def test_links_in_a_circle(tmp_path: Path) -> None:
    put(tmp_path, TEXT, four_samples())
    try:
        (tmp_path / "a.cfg").symlink_to(tmp_path / "b.cfg")
        (tmp_path / "b.cfg").symlink_to(tmp_path / "a.cfg")
        (tmp_path / "rec.hdr").symlink_to(tmp_path / "rec.hdr")
        (tmp_path / "loop").symlink_to(tmp_path, target_is_directory=True)
    except OSError:
        pytest.skip("links cannot be made here")
    assert [found.name for found in find_records(tmp_path)] == ["rec.cfg"]
    assert read(tmp_path / "rec.cfg").n_samples == 4
    assert use(tmp_path / "a.cfg") == {"no-such-file"}


@pytest.mark.skipif(os.name == "nt", reason="such names cannot be made there")
def test_file_names_that_move_the_cursor(tmp_path: Path) -> None:
    path = put(tmp_path, TEXT[:30], four_samples(), stem="a\x1b[2J\nb\x07")
    assert use_cheaply(path) == {"short-line"}
    raw = os.fsencode(tmp_path) + b"/\xff\xfe.cfg"  # no text in any encoding
    Path(os.fsdecode(raw)).write_bytes(b"")
    assert use_cheaply(Path(os.fsdecode(raw))) == {"missing-member"}


# What is large for its file


@pytest.mark.skipif(sys.platform != "linux", reason="only there can the peak be set back")
def test_memory_is_measured_at_its_peak() -> None:
    with grown_memory() as grown:
        np.ones(200 << 17)  # 200 MiB, let go of at once; what earlier work gives back meanwhile is less
        assert 100 << 20 < grown() < 250 << 20


def test_many_channels_of_few_samples_cost_little(tmp_path: Path) -> None:
    n = 5000
    text = cfg(analog=["1,I,,,A,1,0,0,-32767,32767,1,1,P"] * n, digital=[], rates=["1000,200"], kind="BINARY")
    data = np.zeros(200, dtype=[("number", "<u4"), ("stamp", "<u4"), ("analog", "<i2", n)])
    data["number"] = np.arange(1, 201)
    codes = use_cheaply(put(tmp_path, text, data.tobytes()))
    assert "stamps-constant" in codes


def test_survey_of_many_channels_takes_blocks(tmp_path: Path) -> None:
    n_channels, n = 2000, 5_000
    text = cfg(analog=["1,I,,,A,1,0,0,-32767,32767,1,1,P"] * n_channels, digital=[], kind="BINARY")
    path = put(tmp_path, text, b"")
    row = np.zeros(1, dtype=[("number", "<u4"), ("stamp", "<u4"), ("analog", "<i2", n_channels)])
    row["number"], row["stamp"] = 1, 5
    path.with_suffix(".dat").write_bytes(row.tobytes() * n)  # 20 MB; 80 MB as doubles
    record = read(path)
    with grown_memory() as grown:
        record.survey()
        assert grown() < 60 << 20
