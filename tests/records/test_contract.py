"""What every reader owes, whatever the format."""

from __future__ import annotations

import dataclasses
import importlib.util
import pickle
import zipfile
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal

from analyzer.records import Record, RecordError, find_records, read
from analyzer.records.comtrade import write_comtrade

N = 3000
RATE_HZ = 4000.0


def original() -> Record:
    """Three cycles of currents and voltage with missing samples, a channel of unknown unit, two digitals."""
    t = np.arange(N) / RATE_HZ
    rng = np.random.default_rng(11)
    current = 1200 * np.sin(2 * np.pi * 50 * t) + rng.normal(0, 3, N)
    current[[0, 700, 701, N - 1]] = np.nan
    return Record.from_arrays(
        {
            "IA": (current, "A"),
            "VA": (63.5 * np.cos(2 * np.pi * 50 * t), "kV"),
            "X": (np.linspace(0, 5, N), "Q7"),
        },
        digital={"TRIP": (np.arange(N) > 900).astype(int), "START": (np.arange(N) % 997 == 3).astype(int)},
        sample_rate_hz=RATE_HZ,
        nominal_frequency_hz=50.0,
    )


def comtrade_file(revision: int, encoding: str, suffix: str = ".cfg") -> Callable[[Path], Path]:
    def make(folder: Path) -> Path:
        path = folder / f"rec{suffix}"
        write_comtrade(original(), path, revision=revision, encoding=encoding)  # type: ignore[arg-type]
        return path

    return make


def zipped(folder: Path) -> Path:
    write_comtrade(original(), folder / "rec.cfg", revision=1999, encoding="binary")
    path = folder / "records.zip"
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as file:
        for name in ("rec.cfg", "rec.dat"):
            file.write(folder / name, f"station 1/{name}")
    return path


def delimited(folder: Path) -> Path:
    from analyzer.records.delimited import write_delimited

    return write_delimited(original(), folder / "rec.csv")


FORMATS: dict[str, Callable[[Path], Path]] = {
    "ascii 1991": comtrade_file(1991, "ascii"),
    "binary 1991": comtrade_file(1991, "binary"),
    "ascii 1999": comtrade_file(1999, "ascii"),
    "binary 1999": comtrade_file(1999, "binary"),
    "ascii 2013": comtrade_file(2013, "ascii"),
    "binary32 2013": comtrade_file(2013, "binary32"),
    "float32 2013": comtrade_file(2013, "float32"),
    "combined ascii": comtrade_file(2013, "ascii", ".cff"),
    "combined binary": comtrade_file(2013, "binary", ".cff"),
    "zip": zipped,
}
if importlib.util.find_spec("analyzer.records.delimited") is not None:
    FORMATS["delimited"] = delimited


@pytest.fixture(params=FORMATS)
def path(request: pytest.FixtureRequest, tmp_path: Path) -> Path:
    return FORMATS[request.param](tmp_path)


@pytest.fixture
def record(path: Path) -> Record:
    return read(path)


USABLE = ["IA", "VA"]


def test_the_record_is_the_one_that_was_written(record: Record) -> None:
    source = original()
    assert [c.id for c in record.analog] == ["IA", "VA", "X"]
    for key in USABLE:
        expected = source.signal(key)
        peak = np.nanmax(np.abs(expected))
        assert_allclose(record.signal(key), expected, rtol=0, atol=1.6 * peak / 32_767)
    assert_array_equal(np.isnan(record.signal("IA")), np.isnan(source.signal("IA")))
    assert_allclose(record.times(), source.times(), rtol=0, atol=1e-9)


def test_units_are_known_or_refused(record: Record) -> None:
    assert [c.si_unit for c in record.analog] == ["A", "V", ""]
    for keys in (["X"], None, ["IA", "X"]):
        with pytest.raises(RecordError) as caught:
            record.signals(keys)
        assert caught.value.code == "unknown-unit"
    assert record.as_written(["X"]).shape == (1, N)


@pytest.mark.parametrize("limits", [(0.0, 0.0), (0.1, 0.2), (0.17475, 0.17525), (0.7, 9.0), (-1.0, 0.01)])
def test_part_equals_the_part_of_the_whole(record: Record, limits: tuple[float, float]) -> None:
    times = record.times()
    inside = (times >= limits[0] - 1e-9) & (times <= limits[1] + 1e-9)
    part = record.between(*limits)
    assert part.n_samples == inside.sum() > 0
    assert_array_equal(part.times(), times[inside])
    assert_array_equal(part.signals(USABLE), record.signals(USABLE)[:, inside])
    assert_array_equal(part.stored(), record.stored()[:, inside])
    for digital in record.digital:
        assert_array_equal(part.states(digital.id), record.states(digital.id)[inside])
    again = part.between(*limits)
    assert_array_equal(again.times(), part.times())
    assert_array_equal(part.between(-1.0, 99.0).times(), part.times())  # never wider than it was


