"""Scenarios: what is accepted, what they become, and one clear error with key and line for what is wrong."""

from __future__ import annotations

import copy
import json
import math
import pickle
import tomllib
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic import ValidationError

from analyzer.forge import ForgeError, Scenario, forge_record, parse_scenario, read_scenario
from analyzer.forge.build import build_network, impedance
from analyzer.forge.example import EXAMPLE
from analyzer.forge.scenario import Ohms
from analyzer.forge.scenario_file import ScenarioFile, steps_of
from analyzer.toml_file import line_of
from tests.forge.scenarios import PLAIN, changed, with_event


def _refusal(text: str, tmp_path) -> ForgeError:
    """The error of reading the text or of forging it, whichever comes."""
    path = tmp_path / "wrong.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(ForgeError) as caught:  # noqa: PT012  # either step may refuse it
        file = read_scenario(path)
        with file.naming():
            forge_record(file.scenario)
    return caught.value


_FAULT = "fraction = 0.5"
_TIME = "angle_deg = 30\nnot_before_s = 0.06"
_LOOSE_END = "[instruments]"
WRONG = {
    "beyond the line": (changed(_FAULT, "fraction = 1.5"), "events[0].fraction", 16),
    "missing": (changed(_FAULT, ""), "events[0].fraction", 13),
    "misspelt": (changed(_FAULT, "fracton = 0.5"), "events[0].fracton", 16),
    "text for a number": (changed(_FAULT, 'fraction = "half"'), "events[0].fraction", 16),
    "truth for a number": (changed(_FAULT, "fraction = true"), "events[0].fraction", 16),
    "no number": (changed(_FAULT, "fraction = nan"), "events[0].fraction", 16),
    "no distribution": (changed(_FAULT, "fraction = { about = 1 }"), "events[0].fraction", 16),
    "two distributions": (
        changed(_FAULT, "fraction = { uniform = [0, 1], choice = [1] }"),
        "events[0].fraction",
        16,
    ),
    "ends out of order": (changed(_FAULT, "fraction = { uniform = [1, 0] }"), "events[0].fraction", 16),
    "log of nothing": (changed(_FAULT, "fraction = { log_uniform = [0, 1] }"), "events[0].fraction", 16),
    "negative spread": (changed(_FAULT, "fraction = { normal = [1, -1] }"), "events[0].fraction", 16),
    "no choice": (changed(_FAULT, "fraction = { choice = [] }"), "events[0].fraction.choice", 16),
    "no fault type": (changed('"AG"', '"AD"'), "events[0].type", 15),
    "no choice of types": (changed('"AG"', '{ choice = ["AG", "AD"] }'), "events[0].type.choice[1]", 15),
    "no event": (changed('"fault"', '"party"'), "events[0].do", 14),
    "no time": (changed(_TIME, ""), "events[0]", 13),
    "two times": (changed(_TIME, f"time_s = 0.1\n{_TIME}"), "events[0]", 13),
    "angle without time": (changed(_TIME, "angle_deg = 30"), "events[0]", 13),
    "after the end": (changed(_TIME, "time_s = 9"), "events[0].time_s", 17),
    "before the start": (changed(_TIME, "time_s = -1"), "events[0].time_s", 17),
    "after nothing": (changed(_TIME, "after_s = 0.1"), "events[0].after_s", 17),
    "angle after the end": (changed("0.06", "0.6"), "events[0].not_before_s", 18),
    "zero source": (changed("r_ohm = 0.3, x_ohm = 4.0", "r_ohm = 0, x_ohm = 0"), "network.source.z1", 10),
    "zero line": (changed("r_ohm = 0.5, x_ohm = 3.0", "r_ohm = 0, x_ohm = 0"), "network.line.z1", 11),
    "half an impedance": (changed("r_ohm = 0.3, x_ohm = 4.0", "r_ohm = 0.3"), "network.source.z1", 10),
    "zero ratio": (
        changed("r_ohm = 0.3, x_ohm = 4.0", "x_ohm = 4, x_over_r = 0"),
        "network.source.z1.x_over_r",
        10,
    ),
    "no source": (changed("source =", "remote ="), "network.source", 8),
    "odd frequency": (
        changed("frequency_hz = 50", "frequency_hz = 50\nactual_frequency_hz = 5"),
        "network.actual_frequency_hz",
        10,
    ),
    "no rate": (changed("samples_per_cycle = 32", ""), "record", 3),
    "negative rate": (
        changed("samples_per_cycle = 32", "samples_per_cycle = -1"),
        "record.samples_per_cycle",
        5,
    ),
    "too many samples": (changed("_cycle = 32", "_cycle = 1e9"), "record.duration_s", 6),
    "no samples": (changed("duration_s = 0.2", "duration_s = 1e-9"), "record.duration_s", 6),
    "path as name": (changed('station = "Invented"', 'name = "../up"'), "record.name", 4),
    "secondary without ratio": (changed('station = "Invented"', 'side = "secondary"'), "record", 3),
    "later encoding": (changed('station = "Invented"', 'encoding = "float32"'), "record", 3),
    "unknown section": (changed(_LOOSE_END, "[tools]\n[instruments]"), "tools", 20),
    "bits": (changed("bits = 16", "bits = 99"), "instruments.converter.bits", 22),
    "negative noise": (
        changed("current_rms_a = 0.5", "current_rms_a = -1"),
        "instruments.noise.current_rms_a",
        21,
    ),
    "ct without ratio": (
        changed(_LOOSE_END, "[instruments]\nct = { winding_ohm = 1, burden_ohm = 1, time_constant_s = 1 }"),
        "record.current_ratio",
        3,
    ),
    "no class": (
        changed(_LOOSE_END, '[instruments]\nct_class = { name = "9Q" }'),
        "instruments.ct_class.name",
        21,
    ),
    "no channel": (changed(_LOOSE_END, "[instruments]\nskew_s = { ix = 1 }"), "instruments.skew_s.ix", 21),
    "cycle filter": (
        changed(
            _LOOSE_END, '[instruments]\nrelay_filter = { kind = "full-cycle-cosine" }',
            text=changed("samples_per_cycle = 32", "samples_per_cycle = 33"),
        ),
        "instruments.relay_filter",
        21,
    ),
    "no breaker": (
        with_event('do = "open"\nafter_s = 0.02\nbreaker = "adjacent"'),
        "events[1].breaker",
        23,
    ),
    "no element": (with_event('do = "connect"\nafter_s = 0.02\nelement = "tea"'), "events[1].element", 23),
    "second fault": (
        with_event('do = "fault"\nafter_s = 0.02\ntype = "BG"\nfraction = 0.5'),
        "events[1].do",
        21,
    ),
    "change of nothing": (
        changed('do = "fault"', 'do = "change"', text=changed(f"{_FAULT}\n{_TIME}", "time_s = 0.06")),
        "events[0].do",
        14,
    ),
    "no ground": (
        with_event('do = "change"\nafter_s = 0.02\ntype = "BC"\nground_resistance_ohm = 1'),
        "events[1].ground_resistance_ohm",
        24,
    ),
    "back in time": (with_event('do = "open"\ntime_s = 0.01'), "events[1].time_s", 22),
}  # fmt: skip


