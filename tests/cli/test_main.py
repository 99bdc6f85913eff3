"""What all commands have in common: exit codes, errors of one line, help, imports that come late."""

from __future__ import annotations

import json
import subprocess
import sys
import time
from pathlib import Path

import pytest

from tests.cli.files import write_record


def _bad_inputs(folder: Path) -> dict[str, Path]:
    """Return inputs that cannot be read, by what is wrong with them."""
    bad = {name: folder / name for name in ("gone.cfg", "gone", "empty.cfg", "garbage.cfg", "garbage.csv")}
    bad["empty.cfg"].write_bytes(b"")
    bad["garbage.cfg"].write_bytes(bytes(range(256)) * 50)
    bad["garbage.csv"].write_bytes(b"\x00\xff\xfe" * 999)
    bad["no folder"] = folder / "no" / "such" / "place"
    bad["empty folder"] = folder / "nothing"
    bad["empty folder"].mkdir()
    bad["folder for a file"] = write_record(folder, "folder")
    bad["folder for a file"].with_suffix(".dat").unlink()
    bad["folder for a file"].with_suffix(".dat").mkdir()
    bad["no data"] = write_record(folder, "lonely")
    bad["no data"].with_suffix(".dat").unlink()
    bad["not a zip.zip"] = folder / "not_a.zip"
    bad["not a zip.zip"].write_bytes(b"PK\x03\x04" + b"\x00" * 60)
    bad["letter.txt"] = folder / "letter.txt"
    bad["letter.txt"].write_text("Dear all,\nthe line tripped.\n", encoding="utf-8")
    bad["nul in the name"] = Path("a\0b.cfg")
    bad["long name"] = folder / ("x" * 5000)
    return bad


@pytest.mark.parametrize("command", ["describe", "examine", "convert"])
def test_a_bad_input_is_one_line_and_code_3(run, tmp_path, command):
    for what, path in _bad_inputs(tmp_path).items():
        target = [str(tmp_path / "out.csv")] if command == "convert" else []
        done = run(command, path, *target)
        assert (done.code, what) == (3, what)
        assert len(done.err.splitlines()) == 1, what
        assert "Traceback" not in done.err
        assert done.out == ""


def test_a_file_that_may_not_be_read_is_one_line(run, trip, monkeypatch):
    def refuse(self, *args, **kwargs):
        raise PermissionError(13, "Permission denied", str(self))

    monkeypatch.setattr(Path, "open", refuse)
    done = run("describe", trip)
    assert done.code == 3
    assert len(done.err.splitlines()) == 1
    assert "Permission denied" in done.err


def test_an_error_line_cannot_act_on_the_terminal(run, tmp_path):
    done = run("describe", tmp_path / "\x1b[31m[red]gone\n\x07.cfg")
    assert done.code == 3
    assert len(done.err.splitlines()) == 1
    assert not {c for c in done.err if not c.isprintable() and c != "\n"}
    assert "[red]gone" in done.err


@pytest.mark.parametrize(
    "arguments",
    [
        ["fly"],
        ["--fly"],
        ["describe"],
        ["convert", "trip.cfg"],
        ["describe", "x.cfg", "--fly"],
        ["describe", "x.cfg", "--text-encoding", "klingon"],
        ["describe", "x.cfg", "--nominal-frequency", "0"],
        ["describe", "x.cfg", "--nominal-frequency", "nan"],
        ["describe", "x.cfg", "--sample-rate", "-4800"],
        ["describe", "x.cfg", "--sample-rate", "fast"],
        ["describe", "x.cfg", "--unit", "IA"],
        ["describe", "x.cfg", "--unit", "=kA"],
        ["describe", "x.cfg", "--unit", "IA=furlong"],
        ["describe", "x.cfg", "--separator", "--"],
        ["describe", "x.cfg", "--decimal", ""],
        ["describe", "x.cfg", "--time-unit", "h"],
    ],
)
def test_wrong_use_is_code_2(run, arguments):
    done = run(*arguments)
    assert (done.code, done.out) == (2, "")
    assert "Error: " in done.err
    assert "Traceback" not in done.err


def test_reading_options_reach_the_reader(run, tmp_path):
    table = tmp_path / "export.csv"
    table.write_text("moment;IA\n0;1,5\n10;2,5\n20;-4,5\n", encoding="utf-8")
    done = run(
        "describe", table, "--separator", ";", "--decimal", ",", "--time-column", "moment",
        "--time-unit", "ms", "--unit", "IA=kA", "--nominal-frequency", "60", "--json", "-",
    )  # fmt: skip
    assert done.code == 0, done.err
    record = json.loads(done.out)["record"]
    assert record["nominal_frequency_hz"] == 60.0
    assert record["duration_s"] == pytest.approx(0.02)
    assert (record["analog"][0]["minimum"], record["analog"][0]["maximum"]) == (-4500.0, 2500.0)


