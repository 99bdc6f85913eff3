"""The command ``describe``."""

from __future__ import annotations

import json
import math
import re
import zipfile

import numpy as np
import pytest

from analyzer.cli import description as description_module
from analyzer.cli.description import description
from analyzer.records import Record, read
from tests.cli.files import HOSTILE, write_record

_CURRENTS = re.compile(r"-?\d+\.\d+ k?A")


def test_it_shows_what_is_in_the_record(run, trip):
    shown = run("describe", trip)
    assert (shown.code, shown.err) == (0, "")
    for text in (
        "Riverbend", "Feeder 4", "COMTRADE 1999, ascii", "2024-05-01T12:00:00.000000", "40.00 ms after",
        "50 Hz nominal", "1000 Hz", "101 over 100.0 ms", "3 analog, 2 digital", "prim. 600/5",
        "1 at 40.00 ms, 0 at 60.00 ms", "Digital channels that change, 1 of 2", "No problems found",
    ):  # fmt: skip
        assert text in shown.out
    # 2000 counts of 0.5 A
    assert "1.000 kA" in shown.out
    assert not shown.too_wide


def test_the_document_has_the_same_and_is_json(run, trip):
    done = run("describe", trip, "--json", "-")
    record = json.loads(done.out)["record"]
    assert done.err == ""
    assert record["trigger_s"] == pytest.approx(0.04, abs=1e-9)
    assert record["rates"] == [{"rate_hz": 1000.0, "start_s": 0.0, "first_sample": 0, "n_samples": 101}]
    first = record["analog"][0]
    assert (first["id"], first["phase"], first["circuit"], first["unit"]) == ("IA", "A", "Line", "A")
    assert (first["rated_primary"], first["rated_secondary"], first["side"]) == (600.0, 5.0, "primary")
    assert (first["minimum"], first["maximum"], first["missing"]) == (-1000.0, 1000.0, 0)
    moving = record["digital"][0]
    assert (moving["initial_state"], moving["n_changes"]) == (0, 2)
    assert [change["state"] for change in moving["changes"]] == [1, 0]
    assert [change["time_s"] for change in moving["changes"]] == pytest.approx([0.04, 0.06])
    assert record["digital"][1]["n_changes"] == 0


def test_reading_in_stretches_changes_nothing(trip, monkeypatch):
    whole = description(read(trip))
    for values in (1, 5 * 7, 5 * 40):  # samples a stretch: 1, 7, 40, the last one where a channel changes
        monkeypatch.setattr(description_module, "_BLOCK_VALUES", values)
        assert description(read(trip)) == whole


def test_missing_and_unbounded_values_are_no_numbers_in_the_document():
    gone = np.full(8, np.nan)
    record = Record.from_arrays(
        {
            "a": ([1.0, np.nan, 3.0, 2.0] * 2, "kA"),
            "b": (gone, "V"),
            "c": ([np.inf] * 8, "V"),
            "d": (gone, "?"),
        },
        sample_rate_hz=1000.0,
    )
    a, b, c, d = description(record)["record"]["analog"]
    assert (a["minimum"], a["maximum"], a["missing"]) == (1000.0, 3000.0, 2)
    assert (b["minimum"], b["missing"]) == (None, 8)
    assert (c["minimum"], c["missing"]) == (None, 0)
    assert (d["minimum"], d["si_unit"]) == (None, None)


def test_a_chattering_channel_does_not_make_the_document_grow():
    states = np.arange(5000) % 2
    record = Record.from_arrays(
        {"a": (np.zeros(5000), "A")}, sample_rate_hz=1000.0, digital={"chatter": states}
    )
    chatter = description(record)["record"]["digital"][0]
    assert chatter["n_changes"] == 4999
    assert len(chatter["changes"]) == description_module.MOST_CHANGES
    assert chatter["changes"][-1]["time_s"] == pytest.approx(1.0)


