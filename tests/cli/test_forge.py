"""The command ``forge``: files, options, one line for what is wrong."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from analyzer.forge import CampaignRecord, TruthDocument, parse_scenario
from analyzer.records import read
from tests.forge.scenarios import PLAIN, VARIED, changed


@pytest.fixture
def plain(tmp_path: Path) -> Path:
    path = tmp_path / "plain fault.toml"
    path.write_text(PLAIN, encoding="utf-8")
    return path


def _names(folder: Path) -> list[str]:
    return sorted(path.name for path in folder.iterdir())


def test_a_record_and_its_truth(run, plain, tmp_path):
    out = tmp_path / "new" / "folder"
    done = run("forge", plain, "--out", out)
    assert (done.code, done.err) == (0, "")
    assert _names(out) == ["plain fault.cfg", "plain fault.dat", "plain fault.truth.json"]
    assert done.out.replace("\n", "").startswith("wrote ")
    assert all(name in done.out for name in _names(out))
    truth = TruthDocument.model_validate_json((out / "plain fault.truth.json").read_text(encoding="utf-8"))
    assert truth.record.name == "plain fault"
    examined = run("examine", out / "plain fault.cfg", "--json", "-")
    (event,) = json.loads(examined.out)["events"]
    assert event["fault_type"] == truth.events[0].fault_type == "AG"


def test_a_campaign(run, tmp_path):
    path = tmp_path / "many.toml"
    path.write_text(VARIED, encoding="utf-8")
    out = tmp_path / "out"
    done = run("forge", path, "--count", "12", "--seed", "7", "--out", out)
    assert (done.code, done.err) == (0, "")
    assert done.out.startswith("wrote 12 records, many-0001 to many-0012, to ")
    assert len(_names(out)) == 36
    seeds = {json.loads(p.read_text(encoding="utf-8"))["record"]["seed"] for p in out.glob("*.truth.json")}
    assert seeds == {7}
    assert len({p.read_bytes() for p in out.glob("*.dat")}) == 12


def test_workers_reach_the_campaign(run, plain, monkeypatch):
    """Processes themselves are the library's, and tested there."""
    import analyzer.forge

    asked: dict[str, object] = {}

    def campaign(scenario, folder, **options):
        asked.update(options)
        return (CampaignRecord(index=0, name="x", files=()), CampaignRecord(index=1, name="y", files=()))

    monkeypatch.setattr(analyzer.forge, "forge_campaign", campaign)
    assert run("forge", plain, "--workers", "3", "--count", "2").code == 0
    assert (asked["workers"], asked["count"], asked["seed"]) == (3, 2, None)


@pytest.mark.parametrize(
    ("options", "names", "encoding"),
    [
        (["--format", "csv"], ["x.csv"], None),
        (["--revision", "2013", "--encoding", "float32"], ["x.cfg", "x.dat"], "float32"),
        (["--revision", "1991", "--encoding", "ascii"], ["x.cfg", "x.dat"], "ascii"),
    ],
)
def test_another_format_than_the_scenarios(run, tmp_path, options, names, encoding):
    path = tmp_path / "other.toml"
    path.write_text(changed('station = "Invented"', 'name = "x"'), encoding="utf-8")
    out = tmp_path / "out"
    assert run("forge", path, "--out", out, *options).code == 0
    assert _names(out) == [*names, "x.truth.json"]
    assert read(out / names[0]).origin.encoding == encoding


@pytest.mark.parametrize(
    "options",
    [
        ["--count", "0"],
        ["--count", "many"],
        ["--seed", "-1"],
        ["--workers", "0"],
        ["--format", "wav"],
        ["--existing", "merge"],
        ["--format", "csv", "--encoding", "ascii"],
        ["--revision", "1999", "--encoding", "float32"],
    ],
)
def test_wrong_options_are_code_2(run, plain, tmp_path, options):
    done = run("forge", plain, "--out", tmp_path / "out", *options)
    assert (done.code, done.out) == (2, "")
    assert "Error: " in done.err
    assert not (tmp_path / "out").exists()


def test_no_scenario_is_code_2(run):
    done = run("forge")
    assert (done.code, done.out) == (2, "")
    assert "SCENARIO" in done.err


@pytest.mark.parametrize(
    ("old", "new", "says"),
    [
        ("fraction = 0.5", "fraction = 1.5", "line 16: events[0].fraction: 1.5 lies beyond the line"),
        ("x_ohm = 4.0", "x_ohm = 0", "line 10: network.source.z1: needs a reactance above zero"),
        ("[record]", "[record", "is no valid TOML"),
        ("duration_s", "lasts_s", "line 6: record.lasts_s: is no key of this section"),
    ],
)
def test_a_wrong_scenario_is_one_line_and_code_2(run, tmp_path, old, new, says):
    path = tmp_path / "wrong.toml"
    path.write_text(changed(old, new), encoding="utf-8")
    done = run("forge", path, "--out", tmp_path / "out")
    assert (done.code, done.out) == (2, "")
    assert len(done.err.splitlines()) == 1
    assert says in done.err
    assert "wrong.toml" in done.err


def test_a_scenario_that_cannot_be_read_is_code_3(run, tmp_path):
    for path in (tmp_path / "gone.toml", tmp_path, Path("a\0b.toml")):
        done = run("forge", path, "--out", tmp_path / "out")
        assert (done.code, done.out) == (3, "")
        assert len(done.err.splitlines()) == 1


def test_files_that_are_there(run, plain, tmp_path):
    out = tmp_path / "out"
    assert run("forge", plain, "--out", out).code == 0
    before = {path.name: path.read_bytes() for path in out.iterdir()}
    done = run("forge", plain, "--out", out, "--seed", "2")
    assert (done.code, done.out) == (2, "")
    assert len(done.err.splitlines()) == 1
    assert "is there already" in done.err
    assert {path.name: path.read_bytes() for path in out.iterdir()} == before
    assert run("forge", plain, "--out", out, "--seed", "2", "--existing", "replace").code == 0
    assert (out / "plain fault.dat").read_bytes() != before["plain fault.dat"]


def test_an_output_folder_that_is_a_file(run, plain):
    done = run("forge", plain, "--out", plain)
    assert (done.code, done.out) == (2, "")
    assert len(done.err.splitlines()) == 1


def test_the_schema_and_the_example_are_shown(run):
    schema = run("forge", "--show-schema")
    assert schema.code == 0
    assert "Ohms" in json.loads(schema.out)["$defs"]
    example = run("forge", "--example")
    assert example.code == 0
    assert parse_scenario(example.out).title


def test_help(run):
    done = run("forge", "--help")
    assert (done.code, done.err) == (0, "")
    assert "faultassay forge " in done.out.partition("Examples")[2]
    assert not done.too_wide


def test_no_bar_where_there_is_no_terminal(run, tmp_path):
    path = tmp_path / "two.toml"
    path.write_text(VARIED, encoding="utf-8")
    done = run("forge", path, "--count", "2", "--out", tmp_path / "out")
    assert (done.code, done.err) == (0, "")
    assert "\x1b" not in done.out


def test_a_bar_on_a_terminal(monkeypatch, capsys):
    from analyzer.cli.forge import _progress

    monkeypatch.setenv("FORCE_COLOR", "1")
    monkeypatch.setenv("TERM", "xterm")
    with _progress(10) as report:
        assert report is not None
        report(4)
    assert "forging" in capsys.readouterr().err
    with _progress(1) as report:
        assert report is None
