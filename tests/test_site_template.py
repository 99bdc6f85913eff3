"""The template of a site file: it parses, changes nothing as it stands, and says what to write."""

from __future__ import annotations

import re
import tomllib
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from analyzer.examine import examine
from analyzer.records import Record, RecordError, read
from analyzer.site import Site, SiteTerminal, read_site
from analyzer.site_template import site_template
from analyzer.terminals import assign_terminal
from analyzer.terminals.by_site import terminals_of
from tests.simulated import Case, simulate

SAMPLES = sorted(
    path
    for path in (Path(__file__).resolve().parents[1] / "sample_records").iterdir()
    if path.suffix in (".cfg", ".cff", ".csv")
)
HOSTILE = '"]\n[site]\nname = "owned"\x1b[31m\x7f\u202e\\ \U0001f600'


def _results(record: Record, site: Site | None) -> dict[str, object]:
    document = examine(record, site=site).to_dict()
    document.pop("elapsed_ms")
    for terminal in document["terminals"]:
        terminal.pop("how")
        terminal.pop("confidence")
    return document


def _through_a_file(record: Record, folder: Path) -> Site:
    path = folder / "site.toml"
    path.write_text(site_template(record), encoding="utf-8", newline="\n")
    return read_site(path)


@pytest.mark.parametrize("path", SAMPLES, ids=lambda path: path.stem)
def test_as_it_stands_it_changes_nothing_of_a_sample_record(path, tmp_path):
    record = read(path)
    site = _through_a_file(record, tmp_path)
    assert site.terminal[0].currents is not None
    assert _results(record, site) == _results(record, None)


def test_as_it_stands_it_states_the_channels_that_the_names_tell(shared_folder, tmp_path):
    stated = 0
    paths = sorted(p for p in (shared_folder / "records").rglob("*") if p.suffix.lower() in (".cfg", ".cff"))
    for path in paths:
        try:
            record = read(path)
        except RecordError:
            continue
        by_name, reason = assign_terminal(record)
        found = terminals_of(record, _through_a_file(record, tmp_path))
        if by_name is None:
            assert (found.terminals, found.reason) == ((), reason)
            continue
        (terminal,) = found.terminals
        stated += 1
        assert (terminal.name, terminal.channels) == (by_name.name, by_name.channels), path.name
        assert terminal.signals == by_name.signals
    assert stated >= 20


@pytest.mark.parametrize("name", ["wisp/3.cfg", "ctpy/xtz.cfg", "gocom/test1.cfg", "ctpy/ygz.cfg"])
def test_as_it_stands_it_changes_nothing_of_a_real_record(shared_folder, name, tmp_path):
    record = read(shared_folder / "records" / name)
    site = _through_a_file(record, tmp_path)
    assert site.terminal[0].currents is not None
    assert _results(record, site) == _results(record, None)


def test_every_key_can_be_taken_up_as_it_is_suggested(tmp_path):
    record, _ = simulate(Case())
    text = site_template(record)
    assert set(re.findall(r"(?m)^(?:# )?(\w+) = ", text)) == {
        name
        for model in (Site, SiteTerminal)
        for field_name, field in model.model_fields.items()
        if field_name != "terminal"
        for name in (getattr(field.annotation, "model_fields", None) or {field_name: None})
    }
    # One by one, and all together; the voltages between phases stand in place of the others.
    lines = text.splitlines()
    keys = [k for k, line in enumerate(lines) if re.match(r"# \w+ = ", line)]
    partners = {"primary_a": "secondary_a", "primary_v": "secondary_v"}
    partners |= {second: first for first, second in partners.items()}
    for chosen in [*([k] for k in keys), keys]:
        names = {re.match(r"# (\w+)", lines[k])[1] for k in chosen}
        wanted = names | {partners.get(name, name) for name in names}
        taken = [
            line[2:] if (found := re.match(r"# (\w+) = ", line)) and found[1] in wanted else line
            for line in lines
            if not (line.startswith("voltages =") and "voltages_pp" in wanted)
        ]
        path = tmp_path / "site.toml"
        path.write_text("\n".join(taken), encoding="utf-8")
        tree = tomllib.loads(path.read_text(encoding="utf-8"))
        read_site(path)
        assert names <= {
            name
            for section in (tree["site"], tree["clock"], tree["terminal"][0])
            for key, value in section.items()
            for name in ((key, *value) if isinstance(value, dict) else (key,))
        }


def test_it_says_how_sure_it_is_and_what_to_write(shared_folder):
    text = site_template(read(shared_folder / "records" / "ctpy" / "xtz.cfg"))
    assert "confidence 0.60: moved most of 8 groups of currents" in text.replace("\n# ", " ")
    assert "# Not sure: compare with the drawings." in text
    others = re.findall(r"(?m)^# currents = \{ a = \"(.+?)_?I?a?\"", text)
    assert len(others) == 7
    assert '\n#   "220kV母线I_Ua": V, secondary, phase A' in text


def test_where_the_names_tell_nothing_it_says_what_to_write(tmp_path):
    record = Record.from_arrays(
        {"x": (np.sin(np.arange(500.0)), "A"), "y": (np.ones(500), "furlong")}, sample_rate_hz=1000.0
    )
    text = site_template(record)
    said = text.replace("\n# ", " ")
    assert "Not sure: no three currents of one circuit are recognised" in said
    assert "Write into currents the channel of each phase" in said
    assert '#   "y": furlong' in text
    assert '# unit = { y = "A" }' in text
    assert "# nominal_frequency_hz = 50" in text
    assert _results(record, _through_a_file(record, tmp_path)) == _results(record, None)


def test_voltages_between_phases_are_suggested():
    record, _ = simulate(Case())
    va, vb, vc = record.signals(["VA", "VB", "VC"])
    channels = {f"IL{k + 1}": (record.signal(f"I{p}"), "A") for k, p in enumerate("ABC")}
    channels |= {"UL12": (va - vb, "V"), "UL23": (vb - vc, "V"), "UL31": (vc - va, "V")}
    record = Record.from_arrays(channels, sample_rate_hz=record.sample_rates_hz[0], nominal_frequency_hz=50.0)
    text = site_template(record)
    suggested = '# voltages_pp = { ab = "UL12", bc = "UL23", ca = "UL31" }'
    assert suggested in text
    assert "take the # off voltages_pp" in text
    site = Site.model_validate(tomllib.loads(text.replace(suggested, suggested[2:])))
    assert examine(record).events[0].direction == "undetermined"
    assert examine(record, site=site).events[0].direction == "forward"


def test_hostile_names_stay_names(tmp_path):
    record, _ = simulate(Case())
    hostile = replace(
        record,
        station=HOSTILE,
        origin=replace(record.origin, path=HOSTILE),
        analog=tuple(replace(c, id=c.id + HOSTILE, circuit=HOSTILE, unit=c.unit) for c in record.analog),
    )
    site = _through_a_file(hostile, tmp_path)
    assert site.site.name is None
    assert site.terminal[0].currents is not None
    assert site.terminal[0].currents.a == ("IA" + HOSTILE,)
    text = site_template(hostile)
    assert not {c for c in text if not c.isprintable() and c != "\n"}


def test_a_nominal_frequency_beyond_reason_is_not_stated(tmp_path):
    record = replace(simulate(Case())[0], nominal_frequency_hz=1e9)
    assert _through_a_file(record, tmp_path).site.nominal_frequency_hz is None


def test_it_fits_a_page():
    text = site_template(simulate(Case())[0])
    assert max(len(line) for line in text.splitlines()) <= 110
