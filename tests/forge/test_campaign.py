"""Campaigns: the same records for any number of them and of processes, and nothing half written."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from analyzer.forge import ForgeError, TruthDocument, forge_campaign, forge_record, parse_scenario
from analyzer.records import RecordError, read
from tests.forge.scenarios import PLAIN, VARIED, changed


def _contents(folder: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in folder.iterdir()}


def test_a_record_is_the_same_whatever_the_count(tmp_path):
    scenario = parse_scenario(VARIED)
    for count in (2, 5):
        forge_campaign(scenario, tmp_path / str(count), count=count, seed=7, name="x")
    few, many = _contents(tmp_path / "2"), _contents(tmp_path / "5")
    assert len(few) == 6
    assert len(many) == 15
    assert {name: many[name] for name in few} == few
    assert many["x-0001.dat"] != many["x-0002.dat"]


def test_a_single_record_is_the_first_of_a_campaign(tmp_path):
    scenario = parse_scenario(VARIED)
    forge_campaign(scenario, tmp_path, count=2, seed=7, name="x")
    (one,) = forge_campaign(scenario, tmp_path, seed=7, name="x")
    assert [path.name for path in one.files] == ["x.cfg", "x.dat", "x.truth.json"]
    assert (tmp_path / "x.dat").read_bytes() == (tmp_path / "x-0001.dat").read_bytes()


def test_processes_change_nothing(tmp_path):
    scenario = parse_scenario(VARIED)
    seen: list[int] = []
    here = forge_campaign(scenario, tmp_path / "one", count=17, name="x")
    there = forge_campaign(
        scenario, tmp_path / "two", count=17, name="x", workers=2, progress=lambda done: seen.append(done)
    )
    assert [(r.index, r.name) for r in here] == [(r.index, r.name) for r in there]
    assert [r.index for r in there] == list(range(17))
    assert _contents(tmp_path / "one") == _contents(tmp_path / "two")
    assert seen == sorted(seen)
    assert seen[-1] == 17


def test_files_and_truth_belong_together(tmp_path):
    (first, second) = forge_campaign(parse_scenario(VARIED), tmp_path, count=2, seed=3)
    for record in (first, second):
        *_, truth_path = record.files
        truth = TruthDocument.model_validate_json(truth_path.read_text(encoding="utf-8"))
        assert (truth.record.name, truth.record.seed, truth.record.index) == (record.name, 3, record.index)
        again = forge_record(parse_scenario(VARIED), seed=3, index=record.index)
        assert again.truth.events == truth.events
        assert np.array_equal(read(record.files[0]).signals(), again.record.signals())


@pytest.mark.parametrize(
    ("lines", "suffixes"),
    [
        ('revision = 1991\nencoding = "ascii"', [".cfg", ".dat"]),
        ('revision = 1999\nencoding = "ascii"', [".cfg", ".dat"]),
        ('revision = 2013\nencoding = "binary32"', [".cfg", ".dat"]),
        ('revision = 2013\nencoding = "float32"\ncombined = true', [".cff"]),
        ('format = "csv"', [".csv"]),
    ],
)
def test_every_format_reads_back_to_what_was_forged(tmp_path, lines, suffixes):
    scenario = parse_scenario(changed('station = "Invented"', lines))
    (written,) = forge_campaign(scenario, tmp_path, name="x")
    assert [path.suffix for path in written.files[:-1]] == suffixes
    forged = forge_record(scenario).record.signals()
    back = read(written.files[0]).signals()
    # Real numbers of FLOAT32 have 24 bits; counts and text come back as they were.
    assert np.abs(back - forged).max() <= (2.0**-24 * np.abs(forged).max() if "float32" in lines else 1e-9)


def test_sides_and_units_leave_the_primary_values_alone(tmp_path):
    stated = (
        'side = "secondary"\ncurrent_ratio = { primary = 400, secondary = 5 }\n'
        'voltage_ratio = { primary = 20000, secondary = 100 }\ncurrent_unit = "kA"\nvoltage_unit = "kV"'
    )
    plain = parse_scenario(PLAIN)
    scenario = parse_scenario(changed('station = "Invented"', stated))
    (written,) = forge_campaign(scenario, tmp_path, name="x")
    record = read(written.files[0])
    assert np.allclose(record.signals(), forge_record(plain).record.signals(), rtol=1e-12, atol=1e-9)
    assert {channel.side for channel in record.analog} == {"secondary"}
    assert record.channel("IA").unit == "kA"
    ratio = record.signal("IA") / np.where(
        record.as_written(["IA"])[0] == 0, np.nan, record.as_written(["IA"])[0]
    )
    assert np.nanmin(ratio) == pytest.approx(80e3) == pytest.approx(np.nanmax(ratio))


def test_what_is_there_is_refused_or_replaced(tmp_path):
    scenario = parse_scenario(PLAIN)
    forge_campaign(scenario, tmp_path, name="x")
    before = _contents(tmp_path)
    with pytest.raises(RecordError, match="is there already"):
        forge_campaign(scenario, tmp_path, name="x", seed=2)
    assert _contents(tmp_path) == before
    forge_campaign(scenario, tmp_path, name="x", seed=2, existing="replace")
    assert _contents(tmp_path).keys() == before.keys()
    assert _contents(tmp_path)["x.dat"] != before["x.dat"]


def test_a_truth_alone_is_not_written(tmp_path):
    (tmp_path / "x.dat").write_bytes(b"mine")
    with pytest.raises(RecordError, match="is there already"):
        forge_campaign(parse_scenario(PLAIN), tmp_path, name="x")
    assert _contents(tmp_path) == {"x.dat": b"mine"}


@pytest.mark.parametrize("workers", [1, 2])
def test_an_impossible_draw_names_the_record_and_the_key(tmp_path, workers):
    text = changed("fraction = 0.5", "fraction = { choice = [0.5, 0.5, 0.5, 1.5] }")
    with pytest.raises(ForgeError) as caught:
        forge_campaign(parse_scenario(text), tmp_path, count=40, workers=workers)
    assert caught.value.where == "events[0].fraction"
    assert "in record " in str(caught.value)


def test_wrong_counts_and_folders(tmp_path):
    scenario = parse_scenario(PLAIN)
    for wrong in ({"count": 0}, {"workers": 0}):
        with pytest.raises(ValueError, match="at least 1"):
            forge_campaign(scenario, tmp_path, **wrong)
    (tmp_path / "file").write_bytes(b"")
    with pytest.raises(ForgeError, match="cannot be made"):
        forge_campaign(scenario, tmp_path / "file" / "folder")