@pytest.mark.parametrize("what", WRONG)
def test_a_wrong_scenario_is_one_error_with_key_and_line(what, tmp_path):
    text, key, line = WRONG[what]
    error = _refusal(text, tmp_path)
    assert error.where == f"{tmp_path / 'wrong.toml'}, line {line}: {key}"
    assert error.message
    assert "\n" not in str(error)


def test_broken_files_are_one_error(tmp_path):
    error = _refusal(changed("[record]", "[record"), tmp_path)
    assert error.code == "bad-toml"
    assert "line 3" in str(error)
    path = tmp_path / "no.toml"
    with pytest.raises(ForgeError, match="cannot be read"):
        read_scenario(path)
    path.write_bytes(b"title = '\xff'")
    with pytest.raises(ForgeError, match="UTF-8"):
        read_scenario(path)
    path.write_bytes(b"#" * (1 << 20) + b"##")
    with pytest.raises(ForgeError, match="larger than 1 MiB"):
        read_scenario(path)


def test_lines_of_keys():
    text = "a = 1\n[b]\nc.d = 2\n[[e]]\nf = { g = 3 }\n[[e]]\nf = 4\n[e.h]\ni = 5\n"
    for key, line in {
        "a": 1, "b": 2, "b.c": 2, "b.c.d": 3, "e[0].f": 5, "e[0].f.g": 5, "e[1].f": 7, "e[1]": 6, "z": None,
    }.items():  # fmt: skip
        assert line_of(text, steps_of(key)) == line, key


def test_the_example_is_a_scenario_and_shows_every_section():
    scenario = parse_scenario(EXAMPLE)
    assert isinstance(scenario, Scenario)
    for section in (scenario, scenario.record, scenario.network):
        for name in type(section).model_fields:
            optional = {"ct_errors", "vt_errors", "sample_rate_hz", "combined", "name", "trigger_s"}
            assert name in section.model_fields_set | optional, name
    shown = scenario.instruments.model_fields_set
    assert set(type(scenario.instruments).model_fields) - shown == {"ct_errors", "vt_errors"}
    forged = forge_record(scenario)
    assert forged.record.n_samples == scenario.n_samples


