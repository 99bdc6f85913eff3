"""The command ``convert``."""

from __future__ import annotations

import numpy as np
import pytest

from analyzer.records import read
from tests.cli.files import write_record


@pytest.mark.parametrize(
    ("name", "options"),
    [
        ("out.cfg", []),
        ("out.cfg", ["--revision", "1991", "--encoding", "ascii"]),
        ("out.cfg", ["--revision", "1999"]),
        ("out.CFG", ["--encoding", "binary32"]),
        ("out.cff", []),
        ("out.csv", []),
        ("out.tsv", []),
    ],
)
def test_what_is_written_reads_back_to_the_same_values(run, trip, tmp_path, name, options):
    target = tmp_path / name
    done = run("convert", trip, target, *options)
    assert (done.code, done.err) == (0, "")
    assert done.out.startswith(f"wrote {target}")
    back = read(target)
    np.testing.assert_allclose(back.signals(["IA", "IB", "IC"]), read(trip).signals(), rtol=1e-6, atol=1e-3)
    np.testing.assert_allclose(back.times(), read(trip).times(), atol=1e-9)


def test_revision_and_encoding_are_those_asked_for(run, trip, tmp_path):
    run("convert", trip, tmp_path / "a.cfg", "--revision", "1999")
    run("convert", trip, tmp_path / "b.cfg")
    assert (read(tmp_path / "a.cfg").origin.revision, read(tmp_path / "a.cfg").origin.encoding) == (
        1999,
        "binary",
    )
    assert (read(tmp_path / "b.cfg").origin.revision, read(tmp_path / "b.cfg").origin.encoding) == (
        2013,
        "float32",
    )


def test_parquet_holds_primary_values(run, trip, tmp_path):
    import pandas as pd

    assert run("convert", trip, tmp_path / "out.parquet").code == 0
    frame = pd.read_parquet(tmp_path / "out.parquet")
    np.testing.assert_array_equal(frame["IA"], read(trip).signal("IA"))


def test_a_part_is_what_was_asked_for(run, tmp_path):
    cfg = write_record(tmp_path, names=("IA", "I,B".replace(",", "."), "IC"))
    done = run(
        "convert", cfg, tmp_path / "part.csv", "--channels", "IC, I.B", "--from", "0.02", "--until", "0.05"
    )
    assert done.code == 0
    part = read(tmp_path / "part.csv")
    assert [channel.id for channel in part.analog] == ["IC", "I.B"]
    assert part.n_samples == 31
    np.testing.assert_array_equal(part.signal("IC"), read(cfg).between(0.02, 0.05).signal("IC"))


def test_the_kind_can_be_said(run, trip, tmp_path):
    assert run("convert", trip, tmp_path / "out.txt").code == 2
    assert run("convert", trip, tmp_path / "out.txt", "--to", "csv").code == 0
    assert (tmp_path / "out.txt").read_text(encoding="utf-8").count("\n") == 102


def test_nothing_is_written_over_unless_asked_and_an_input_never(run, trip, tmp_path):
    target = tmp_path / "out.csv"
    target.write_text("mine", encoding="utf-8")
    done = run("convert", trip, target)
    assert (done.code, len(done.err.splitlines())) == (2, 1)
    assert target.read_text(encoding="utf-8") == "mine"
    assert run("convert", trip, target, "--existing", "replace").code == 0
    assert target.read_text(encoding="utf-8") != "mine"
    before = trip.read_bytes(), trip.with_suffix(".dat").read_bytes()
    for own in (trip, trip.with_suffix(".dat")):
        done = run("convert", trip, own, "--existing", "replace", "--to", "csv")
        assert (done.code, len(done.err.splitlines())) == (2, 1)
    assert (trip.read_bytes(), trip.with_suffix(".dat").read_bytes()) == before


@pytest.mark.parametrize(
    "options",
    [
        ["--channels", "IX"],
        ["--channels", ","],
        ["--from", "0.2", "--until", "0.3"],
        ["--from", "0.05", "--until", "0.02"],
        ["--from", "nan"],
        ["--until", "inf"],
        ["--revision", "1999", "--encoding", "float32"],
        ["--revision", "2001"],
        ["--encoding", "morse"],
        ["--existing", "perhaps"],
    ],
)
def test_wrong_use_writes_nothing(run, trip, tmp_path, options):
    done = run("convert", trip, tmp_path / "out.cfg", *options)
    assert done.code == 2
    assert done.err
    assert done.out == ""
    assert sorted(path.name for path in tmp_path.iterdir()) == ["trip.cfg", "trip.dat"]


def test_comtrade_options_are_for_comtrade(run, trip, tmp_path):
    assert run("convert", trip, tmp_path / "out.csv", "--encoding", "ascii").code == 2
    assert not (tmp_path / "out.csv").exists()


def test_a_source_that_cannot_be_read_is_one_line(run, tmp_path):
    done = run("convert", tmp_path / "gone.cfg", tmp_path / "out.csv")
    assert (done.code, len(done.err.splitlines())) == (3, 1)


def test_a_target_that_cannot_be_written_is_one_line(run, trip, tmp_path):
    done = run("convert", trip, tmp_path / "no" / "such" / "folder.csv")
    assert (done.code, len(done.err.splitlines())) == (2, 1)