def test_many_rates_are_summed_up(run, tmp_path):
    cfg = write_record(tmp_path)
    text = cfg.read_bytes().decode("utf-8")
    rates = "\r\n".join(f"{1000 + k},{2 * (k + 1)}" for k in range(50)) + "\r\n2000,101"
    cfg.write_text(text.replace("\r\n1\r\n1000,101", f"\r\n51\r\n{rates}"), encoding="utf-8", newline="")
    shown = run("describe", cfg)
    assert shown.code == 0
    assert "and 47 more stretches, 1004 Hz to 2000 Hz" in shown.out


def test_names_from_the_file_cannot_act_on_the_terminal(run, tmp_path):
    names = (HOSTILE, "[bold]x[/bold]", "中文名称" * 30, "名", "[/]")
    shown = run("describe", write_record(tmp_path, names=names, station=HOSTILE))
    assert shown.code == 0
    assert not {c for c in shown.out if not c.isprintable() and c != "\n"}
    assert "[red]A[/red]" in shown.out
    assert "[bold]x[/bold]" in shown.out
    assert "[/]" in shown.out
    assert not shown.too_wide
    assert len(_CURRENTS.findall(shown.out)) == 2 * len(names)  # no number is cut off by a long name


def test_every_width_from_a_phone_to_a_wall_keeps_the_numbers(run, tmp_path, monkeypatch):
    cfg = write_record(tmp_path, names=("A" * 60, "B" * 60, "C" * 60))
    for columns in (60, 80, 132, 400):
        monkeypatch.setenv("COLUMNS", str(columns))
        shown = run("describe", cfg).out
        assert len(_CURRENTS.findall(shown)) == 6


def test_folders_and_archives_are_gone_through(run, tmp_path):
    folder = tmp_path / "may"
    folder.mkdir()
    one, other = write_record(folder, "one"), write_record(folder, "other")
    (folder / "notes.txt").write_text("met the crew at noon\n", encoding="utf-8")
    archive = tmp_path / "may.zip"
    with zipfile.ZipFile(archive, "w") as packed:
        for cfg in (one, other):
            for path in (cfg, cfg.with_suffix(".dat")):
                packed.write(path, path.name)
    for place in (folder, archive):
        documents = json.loads(run("describe", place, "--json", "-").out)
        assert [document["record"]["n_samples"] for document in documents] == [101, 101]
    stem = run("describe", folder / "one", "--json", "-")
    assert json.loads(stem.out)["record"]["station"] == "Riverbend"


def test_an_unreadable_record_does_not_keep_the_others_back(run, tmp_path, trip):
    (tmp_path / "broken.cfg").write_bytes(bytes(range(256)) * 20)
    done = run("describe", tmp_path / "broken.cfg", trip, "--json", "-")
    assert done.code == 3
    failed, good = json.loads(done.out)
    assert failed["error"]["code"]
    assert failed["error"]["message"]
    assert good["record"]["n_samples"] == 101
    assert len(done.err.splitlines()) == 1


def test_problems_are_shown_with_their_severity(run, tmp_path):
    cfg = write_record(tmp_path)
    text = cfg.read_text(encoding="utf-8").replace("1,IA,A,Line,A,", "1,IA,A,Line,furlong,")
    cfg.write_text(text, encoding="utf-8", newline="")
    shown = run("describe", cfg)
    assert shown.code == 0
    assert "warning" in shown.out
    assert "furlong" in shown.out
    record = json.loads(run("describe", cfg, "--json", "-").out)["record"]
    assert record["problems"][0]["code"] == "unknown-unit"
    assert record["analog"][0]["maximum"] is None
    stated = json.loads(run("describe", cfg, "--unit", "IA=kA", "--json", "-").out)["record"]
    assert stated["analog"][0]["maximum"] == pytest.approx(1e6)
    assert math.isfinite(stated["analog"][1]["maximum"])
