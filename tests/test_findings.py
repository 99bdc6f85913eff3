"""The contract: what is allowed is accepted and comes out unchanged, what is not is refused."""

from __future__ import annotations

import json
import math
import subprocess
import sys
from copy import deepcopy
from typing import Any

import jsonschema
import pytest
from hypothesis import given, settings
from pydantic import ValidationError

import analyzer
from analyzer.errors import FaultassayError
from analyzer.findings import (
    Event,
    FailedRecord,
    Findings,
    Fit,
    Impedance,
    ImpedanceFindings,
    Peak,
    Quantity,
    XOverR,
    worst_verdict,
)
from tests.findings_documents import documents, full_document, quantity

_EVENT = ("events", 0)
_ONLY_IN_CONTRACT_AS_OPTIONAL = "std_instrument"


@pytest.fixture(scope="module")
def schema() -> jsonschema.Draft202012Validator:
    return jsonschema.Draft202012Validator(Findings.json_schema())


def _at(document: Any, path: tuple[str | int, ...]) -> Any:
    for key in path:
        document = document[key]
    return document


def _with(path: tuple[str | int, ...], value: object) -> dict[str, Any]:
    document = full_document()
    _at(document, path[:-1])[path[-1]] = value
    return document


def _paths(node: Any, path: tuple[str | int, ...] = ()) -> list[tuple[str | int, ...]]:
    """Every key of every object."""
    found = []
    items = node.items() if isinstance(node, dict) else enumerate(node) if isinstance(node, list) else ()
    for key, value in items:
        if isinstance(key, str):
            found.append((*path, key))
        found += _paths(value, (*path, key))
    return found


def test_a_full_document_comes_out_as_it_went_in():
    document = full_document()
    findings = Findings.model_validate(document)
    assert findings.to_dict() == document
    assert json.loads(findings.to_json()) == document
    assert Findings.model_validate_json(findings.to_json(indent=1)) == findings


def test_the_json_schema_is_one_and_accepts_the_full_document(schema):
    jsonschema.Draft202012Validator.check_schema(schema.schema)
    assert schema.schema["$id"] == full_document()["schema"]
    schema.validate(full_document())


# Objects whose keys are the data's, so that a key may be absent or added.
_OPEN = {"channels", "by_phase_s", "voltage_rms_v", "current_rms_a", "phases"}


def test_every_field_is_demanded_by_the_schema(schema):
    for path in _paths(full_document()):
        if path[-2:-1] and path[-2] in _OPEN:
            continue
        document = full_document()
        del _at(document, path[:-1])[path[-1]]
        optional = path[-1] == _ONLY_IN_CONTRACT_AS_OPTIONAL
        assert schema.is_valid(document) is optional, path


def test_no_object_takes_a_field_that_the_contract_does_not_know(schema):
    objects = {path[:-1] for path in _paths(full_document()) if path[-2:-1] and path[-2] not in _OPEN}
    assert len(objects) > 50
    for path in objects:
        document = full_document()
        _at(document, path)["invented"] = 1
        with pytest.raises(ValidationError):
            Findings.model_validate(document)
        assert not schema.is_valid(document), path


@settings(deadline=None, derandomize=True, max_examples=40)
@given(documents())
def test_generated_documents_are_accepted_by_models_and_schema_alike(schema, document):
    findings = Findings.model_validate(deepcopy(document))
    written = findings.to_dict()
    assert written == document
    schema.validate(written)
    json.dumps(written, allow_nan=False)


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
@pytest.mark.parametrize(
    "path",
    [
        ("elapsed_ms",),
        ("record", "duration_s"),
        ("record", "sample_rates_hz", 0),
        (*_EVENT, "window_s", 0),
        (*_EVENT, "inception", "time_s", "value"),
        (*_EVENT, "inception", "time_s", "std"),
        (*_EVENT, "inception", "time_s", "low"),
        (*_EVENT, "inception", "time_s", "high"),
        (*_EVENT, "phases", "A", "peak", "measured_a"),
        (*_EVENT, "phases", "A", "dc_initial_a", "std_instrument"),
        (*_EVENT, "impedance", "total", "correlation_rx"),
        (*_EVENT, "fit", "reduced_chi_square"),
        (*_EVENT, "comparison", 0, "in_sigmas"),
        (*_EVENT, "departures", 0, "statistic"),
    ],
)
def test_nan_and_infinity_are_refused_everywhere(path, value):
    with pytest.raises(ValidationError, match=r"finite|greater|less"):
        Findings.model_validate(_with(path, value))


