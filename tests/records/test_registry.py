"""From a path to the records behind it: files, stems, folders, archives and formats of other packages."""

from __future__ import annotations

import logging
import zipfile
from importlib.metadata import EntryPoint
from pathlib import Path

import pytest

from analyzer.records import Format, ReadOptions, Record, RecordError, find_records, read, registry
from analyzer.records.blobs import Shelf
from tests.records.comtrade.makers import cfg, combined, four_samples, put


def zip_of(path: Path, members: dict[str, bytes]) -> Path:
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as file:
        for name, content in members.items():
            file.writestr(name, content)
    return path


RECORD = {"rec.cfg": cfg().encode(), "rec.dat": four_samples()}


def test_folder_holds_each_record_once_in_the_order_of_names(tmp_path: Path) -> None:
    for stem in ("b", "a", "c"):
        put(tmp_path, cfg(), four_samples(), stem=stem)
    (tmp_path / "a.hdr").write_bytes(b"text")
    (tmp_path / "d.cff").write_bytes(combined(cfg(revision="2013"), four_samples()))
    (tmp_path / "notes.md").write_bytes(b"nothing")
    (tmp_path / "._a.cfg").write_bytes(b"what another system left")
    (tmp_path / "sub").mkdir()
    found = list(find_records(tmp_path))
    assert [f.name for f in found] == ["a.cfg", "b.cfg", "c.cfg", "d.cff"]
    assert all(f.read(options=ReadOptions()).n_samples == 4 for f in found)


def test_combined_and_separate_files_of_one_stem_are_two_records(tmp_path: Path) -> None:
    put(tmp_path, cfg(), four_samples())
    (tmp_path / "rec.cff").write_bytes(combined(cfg(revision="2013"), four_samples()))
    assert [f.name for f in find_records(tmp_path)] == ["rec.cff", "rec.cfg"]
    assert read(tmp_path / "rec").origin.revision == 1999  # the stem means the separate files


def test_one_record_is_asked_for_and_several_or_none_are_there(tmp_path: Path) -> None:
    with pytest.raises(RecordError) as caught:
        read(tmp_path)
    assert caught.value.code == "no-record"
    for stem in ("a", "b"):
        put(tmp_path, cfg(), four_samples(), stem=stem)
    with pytest.raises(RecordError) as caught:
        read(tmp_path)
    assert caught.value.code == "several-records"
    assert "a.cfg" in caught.value.hint


@pytest.mark.parametrize(("name", "code"), [("gone.cfg", "no-such-file"), ("notes.md", "unknown-format")])
def test_what_is_no_record(tmp_path: Path, name: str, code: str) -> None:
    (tmp_path / "notes.md").write_bytes(b"nothing")
    with pytest.raises(RecordError) as caught:
        read(tmp_path / name)
    assert caught.value.code == code


def test_archive_member_by_member(tmp_path: Path) -> None:
    members = {f"{folder}{name}": data for folder in ("", "x/", "x/y é/") for name, data in RECORD.items()}
    path = zip_of(tmp_path / "records.ZIP", members)
    found = list(find_records(path))
    assert [f.shown for f in found] == [
        f"{path}!rec.cfg", f"{path}!x/rec.cfg", f"{path}!x/y é/rec.cfg"]  # fmt: skip
    for one in found:
        record = one.read(options=ReadOptions())
        assert record.n_samples == 4
        assert record.origin.path.startswith(str(path))
    for member in ("rec.cfg", "rec.dat", "rec", "x/rec.cfg", "x/y é/rec"):
        assert read(f"{path}!{member}").n_samples == 4
    for member in ("gone.cfg", "x/gone", "z/rec.cfg"):
        with pytest.raises(RecordError) as caught:
            read(f"{path}!{member}")
        assert caught.value.code == "no-such-file"


def test_archive_under_folders_with_exclamation_marks(tmp_path: Path) -> None:
    folder = tmp_path / "now! or.zip!never"
    folder.mkdir()
    path = zip_of(folder / "a!b.zip", RECORD)
    assert read(path).n_samples == 4
    assert read(f"{path}!rec.cfg").n_samples == 4


def test_archive_made_on_macos(tmp_path: Path) -> None:
    members = {**RECORD, "__MACOSX/._rec.cfg": b"\0\5", "__MACOSX/._rec.dat": b"\0\5"}
    assert read(zip_of(tmp_path / "records.zip", members)).n_samples == 4


def test_archive_that_does_not_exist(tmp_path: Path) -> None:
    for name in ("gone.zip", "gone.zip!rec.cfg"):
        with pytest.raises(RecordError) as caught:
            read(tmp_path / name)
        assert caught.value.code == "no-such-file"


def test_samples_of_an_archive_outlive_it(tmp_path: Path) -> None:
    path = zip_of(tmp_path / "records.zip", RECORD)
    record = read(path)
    path.unlink()
    assert record.signal("IA").tolist() == [50.0, 50.5, 51.0, 51.5]


# Formats of other packages


def _read_made_up(shelf: Shelf, name: str, options: ReadOptions) -> Record:
    values = [float(line) for line in shelf.blob(name).read(limit_bytes=1000).split()]
    return Record.from_arrays({"I": (values, "A")}, sample_rate_hz=options.sample_rate_hz or 1.0)


MADE_UP = Format(
    name="made-up",
    claims=lambda name, head: name.endswith(".mup") and head().startswith(b"1"),
    key=lambda name: name,
    leader=lambda names: names[0],
    read=_read_made_up,
)
NO_FORMAT = "text"


def entry_points_of(*values: str) -> list[EntryPoint]:
    return [EntryPoint(name=v, value=v, group=registry.ENTRY_POINT_GROUP) for v in values]


def test_another_package_adds_a_format(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    points = entry_points_of(f"{__name__}:MADE_UP")
    monkeypatch.setattr(registry, "entry_points", lambda group: points)
    (tmp_path / "a.mup").write_bytes(b"1 2 3")
    (tmp_path / "b.mup").write_bytes(b"2 3")
    put(tmp_path, cfg(), four_samples())
    found = [(f.name, f.format.name) for f in find_records(tmp_path)]
    assert found == [("a.mup", "made-up"), ("rec.cfg", "comtrade")]
    record = read(tmp_path / "a.mup", options=ReadOptions(sample_rate_hz=10.0))
    assert record.times().tolist() == [0.0, 0.1, 0.2]
    path = zip_of(tmp_path / "z.zip", {"in/a.mup": b"1 5"})
    assert read(path).signal("I").tolist() == [1.0, 5.0]


def test_a_broken_package_does_not_stop_the_others(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, caplog: pytest.LogCaptureFixture
) -> None:
    points = entry_points_of("no_such_package:FORMAT", f"{__name__}:NO_SUCH", f"{__name__}:NO_FORMAT")
    monkeypatch.setattr(registry, "entry_points", lambda group: points)
    with caplog.at_level(logging.WARNING):
        assert read(put(tmp_path, cfg(), four_samples())).n_samples == 4
    assert len(set(caplog.messages)) == 3


def test_a_header_alone_is_no_record(tmp_path):
    (tmp_path / "notes.hdr").write_text("kept by itself", encoding="utf-8")
    (tmp_path / "notes.INF").write_text("", encoding="utf-8")
    assert list(find_records(tmp_path)) == []