def test_the_schema_is_documented():
    schema = Scenario.model_json_schema()
    assert json.loads(json.dumps(schema)) == schema
    assert "[ohm]" in json.dumps(schema["$defs"]["Ohms"])
    undocumented = [
        f"{name}.{key}"
        for name, part in schema["$defs"].items()
        if not name.startswith(("Uniform", "LogUniform", "Normal", "Choice", "WordChoice"))
        for key, field in part.get("properties", {}).items()
        # A section within a section has its text in its own definition.
        if key != "do" and "description" not in field and "$ref" not in json.dumps(field)
    ]
    assert undocumented == []


@pytest.mark.parametrize(
    "given",
    [
        {"r_ohm": 1.1, "x_ohm": 6.0},
        {"x_ohm": 6.0, "x_over_r": 6.0 / 1.1},
        {"r_ohm": 1.1, "x_over_r": 6.0 / 1.1},
        {"magnitude_ohm": 6.1, "x_over_r": 6.0 / 1.1},
        {"magnitude_ohm": 6.1, "angle_deg": float(np.degrees(np.arctan2(6.0, 1.1)))},
    ],
)
def test_an_impedance_is_the_same_by_any_two_parts(given):
    assert impedance(Ohms(**given), "z") == pytest.approx(1.1 + 6.0j, rel=1e-12)


def test_the_network_is_the_one_described():
    network = build_network(parse_scenario(PLAIN).network)
    assert network.source is not None
    assert (network.source.z1_ohm, network.source.z0_ohm) == (0.3 + 4.0j, 0.5 + 6.0j)
    assert (network.line.z1_ohm, network.line.z0_ohm) == (0.5 + 3.0j, 1.2 + 9.0j)
    assert network.remote is None


def test_a_plain_scenario_is_reproducible_and_noise_follows_the_seed():
    scenario = parse_scenario(PLAIN)
    first, again, other = (forge_record(scenario, seed=seed).record.stored() for seed in (None, 1, 2))
    assert np.array_equal(first, again)
    assert not np.array_equal(first, other)


def test_the_point_on_wave_counts_with_what_was_switched_before():
    """A load that is connected first turns the bus voltage; the angle asked for is that after it."""
    text = changed(
        "[[events]]",
        '[[network.loads]]\nz = { r_ohm = 20, x_ohm = 15 }\n\n[[events]]\ndo = "connect"\nelement = "load"\n'
        "time_s = 0.02\n\n[[events]]",
    )
    truth = forge_record(parse_scenario(text)).truth
    assert [event.kind for event in truth.events] == ["switching", "fault"]
    # The connection's own offset has died down to exp(-0.04/0.001) by then; what is left is rounding.
    assert truth.events[1].inception.voltage_angle_deg == pytest.approx(30.0, abs=1e-6)
    assert 0.06 <= truth.events[1].inception.time_s < 0.08


def test_scenarios_and_their_errors_cross_processes():
    scenario = parse_scenario(EXAMPLE)
    assert pickle.loads(pickle.dumps(scenario)) == scenario
    file = ScenarioFile(path=Path("x.toml"), text=PLAIN, scenario=scenario)
    with pytest.raises(ForgeError) as caught, file.naming():
        raise ForgeError("bad-value", "is odd", where="events[0].fraction")
    assert str(pickle.loads(pickle.dumps(caught.value))) == "x.toml, line 16: events[0].fraction: is odd"


def _leaves(tree, path=()):
    items = tree.items() if isinstance(tree, dict) else enumerate(tree) if isinstance(tree, list) else ()
    for key, item in items:
        yield from _leaves(item, (*path, key))
    if not isinstance(tree, dict | list):
        yield path


_TREE = tomllib.loads(EXAMPLE)
_TREE["events"] = _TREE["events"][:3]
del _TREE["events"][0]["arc"]  # it is integrated step by step, which takes a second
_ODD = [0, -1, 1e-300, 1e300, 1e12, -1e9, 1e-15, 0.5, 3, 90, "x", True, [], {}, None, math.inf, math.nan]


@settings(deadline=None, derandomize=True, max_examples=150)
@given(path=st.sampled_from(list(_leaves(_TREE))), value=st.sampled_from(_ODD))
def test_whatever_stands_at_a_key_is_forged_or_refused(path, value):
    tree = copy.deepcopy(_TREE)
    part = tree
    for key in path[:-1]:
        part = part[key]
    part[path[-1]] = value
    try:
        forged = forge_record(Scenario.model_validate(tree))
    except (ForgeError, ValidationError):
        return
    assert np.isfinite(forged.record.stored()).all()
    forged.truth.to_json()