@pytest.mark.parametrize(
    ("path", "value"),
    [
        (("schema",), "faultassay/findings/2"),
        (("verdict",), "departs"),
        (("verdict",), "no-fault"),
        (("summary",), ""),
        (("elapsed_ms",), -1.0),
        (("record", "revision"), 1997),
        (("record", "encoding"), "text"),
        (("record", "n_samples"), -1),
        (("record", "n_samples"), 3.5),
        (("record", "problems", 0, "severity"), "error"),
        (("terminals", 0, "how"), "guessed"),
        (("terminals", 0, "confidence"), 1.2),
        ((*_EVENT, "kind"), "short circuit"),
        ((*_EVENT, "kind"), "energisation"),  # which has no fault type
        ((*_EVENT, "fault_type"), "GA"),
        ((*_EVENT, "fault_type"), "BC"),  # whose phases are not A
        ((*_EVENT, "direction"), "backward"),
        ((*_EVENT, "window_s"), [0.2, 0.1]),
        ((*_EVENT, "window_s"), [0.1]),
        ((*_EVENT, "inception", "reference"), "ABG"),
        ((*_EVENT, "inception", "reference"), None),  # of an angle that is known
        ((*_EVENT, "inception", "time_s"), None),
        ((*_EVENT, "inception", "time_s", "unit"), "ms"),
        ((*_EVENT, "inception", "time_s", "unit"), "A"),
        ((*_EVENT, "inception", "time_s", "value"), True),
        ((*_EVENT, "inception", "time_s", "value"), "0.1"),
        ((*_EVENT, "inception", "time_s", "std"), -1e-5),
        ((*_EVENT, "inception", "time_s", "low"), 0.2),
        ((*_EVENT, "inception", "time_s", "high"), 0.0),
        ((*_EVENT, "inception", "time_s", "value"), None),  # with a standard uncertainty
        ((*_EVENT, "phases", "A", "angle_deg", "value"), -180.0),
        (
            (*_EVENT, "phases", "A", "angle_deg"),
            quantity(181.0, "deg", 1.0),
        ),
        ((*_EVENT, "phases", "A", "dc_initial_a", "std_instrument"), 1e4),
        ((*_EVENT, "prefault", "voltage_rms_v", "N"), full_document()["events"][0]["inception"]["time_s"]),
        ((*_EVENT, "decay", 0, "loop"), "BC+N"),
        ((*_EVENT, "impedance", "source", "method"), "guess"),
        ((*_EVENT, "impedance", "total"), None),
        ((*_EVENT, "impedance", "total", "correlation_rx"), 1.5),
        ((*_EVENT, "fit", "lag1_autocorrelation"), -1.5),
        ((*_EVENT, "comparison", 0, "verdict"), "follows-theory"),
        ((*_EVENT, "comparison", 0, "theory", "unit"), "V"),
        ((*_EVENT, "departures", 0, "code"), "odd"),
        ((*_EVENT, "departures", 0, "severity"), "error"),
        ((*_EVENT, "verdict"), "no-fault"),
    ],
)
def test_what_the_contract_does_not_allow_is_refused(path, value):
    with pytest.raises(ValidationError):
        Findings.model_validate(_with(path, value))


def test_events_are_in_order_of_time():
    document = full_document()
    later = deepcopy(document["events"][0])
    later["inception"]["time_s"]["value"] += 1e-5
    document["events"] = [document["events"][0], later]
    assert len(Findings.model_validate(document).events) == 2
    document["events"].reverse()
    with pytest.raises(ValidationError, match="order of time"):
        Findings.model_validate(document)


def test_findings_cannot_be_changed():
    findings = Findings.model_validate(full_document())
    with pytest.raises(ValidationError, match="frozen"):
        findings.verdict = "departs"


