"""Terminals as a site file states them: sums and signs, scales, missing phases, voltages between phases."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from analyzer.examine import examine
from analyzer.records import Record
from analyzer.site import Site, SiteError, read_site
from analyzer.terminals import assign_terminal
from analyzer.terminals.by_site import stated_record, terminal_from_site, terminals_of
from analyzer.waveform.sampling import aligned_signals
from analyzer.waveform.stretches import usable_stretches
from tests.simulated import Case, simulate

ABC = {"a": "IA", "b": "IB", "c": "IC"}
UABC = {"a": "VA", "b": "VB", "c": "VC"}


def _site(*terminals: dict[str, object], **sections: object) -> Site:
    return Site.model_validate({**sections, "terminal": list(terminals)})


def _rearranged(record: Record, channels: dict[str, tuple[np.ndarray, str]]) -> Record:
    """The record's times with other channels."""
    return Record.from_arrays(
        channels,
        sample_rate_hz=record.sample_rates_hz[0],
        nominal_frequency_hz=record.nominal_frequency_hz,
    )


def _signals(record: Record, site: Site) -> np.ndarray:
    """What the analysis is given of the only terminal: currents, then voltages, shape (3 or 6, n)."""
    record, _ = stated_record(record, site)
    (terminal,) = terminals_of(record, site).terminals
    (stretch,), _ = usable_stretches(record, frequency_hz=50.0)
    _, currents, voltages = aligned_signals(record, terminal, stretch)
    return currents if voltages is None else np.vstack([currents, voltages])


def _results(findings) -> dict[str, object]:
    document = findings.to_dict()
    document.pop("elapsed_ms")
    for terminal in document["terminals"]:
        terminal.pop("how")
        terminal.pop("confidence")
    return document


@pytest.fixture(scope="module")
def plain() -> Record:
    return simulate(Case())[0]


def test_channels_stated_as_the_names_have_them_change_nothing(plain):
    by_name, _ = assign_terminal(plain)
    site = _site({"name": by_name.name, "currents": ABC, "voltages": UABC})
    findings = examine(plain, site=site)
    assert _results(findings) == _results(examine(plain))
    (terminal,) = findings.terminals
    assert (terminal.how, terminal.confidence) == ("by-site-file", 1.0)


def test_a_breaker_and_a_half_bay_is_the_sum_of_two_channels_with_their_signs(plain):
    currents = plain.signals(["IA", "IB", "IC"])
    rng = np.random.default_rng(5)
    circulating = 700.0 * np.sin(2 * np.pi * 50.0 * plain.times() + rng.uniform(0, 6, size=(3, 1)))
    channels = {f"one {p}": (currents[k] + circulating[k], "A") for k, p in enumerate("ABC")}
    channels |= {f"two {p}": (circulating[k], "A") for k, p in enumerate("ABC")}
    bay = _rearranged(plain, channels)
    site = _site({"currents": {p: [f"one {p.upper()}", f"-two {p.upper()}"] for p in "abc"}})
    np.testing.assert_allclose(_signals(bay, site), currents, atol=1e-9)
    (terminal,) = examine(bay, site=site).terminals
    assert terminal.channels["ia"] == "one A - two A"
    assert terminal.name == "of one A - two A"


def test_currents_into_the_bus_are_turned_round(plain):
    site = _site({"currents": ABC, "voltages": UABC, "polarity": "into-bus"})
    signals = _signals(plain, site)
    np.testing.assert_array_equal(signals[:3], -plain.signals(["IA", "IB", "IC"]))
    np.testing.assert_array_equal(signals[3:], plain.signals(["VA", "VB", "VC"]))
    directions = [examine(plain, site=s).events[0].direction for s in (None, site)]
    assert directions == ["forward", "reverse"]


def test_a_channel_may_begin_with_a_minus(plain):
    odd = replace(plain, analog=tuple(replace(c, id=f"-{c.id}") for c in plain.analog))
    site = _site({"currents": {p: f"-I{p.upper()}" for p in "abc"}})
    np.testing.assert_array_equal(_signals(odd, site), plain.signals(["IA", "IB", "IC"]))


def test_a_current_that_is_not_recorded_is_the_residual_less_the_others(plain):
    currents = plain.signals(["IA", "IB", "IC"])
    channels = {"IA": (currents[0], "A"), "IC": (currents[2], "A"), "3I0": (currents.sum(axis=0), "A")}
    for polarity, sign in (("out-of-bus", 1.0), ("into-bus", -1.0)):
        stated = {"currents": {"a": "IA", "c": "IC"}, "residual": "3I0", "polarity": polarity}
        signals = _signals(_rearranged(plain, channels), _site(stated))
        np.testing.assert_allclose(signals, sign * currents, atol=1e-9)


