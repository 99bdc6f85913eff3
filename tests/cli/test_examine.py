"""The command ``examine``, over findings that the tests decide."""

from __future__ import annotations

import json

import jsonschema
import pytest

from analyzer.errors import FaultassayError
from analyzer.findings import Findings
from tests.cli.files import HOSTILE, write_record


def test_it_shows_summary_quantities_and_caution(run, trip, found):
    found(summary="AG fault, forward, 8.64 kA symmetrical.")
    shown = run("examine", trip)
    assert (shown.code, shown.err) == (0, "")
    for text in (
        "AG fault, forward, 8.64 kA symmetrical.", "Event 1: AG fault, forward, terminal Feeder 4",
        "follows theory", "12.40°", "12.00 to 12.80°", "81.90 ms", "45.2 ms", "43.9 to 46.8 ms", "8.640 kA",
        "8.625 to 8.655 kA", "22.01 kA", "X/R from the decay", "14.20", "X/R from the waveform",
        "not determined", "Source Z1: magnitude", "6.82 Ω", "85.80°", "offset at inception, phase A",
        "agrees", "short-window", "four cycles of fault current", "3 missing", "local codes and licensed",
    ):  # fmt: skip
        assert text in shown.out
    assert "read as cp1252" not in shown.out  # a note; `describe` shows it
    assert not shown.too_wide


@pytest.mark.parametrize(
    ("verdict", "strict", "code"),
    [
        ("departs", False, 0),
        ("departs", True, 1),
        ("follows-theory", True, 0),
        ("undetermined", True, 0),
        ("no-fault", True, 0),
    ],
)
def test_only_strict_makes_a_departure_count(run, trip, found, verdict, strict, code):
    found(verdict)
    assert run("examine", trip, *(["--strict"] if strict else [])).code == code


def test_quiet_shows_nothing_and_still_tells(run, trip, found, tmp_path):
    found("departs")
    target = tmp_path / "findings.json"
    done = run("examine", trip, "--quiet", "--strict", "--json", target)
    assert (done.code, done.out, done.err) == (1, "", "")
    assert json.loads(target.read_text(encoding="utf-8"))["verdict"] == "departs"


def test_json_on_standard_output_is_the_document_and_nothing_else(run, trip, found):
    found(summary="Überstrom, größer")
    done = run("examine", trip, "--json", "-")
    document = json.loads(done.out)
    jsonschema.validate(document, Findings.json_schema())
    assert document["summary"] == "Überstrom, größer"
    assert done.out.isascii()


def test_several_records_are_an_array_and_a_tally(run, trip, found, tmp_path):
    found("undetermined")
    other = write_record(tmp_path, "other")
    target = tmp_path / "findings.json"
    done = run("examine", trip, other, tmp_path / "gone.cfg", "--strict", "--json", target)
    assert done.code == 3
    assert "3 records: 2 undetermined, 1 could not be examined" in done.out
    assert done.err.splitlines() == [
        f"{tmp_path / 'gone.cfg'}: there is no such file (check the spelling and the folder)"
    ]
    documents = json.loads(target.read_text(encoding="utf-8"))
    assert [document.get("verdict") for document in documents] == ["undetermined", "undetermined", None]
    assert documents[2]["error"]["code"] == "no-such-file"


def test_a_record_that_cannot_be_examined_is_one_line(run, trip, stand_in):
    def refuse(record):
        raise FaultassayError("no-currents", "holds no currents", where=record.origin.path, hint="name them")

    stand_in(refuse)
    done = run("examine", trip)
    assert (done.code, done.out) == (3, "")
    assert done.err.splitlines() == [f"{trip.with_suffix('.dat')}: holds no currents (name them)"]


def test_texts_in_findings_cannot_act_on_the_terminal(run, trip, found):
    found(summary=HOSTILE, terminal=HOSTILE)
    shown = run("examine", trip)
    assert shown.code == 0
    assert "[red]A[/red]" in shown.out
    assert not {c for c in shown.out if not c.isprintable() and c != "\n"}
    assert not shown.too_wide


def test_a_bug_is_one_line_that_asks_to_report_it(run, trip, stand_in, monkeypatch):
    def fail(record):
        raise ZeroDivisionError("at home")

    stand_in(fail)
    done = run("examine", trip)
    assert done.code == 4
    assert len(done.err.splitlines()) == 1
    assert "ZeroDivisionError: at home" in done.err
    assert "report" in done.err
    with pytest.raises(ZeroDivisionError):
        run("--debug", "examine", trip)
    monkeypatch.setenv("FAULTASSAY_DEBUG", "1")
    with pytest.raises(ZeroDivisionError):
        run("examine", trip)


def test_a_stop_from_the_keyboard_is_told_from_a_departure(run, trip, stand_in):
    def interrupt(record):
        raise KeyboardInterrupt

    stand_in(interrupt)
    done = run("examine", trip)
    assert (done.code, done.err) == (130, "stopped\n")