def test_a_quantity_from_value_and_deviation_has_the_normal_interval():
    made = Quantity.of(10.0, 2.0, "A")
    # 1.959964: 97.5 % point of the standard normal distribution, any statistical table.
    assert made.low == pytest.approx(10.0 - 2 * 1.959964, abs=1e-6)
    assert made.high == pytest.approx(10.0 + 2 * 1.959964, abs=1e-6)
    assert "std_instrument" not in made.model_dump()


def test_a_quantity_keeps_the_interval_it_is_given():
    made = Quantity.of(45.2e-3, 0.7e-3, "s", low=43.9e-3, high=46.8e-3, std_instrument=0.2e-3)
    assert (made.low, made.high) == (43.9e-3, 46.8e-3)
    assert made.model_dump()["std_instrument"] == 0.2e-3
    half_open = Quantity.of(0.2, None, "s", low=0.1)
    assert (half_open.low, half_open.high) == (0.1, None)


def test_an_angle_at_the_edge_has_an_interval_beyond_it():
    assert Quantity.of(180.0, 1.0, "deg").high == pytest.approx(181.96, abs=0.01)
    with pytest.raises(ValidationError, match="-180, 180"):
        Quantity.of(-180.0, 1.0, "deg")


def test_what_is_unknown_has_null_and_nothing_made_up():
    assert Quantity.unknown("Hz").model_dump() == {
        "value": None, "std": None, "low": None, "high": None, "unit": "Hz",
    }  # fmt: skip
    for part in (Impedance.unknown(), XOverR.unknown(), Peak.unknown(), ImpedanceFindings.unknown()):
        numbers = [value for value in _leaves(part.model_dump()) if not isinstance(value, str)]
        assert numbers
        assert set(numbers) == {None}
    assert Fit.none().samples == 0


def _leaves(node: Any) -> list[Any]:
    if isinstance(node, dict):
        return [leaf for value in node.values() for leaf in _leaves(value)]
    return [node]


def _event(kind: str, verdict: str) -> Event:
    made = {**full_document()["events"][0], "kind": kind, "verdict": verdict}
    if kind != "fault":
        made["fault_type"] = None
    return Event.model_validate(made)


@pytest.mark.parametrize(
    ("events", "verdict"),
    [
        ([], "no-fault"),
        ([("energisation", "departs"), ("switching", "undetermined")], "no-fault"),
        ([("fault", "follows-theory")], "follows-theory"),
        ([("fault", "follows-theory"), ("fault", "undetermined")], "undetermined"),
        ([("fault", "undetermined"), ("fault", "departs"), ("fault", "follows-theory")], "departs"),
        ([("fault", "follows-theory"), ("energisation", "departs")], "departs"),
        ([("unclassified", "undetermined")], "undetermined"),
    ],
)
def test_the_record_has_the_worst_verdict_of_its_events(events, verdict):
    assert worst_verdict(_event(*one) for one in events) == verdict


def test_a_failed_record_says_what_is_known_and_why():
    error = FaultassayError("no-such-file", "there is no such file", where="x.cfg", hint="check the name")
    document = FailedRecord.of("x.cfg", error).to_dict()
    assert document["record"] == {"path": "x.cfg"}
    assert document["error"] == {
        "code": "no-such-file",
        "message": "there is no such file",
        "where": "x.cfg",
        "hint": "check the name",
    }
    assert document["schema"] == "faultassay/findings/1"
    assert FailedRecord.model_validate(document).to_dict() == document


def test_a_file_name_that_is_no_text_is_spelled_out():
    document = _with(("record", "path"), "trip_\udcff.cfg")
    assert Findings.model_validate(document).record.path == "trip_\\udcff.cfg"


def test_the_public_names_are_there_and_come_late():
    code = (
        "import sys, analyzer; early = [m for m in ('numpy', 'pydantic', 'scipy') if m in sys.modules];"
        "assert not early, early; from analyzer import Findings, Record, RLFault, read;"
        "print(Findings.__name__, Record.__name__, RLFault.__name__, read.__name__)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.split() == ["Findings", "Record", "RLFault", "read"]
    assert set(analyzer.__all__) <= set(dir(analyzer))
    with pytest.raises(AttributeError, match="no attribute 'nothing'"):
        _ = analyzer.nothing