def test_corrections_units_and_ratios_scale_what_they_are_of(plain):
    wrong = tuple(
        replace(c, unit="" if c.id == "IB" else c.unit, multiplier=1e-3 if c.id == "IB" else 1 / 1.2)
        if c.id in ("IA", "IB")
        else replace(c, side="secondary", multiplier=5 / 600)
        if c.id == "IC"
        else c
        for c in plain.analog
    )
    record = replace(plain, analog=wrong)
    stated = {"currents": ABC, "unit": {"IB": "kA"}, "ratio_correction": {"IA": 1.2}}
    with pytest.raises(SiteError, match="ratio is missing") as caught:
        _signals(record, _site(stated))
    assert "terminal.ct" in caught.value.hint
    site = _site({**stated, "ct": {"primary_a": 600, "secondary_a": 5}})
    np.testing.assert_allclose(_signals(record, site), plain.signals(["IA", "IB", "IC"]), rtol=1e-12)
    del stated["unit"]
    with pytest.raises(SiteError, match="no unit is given") as caught:
        _signals(record, _site(stated))
    assert (caught.value.code, caught.value.where) == ("unusable-channel", "terminal[0].currents.b")


def test_a_ratio_goes_before_the_records_and_says_so(plain):
    secondary = tuple(
        replace(c, side="secondary", primary=400.0, secondary=1.0) if c.id[0] == "I" else c
        for c in plain.analog
    )
    record = replace(plain, analog=secondary)
    ratio = {"ct": {"primary_a": 800, "secondary_a": 1}}
    doubled = examine(record, site=_site({"currents": ABC, "voltages": UABC, **ratio}))
    once = examine(record)
    rms = [f.events[0].phases["A"].symmetrical_rms_a.value for f in (doubled, once)]
    assert rms[0] == pytest.approx(2 * rms[1])
    said = [p for p in doubled.record.problems if p.code == "ratio-contradicted"]
    assert [p.where for p in said] == ["channel IA", "channel IB", "channel IC"]
    assert "400/1 is not the site file's 800/1" in said[0].message
    # Where the names choose the channels a ratio fills gaps only.
    assert _results(examine(record, site=_site(ratio))) == _results(once)
    # Primary values are scaled already.
    np.testing.assert_array_equal(
        _signals(plain, _site({"currents": ABC, **ratio})), plain.signals(["IA", "IB", "IC"])
    )


@pytest.mark.parametrize("pairs", [("ab", "bc", "ca"), ("ab", "bc"), ("bc", "ca"), ("ca", "ab")])
@pytest.mark.parametrize("fault_type", ["AG", "BC", "CAG", "ABC"])
def test_voltages_between_phases_tell_all_but_the_zero_sequence(fault_type, pairs):
    record, truth = simulate(Case(fault_type=fault_type))
    va, vb, vc = record.signals(["VA", "VB", "VC"])
    channels = {f"I{p}": (record.signal(f"I{p}"), "A") for p in "ABC"}
    between = {"ab": va - vb, "bc": vb - vc, "ca": vc - va}
    channels |= {f"U{pair}": (between[pair], "V") for pair in pairs}
    site = _site(
        {
            "currents": ABC,
            "voltages_pp": {pair: f"U{pair}" for pair in pairs},
            "source": {"z1_ohm": [0.4, 4.0], "z0_ohm": [0.6, 5.0]},
            "line": {"z1_ohm_per_km": [0.3, 2.0], "z0_ohm_per_km": [0.9, 6.0]},
        }
    )
    record = _rearranged(record, channels)
    signals = _signals(record, site)
    np.testing.assert_allclose(signals[3:], np.array([va, vb, vc]) - (va + vb + vc) / 3, atol=1e-6)
    findings = examine(record, site=site)
    (event,) = findings.events
    assert (event.fault_type, event.direction) == (fault_type, "forward")
    assert set(findings.terminals[0].channels) == {"ia", "ib", "ic", *(f"v{pair}" for pair in pairs)}
    assert any(p.code == "no-zero-sequence-voltage" for p in findings.record.problems)
    found, behind = event.impedance, truth.fault.behind
    assert found.source.z1.magnitude_ohm.value == pytest.approx(abs(behind.z1_ohm), rel=5e-3)
    assert found.source.z0.magnitude_ohm.value is None
    assert found.total.magnitude_ohm.value == pytest.approx(abs(truth.fault.loops[0].total_ohm), rel=5e-3)
    rows = {row.check: row.verdict for row in event.comparison}
    assert rows["source-z1-study"] == "agrees"
    if fault_type == "AG":
        assert (found.faulted_loop, found.faulted) == (None, None)
        assert rows["source-z0-study"] == "undetermined"
    else:
        assert found.faulted_loop.x_ohm.value == pytest.approx(0.4 * 2.0, rel=0.01)