@pytest.mark.parametrize("command", ["describe", "examine"])
def test_json_replaces_an_older_document_but_never_an_input(run, trip, found, tmp_path, command):
    found()
    target = tmp_path / "out.json"
    target.write_text("old", encoding="utf-8")
    assert run(command, trip, "--json", target).code == 0
    assert json.loads(target.read_text(encoding="utf-8"))["record"]
    broken = tmp_path / "broken.cfg"
    broken.write_bytes(b"\x00" * 100)
    for path in (trip, trip.with_suffix(".dat"), broken):
        before = path.read_bytes()
        done = run(command, trip, broken, "--json", path)
        assert done.code == 2
        assert path.read_bytes() == before
        assert "is the file that is being read" in done.err


@pytest.mark.parametrize("command", ["describe", "examine", "convert"])
def test_help_is_plain_fits_and_has_examples(run, command):
    done = run(command, "--help")
    assert (done.code, done.err) == (0, "")
    assert f"faultassay {command} " in done.out.partition("Examples")[2]
    assert not done.too_wide


def test_help_names_the_commands_and_the_exit_codes(run):
    done = run("--help")
    assert done.code == 0
    assert all(f"\n  {command} " in done.out for command in ("describe", "examine", "convert"))
    assert all(f"\n    {code}  " in done.out for code in range(5))
    assert not done.too_wide


def test_version(run):
    done = run("--version")
    assert done.code == 0
    assert done.out.startswith("faultassay ")


def _python(code: str, *arguments: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-c", code, *arguments], capture_output=True, text=True, timeout=60
    )


_LOADED = (
    "import sys\nfrom analyzer.cli import main\ncode = main(sys.argv[2:])\n"
    "print([m for m in sys.argv[1].split(',') if m in sys.modules], code, file=sys.stderr)"
)


def test_help_imports_next_to_nothing():
    done = _python(_LOADED, "numpy,scipy,pandas,pydantic,pyarrow,lmfit,matplotlib,typer", "--help")
    assert done.stderr.strip() == "['typer'] 0"


def test_describe_leaves_the_fit_and_the_pictures_alone(run, trip, tmp_path):
    binary = tmp_path / "binary.cfg"
    assert run("convert", trip, binary, "--revision", "1999").code == 0
    heavy = "lmfit,scipy.optimize,matplotlib,analyzer.examine,analyzer.findings,numpy"
    assert _python(_LOADED, heavy, "describe", str(trip)).stderr.strip() == "['numpy'] 0"
    heavy += ",pandas,pyarrow"
    assert _python(_LOADED, heavy, "describe", str(binary)).stderr.strip() == "['numpy'] 0"


def test_help_answers_quickly():
    """DESIGN: well under half a second. The best of a few, since the machine may be busy."""
    took = []
    for _ in range(4):
        start = time.perf_counter()
        done = subprocess.run([sys.executable, "-m", "analyzer", "--help"], capture_output=True, timeout=60)
        took.append(time.perf_counter() - start)
        assert done.returncode == 0
    assert min(took) < 0.5


def test_a_reader_that_goes_away_is_no_error(tmp_path):
    cfg = write_record(tmp_path, names=tuple(f"I{k}" for k in range(900)))
    process = subprocess.Popen(
        [sys.executable, "-m", "analyzer", "describe", str(cfg)],
        stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, encoding="utf-8",
    )  # fmt: skip
    assert process.stdout is not None
    assert process.stderr is not None
    process.stdout.readline()
    process.stdout.close()
    said = process.stderr.read()
    process.stderr.close()
    assert (process.wait(timeout=60), said) == (0, "")


def test_a_terminal_that_lacks_letters_is_no_error(tmp_path):
    import os

    cfg = write_record(tmp_path, station="Überlandwerk 中")
    done = subprocess.run(
        [sys.executable, "-m", "analyzer", "describe", str(cfg)],
        capture_output=True,
        env={**os.environ, "PYTHONIOENCODING": "ascii", "PYTHONUTF8": "0"},
        timeout=60,
    )
    assert (done.returncode, done.stderr) == (0, b"")
    assert b"?berlandwerk" in done.stdout
