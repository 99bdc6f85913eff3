from pathlib import Path

import pytest

from analyzer.records.blobs import Blob
from analyzer.records.model import Origin
from analyzer.records.output import input_files, written_beside
from analyzer.records.problems import RecordError


def test_output_gets_its_name_only_when_all_is_written(tmp_path: Path) -> None:
    path = tmp_path / "out.csv"
    with written_beside(path) as draft:
        draft.write_text("whole", encoding="utf-8")
        assert draft.parent == tmp_path
        assert not path.exists()
    assert path.read_text(encoding="utf-8") == "whole"
    assert list(tmp_path.iterdir()) == [path]


def test_failure_leaves_the_folder_as_it_was(tmp_path: Path) -> None:
    path = tmp_path / "out.csv"
    path.write_text("old", encoding="utf-8")

    def fail() -> None:
        with written_beside(path, existing="replace") as draft:
            draft.write_text("half", encoding="utf-8")
            raise ZeroDivisionError

    with pytest.raises(ZeroDivisionError):
        fail()
    assert path.read_text(encoding="utf-8") == "old"
    assert list(tmp_path.iterdir()) == [path]


def test_existing_file_is_replaced_only_on_request(tmp_path: Path) -> None:
    path = tmp_path / "out.csv"
    path.write_text("old", encoding="utf-8")
    with pytest.raises(RecordError) as caught, written_beside(path):
        pytest.fail("nothing may be written")
    assert caught.value.code == "exists"
    with written_beside(path, existing="replace") as draft:
        draft.write_text("new", encoding="utf-8")
    assert path.read_text(encoding="utf-8") == "new"


def test_file_that_appears_meanwhile_is_not_replaced(tmp_path: Path) -> None:
    path = tmp_path / "out.csv"
    with pytest.raises(RecordError) as caught, written_beside(path):
        path.write_text("another's", encoding="utf-8")
    assert caught.value.code == "exists"
    assert path.read_text(encoding="utf-8") == "another's"


@pytest.mark.parametrize("existing", ["refuse", "replace"])
def test_input_is_never_replaced(tmp_path: Path, existing: str) -> None:
    path = tmp_path / "in.csv"
    path.write_text("input", encoding="utf-8")
    detour = tmp_path / "sub" / ".." / "in.csv"
    (tmp_path / "sub").mkdir()
    with pytest.raises(RecordError) as caught, written_beside(detour, existing=existing, inputs=[path]):  # type: ignore[arg-type]
        pytest.fail("nothing may be written")
    assert caught.value.code == "would-overwrite-input"
    assert path.read_text(encoding="utf-8") == "input"


@pytest.mark.parametrize("tail", ["missing/out.csv", "file/out.csv"])
def test_unreachable_folder_is_one_clear_error(tmp_path: Path, tail: str) -> None:
    (tmp_path / "file").write_bytes(b"")
    with pytest.raises(RecordError) as caught, written_beside(tmp_path / tail):
        pytest.fail("nothing can be written")
    assert caught.value.code == "cannot-write"
    assert caught.value.hint


def test_folder_is_not_replaced(tmp_path: Path) -> None:
    with pytest.raises(RecordError) as caught, written_beside(tmp_path, existing="replace"):
        pytest.fail("nothing may be written")
    assert caught.value.code == "not-a-file"


def test_unknown_choice_is_a_wrong_argument(tmp_path: Path) -> None:
    with pytest.raises(ValueError, match="existing"), written_beside(tmp_path / "a", existing="maybe"):  # type: ignore[arg-type]
        pytest.fail("nothing may be written")


def test_every_member_of_a_record_counts_as_input(tmp_path: Path) -> None:
    for name in ("rec.cfg", "REC.HDR", "rec.dat", "rec.csv", "other.cfg"):
        (tmp_path / name).write_bytes(b"x")
    data = Blob(name="rec.dat", shown=str(tmp_path / "rec.dat"), path=tmp_path / "rec.dat")
    origin = Origin(path=data.shown, format="comtrade", data=data)
    assert {path.name for path in input_files(origin)} == {"rec.cfg", "REC.HDR", "rec.dat"}


def test_archive_of_a_member_counts_as_input(tmp_path: Path) -> None:
    archive = tmp_path / "odd!name.zip"
    archive.write_bytes(b"x")
    data = Blob(name="a.csv", shown=f"{archive}!a.csv", data=b"")
    assert archive in input_files(Origin(path=data.shown, format="csv", data=data))


def test_record_made_in_memory_has_no_input() -> None:
    assert input_files(Origin(path="", format="memory")) == ()