def test_an_absent_channel_is_named_with_the_record_and_its_line(plain, tmp_path):
    path = tmp_path / "site.toml"
    path.write_text('[[terminal]]\nname = "F"\n[terminal.currents]\na = "IA"\nb = "IX"\nc = "IC"\n', "utf-8")
    record = replace(plain, origin=replace(plain.origin, path="trip_0412.dat"))
    with pytest.raises(SiteError) as caught:
        examine(record, site=read_site(path))
    error = caught.value
    assert error.code == "no-such-channel"
    assert error.where == f"{path}, line 5: terminal[0].currents.b"
    assert error.message == "there is no channel 'IX' in trip_0412.dat"
    assert error.hint == "channels are: IA, IB, IC, VA, VB, VC"
    (plain_name,) = (c for c in record.analog if c.id == "IB")
    longer = replace(record, analog=(*record.analog, replace(plain_name, id="Feeder 4 IX")))
    path.write_text('[[terminal]]\ncurrents = { a = "IA", b = "Feeder 4 I.X", c = "IC" }\n', "utf-8")
    with pytest.raises(SiteError, match=r"did you mean Feeder 4 IX\?"):
        examine(longer, site=read_site(path))


@pytest.mark.parametrize(
    ("stated", "where", "said"),
    [
        ({"currents": ABC, "residual": "IN"}, "residual", "no channel 'IN'"),
        ({"currents": {**ABC, "a": ["IA", "-IZ"]}}, "currents.a", "no channel 'IZ'"),
        ({"currents": {**ABC, "a": "VA"}}, "currents.a", "is in V, which is no current"),
        ({"currents": ABC, "voltages": {**UABC, "c": "IC"}}, "voltages.c", "is in A, which is no voltage"),
        ({"currents": ABC, "voltages_pp": {"ab": "VA", "bc": "X"}}, "voltages_pp.bc", "no channel 'X'"),
        ({"currents": ABC, "unit": {"IQ": "A"}}, "unit.IQ", "no channel 'IQ'"),
        (
            {"currents": ABC, "ratio_correction": {"VA": 2.0}},
            "ratio_correction.VA",
            "none of this terminal's",
        ),
        ({"unit": {"IQ": "A"}}, "unit.IQ", "no channel 'IQ'"),
        ({"voltages": {**UABC, "c": "VX"}}, "voltages.c", "no channel 'VX'"),
    ],
)
def test_what_does_not_fit_the_record_is_one_error_of_its_key(plain, stated, where, said):
    with pytest.raises(SiteError, match=said) as caught:
        examine(plain, site=_site(stated))
    assert caught.value.where == f"terminal[0].{where}"


def test_without_currents_the_names_tell_the_channels(plain):
    findings = examine(plain, site=_site({"name": "Feeder 4", "polarity": "into-bus"}))
    (terminal,) = findings.terminals
    assert (terminal.how, terminal.name, terminal.confidence) == ("by-name", "Feeder 4", 0.95)
    assert terminal.channels == {"ia": "IA", "ib": "IB", "ic": "IC", "va": "VA", "vb": "VB", "vc": "VC"}
    assert findings.events[0].direction == "reverse"
    assert _results(examine(plain, site=Site())) == _results(examine(plain))


def test_stated_currents_bring_no_voltages_by_name(plain):
    (terminal,) = examine(plain, site=_site({"currents": ABC})).terminals
    assert set(terminal.channels) == {"ia", "ib", "ic"}


def test_where_the_names_tell_nothing_it_is_as_without_a_site_file():
    record = Record.from_arrays(
        {"x": (np.sin(np.arange(500.0)), "A"), "y": (np.ones(500), "A")}, sample_rate_hz=1000.0
    )
    assert _results(examine(record, site=_site({"name": "F"}))) == _results(examine(record))


def test_several_terminals_have_their_own_events_and_those_elsewhere_are_left_out(plain):
    currents = plain.signals(["IA", "IB", "IC"])
    channels = {f"V{p}": (plain.signal(f"V{p}"), "V") for p in "ABC"}
    channels |= {f"I{p}": (currents[k], "A") for k, p in enumerate("ABC")}
    # Another circuit of the bus feeds half of it back.
    channels |= {f"J{p}": (-0.5 * currents[k], "A") for k, p in enumerate("ABC")}
    record = _rearranged(plain, channels)
    site = _site(
        {"name": "other", "currents": {p: f"J{p.upper()}" for p in "abc"}, "voltages": UABC},
        {"name": "faulted", "currents": ABC, "voltages": UABC},
        {"name": "elsewhere", "currents": {p: f"K{p.upper()}" for p in "abc"}},
    )
    findings = examine(record, site=site)
    assert [terminal.name for terminal in findings.terminals] == ["other", "faulted"]
    directions = {event.terminal: event.direction for event in findings.events}
    assert directions == {"other": "reverse", "faulted": "forward"}
    (left_out,) = (p for p in findings.record.problems if p.code == "terminal-not-recorded")
    assert "elsewhere" in left_out.message
    # A terminal half recorded is a mistake, and so is a site file of another place altogether.
    half = _site({"currents": {**ABC, "c": "KC"}}, {"currents": {p: f"J{p.upper()}" for p in "abc"}})
    with pytest.raises(SiteError, match="no channel 'KC'"):
        examine(record, site=half)
    with pytest.raises(SiteError, match="no channel 'KA'"):
        examine(record, site=_site({"currents": {p: f"K{p.upper()}" for p in "abc"}}))


def test_terminal_from_site_needs_currents(plain):
    with pytest.raises(ValueError, match="needs its currents"):
        terminal_from_site(plain, _site({}).terminal[0])