@pytest.mark.parametrize("limits", [(5.0, 9.0), (-9.0, -1.0), (0.2, 0.1), (np.nan, np.nan)])
def test_part_without_samples(record: Record, limits: tuple[float, float]) -> None:
    part = record.between(*limits)
    assert part.n_samples == 0
    assert part.signals(USABLE).shape == (2, 0)
    assert part.times().shape == (0,)
    assert part.duration_s == 0.0
    assert part.segments == ()
    assert part.to_frame().shape[0] == 0
    for digital in part.digital:
        edges = part.edges(digital.id)
        assert (edges.times_s.size, edges.initial) == (0, None)


def test_unbounded_part_is_the_whole(record: Record) -> None:
    assert record.between(-np.inf, np.inf).n_samples == N


def test_selection_equals_the_selection_of_the_whole(record: Record) -> None:
    whole = record.signals(USABLE)
    selected = record.select(["VA", "IA"])
    assert [c.id for c in selected.analog] == ["VA", "IA"]
    assert_array_equal(selected.signals(), whole[::-1])
    assert_array_equal(selected.between(0.1, 0.2).signal("IA"), record.between(0.1, 0.2).signal("IA"))
    assert_array_equal(record.signals(["IA", "IA"]), whole[[0, 0]])
    assert record.signals([]).shape == (0, N)
    with pytest.raises(RecordError) as caught:
        selected.signal("X")
    assert caught.value.code == "no-such-channel"


def test_values_are_read_only(record: Record) -> None:
    arrays = {
        "signal": record.signal("IA"),
        "signals": record.signals(USABLE),
        "as_written": record.as_written(),
        "stored": record.stored(),
        "times": record.times(),
        "channel_times": record.channel_times("IA"),
        **{f"states {d.id}": record.states(d.id) for d in record.digital},
    }
    for name, array in arrays.items():
        assert not array.flags.writeable, name
    with pytest.raises(dataclasses.FrozenInstanceError):
        record.station = "other"  # type: ignore[misc]
    with pytest.raises(dataclasses.FrozenInstanceError):
        record.analog[0].unit = "V"  # type: ignore[misc]


def test_reading_twice_gives_the_same(record: Record, path: Path) -> None:
    assert_array_equal(record.signals(USABLE), record.signals(USABLE))
    again = read(path)
    assert_array_equal(again.stored(), record.stored())
    assert again.problems == record.problems
    assert again.origin.sha256() == record.origin.sha256()
    assert len(record.origin.sha256() or "") == 64


def test_times_rise_and_segments_cover_them(record: Record) -> None:
    times = record.times()
    assert times[0] == 0.0
    assert np.all(np.diff(times) > 0)
    assert record.duration_s == times[-1]
    edges = [0]
    for segment in record.segments:
        assert segment.first == edges[-1]
        assert segment.start_s == times[segment.first]
        edges.append(segment.stop)
    assert edges[-1] == record.n_samples
    assert record.sample_rates_hz == (pytest.approx(RATE_HZ),)


def test_survey_finds_the_same_again_and_changes_no_value(record: Record) -> None:
    once = record.survey()
    twice = once.survey()
    assert twice.problems == once.problems
    assert set(record.problems) <= set(once.problems)
    assert_array_equal(twice.stored(), record.stored())
    found = {p.code: p for p in once.problems}
    assert "4 of 3000" in found["missing-samples"].message
    assert found["missing-samples"].where == "channel IA"
    assert found["unknown-unit"].where == "channel X"
    assert all(p.message.isprintable() and p.where.isprintable() for p in once.problems)


def test_survey_of_a_part_counts_the_part(record: Record) -> None:
    found = {p.code: p.message for p in record.between(0.17, 0.18).survey().problems}
    assert "2 of 41" in found["missing-samples"]


def test_frame_holds_all_channels(record: Record) -> None:
    frame = record.to_frame()
    assert list(frame.columns[:3]) == ["IA", "VA", "X"]
    assert frame.attrs["units"] == {"IA": "A", "VA": "V", "X": "as written: Q7"}
    assert_array_equal(frame["IA"].to_numpy(), record.signal("IA"))
    assert_array_equal(frame.index.to_numpy(), record.times())


def test_digital_edges_rebuild_the_states(record: Record) -> None:
    for digital in record.digital:
        states, edges = record.states(digital.id), record.edges(digital.id)
        at = np.searchsorted(record.times(), edges.times_s)
        rebuilt = np.full(N, edges.initial)
        for k, state in zip(at, edges.states, strict=True):
            rebuilt[k:] = state
        assert_array_equal(rebuilt, states)


def test_no_such_channel_names_those_there_are(record: Record) -> None:
    for ask in (record.signal, record.channel, record.channel_times, record.states, record.edges):
        with pytest.raises(RecordError) as caught:
            ask("no such")
        assert caught.value.code == "no-such-channel"
    with pytest.raises(RecordError) as caught:
        record.signal("no such")
    assert "IA, VA, X" in caught.value.hint
    again = pickle.loads(pickle.dumps(caught.value))
    assert isinstance(again, RecordError)
    assert (str(again), again.code, again.field) == (str(caught.value), caught.value.code, caught.value.field)


def test_found_once_and_shown_by_its_place(path: Path) -> None:
    found = list(find_records(path))
    assert len(found) == 1
    assert found[0].shown.startswith(str(path))
    assert read(found[0].shown).n_samples == N  # what is shown can be opened
