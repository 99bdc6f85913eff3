"""From channels to one terminal: which currents, which voltages, and why."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from analyzer.records import Record
from analyzer.terminals import Terminal, assign, assign_terminal

RATE_HZ, N = 1600.0, 640
WAVE = 2 * np.pi * 50.0 * np.arange(N) / RATE_HZ
STARTS = 320


def wave(k: int, *, load: float = 100.0, fault: float = 0.0) -> np.ndarray:
    grown = np.where(np.arange(N) >= STARTS, load + fault, load)
    return grown * np.cos(WAVE - 2 * np.pi / 3 * k)


def record_of(*sets: tuple[str, str, float], circuits: dict[str, str] | None = None) -> Record:
    """Record of sets of names: three names, their unit, and by how much the fault moves them."""
    signals = {}
    for names, unit, fault in sets:
        for k, name in enumerate(names.split("|")):
            signals[name] = (wave(k, fault=fault), unit)
    record = Record.from_arrays(signals, sample_rate_hz=RATE_HZ, nominal_frequency_hz=50.0)
    circuits = circuits or {}
    return replace(record, analog=tuple(replace(c, circuit=circuits.get(c.id, "")) for c in record.analog))


def assigned(*sets: tuple[str, str, float], **more: object) -> Terminal:
    terminal, reason = assign_terminal(record_of(*sets, **more))
    assert terminal is not None, reason
    assert terminal.reason == reason
    assert 0.0 < terminal.confidence <= 1.0
    return terminal


@pytest.mark.parametrize(
    ("currents", "voltages"),
    [
        ("IA|IB|IC", "VA|VB|VC"),
        ("IL1|IL2|IL3", "UL1|UL2|UL3"),
        ("IR|IY|IB", "VR|VY|VB"),
        ("I1|I2|I3", "U1|U2|U3"),
        ("F4 IA|F4 IB|F4 IC", "Bus VA|Bus VB|Bus VC"),
        ("1-Ia|2-Ib|3-Ic", "5-Ua|6-Ub|7-Uc"),
        ("Ia_ВЛ1|Ib_ВЛ1|Ic_ВЛ1", "Ua_ТН1|Ub_ТН1|Uc_ТН1"),
        ("A相电流|B相电流|C相电流", "A相电压|B相电压|C相电压"),
    ],
)
def test_one_set_of_each(currents, voltages):
    terminal = assigned((currents, "A", 900.0), (voltages, "V", -50.0))
    assert terminal.currents == tuple(currents.split("|"))
    assert terminal.voltages == tuple(voltages.split("|"))
    assert terminal.confidence > 0.9
    assert terminal.reason == "the only three currents; voltages the only ones"
    assert list(terminal.channels) == ["va", "vb", "vc", "ia", "ib", "ic"]


def test_phases_come_in_their_order_whatever_that_of_the_channels():
    terminal = assigned(("IC|IA|IN|IB", "A", 900.0), ("VB|VC|VA", "V", -50.0))
    assert terminal.currents == ("IA", "IB", "IC")
    assert terminal.voltages == ("VA", "VB", "VC")
    assert terminal.residual == "IN"
    assert terminal.channels["in"] == "IN"


def test_of_several_feeders_with_one_bus_the_faulted_one():
    feeders = [(f"F{k} IA|F{k} IB|F{k} IC", "A", 900.0 if k == 3 else -20.0) for k in range(1, 6)]
    terminal = assigned(*feeders, ("Bus VA|Bus VB|Bus VC", "kV", -0.05))
    assert terminal.currents == ("F3 IA", "F3 IB", "F3 IC")
    assert terminal.voltages == ("Bus VA", "Bus VB", "Bus VC")
    assert terminal.name == "f3"
    assert "most of 5 groups" in terminal.reason


def test_the_voltages_named_like_the_feeder_are_its_own():
    terminal = assigned(
        ("IA_G1|IB_G1|IC_G1", "A", 50.0),
        ("IA_G2|IB_G2|IC_G2", "A", 900.0),
        ("VA_G1|VB_G1|VC_G1", "kV", -0.05),
        ("VA_G2|VB_G2|VC_G2", "kV", -0.05),
    )
    assert terminal.currents == ("IA_G2", "IB_G2", "IC_G2")
    assert terminal.voltages == ("VA_G2", "VB_G2", "VC_G2")
    assert "nearest name" in terminal.reason


def test_equal_circuits_decide_where_names_do_not():
    circuits = {**dict.fromkeys(["IA", "IB", "IC"], "Alder"), **dict.fromkeys(["U1", "U2", "U3"], "Birch")}
    circuits |= dict.fromkeys(["UR", "US", "UT"], "Alder")
    terminal = assigned(
        ("IA|IB|IC", "A", 900.0), ("U1|U2|U3", "V", -50.0), ("UR|US|UT", "V", -50.0), circuits=circuits
    )
    assert terminal.voltages == ("UR", "US", "UT")


def test_both_ends_of_a_line_move_and_the_one_named_like_the_voltages_is_local():
    terminal = assigned(
        ("REMOTE IA|REMOTE IB|REMOTE IC", "A", 1000.0),
        ("LINE IA|LINE IB|LINE IC", "A", 800.0),
        ("LINE VA|LINE VB|LINE VC", "V", -50.0),
    )
    assert terminal.currents == ("LINE IA", "LINE IB", "LINE IC")


def test_voltages_far_from_the_name_lower_the_confidence():
    near = assigned(
        ("F1 IA|F1 IB|F1 IC", "A", 900.0), ("F1 VA|F1 VB|F1 VC", "V", 0), ("T VA|T VB|T VC", "V", 0)
    )
    far = assigned(("F1 IA|F1 IB|F1 IC", "A", 900.0), ("Q VA|Q VB|Q VC", "V", 0), ("T VA|T VB|T VC", "V", 0))
    assert far.confidence < near.confidence


def test_currents_alone_are_a_terminal():
    terminal = assigned(("IA|IB|IC", "kA", 0.9))
    assert terminal.voltages == ()
    assert "no three phase voltages" in terminal.reason
    assert list(terminal.channels) == ["ia", "ib", "ic"]


def test_voltages_between_phases_are_not_taken_for_phase_voltages():
    assert assigned(("IA|IB|IC", "A", 900.0), ("VAB|VBC|VCA", "V", -50.0)).voltages == ()
    assert assigned(("I1|I2|I3", "A", 900.0), ("U12|U23|U31", "V", -50.0)).voltages == ()


@pytest.mark.parametrize(
    "sets",
    [
        [("IA|IB", "A", 900.0)],
        [("IA|IC", "A", 900.0), ("VA|VB|VC", "V", -50.0)],
        [("VA|VB|VC", "V", -50.0)],
        [("IA RMS|IB RMS|IC RMS", "A", 900.0)],
        [("IDIFF A|IDIFF B|IDIFF C", "A", 900.0)],
        [("F1 IA|F2 IB|F3 X", "A", 900.0)],
    ],
)
def test_without_three_currents_there_is_none_and_it_says_so(sets):
    terminal, reason = assign_terminal(record_of(*sets))
    assert terminal is None
    assert "no three currents" in reason
    assert "by hand" in reason


def test_a_missing_phase_does_not_borrow_from_another_feeder():
    terminal = assigned(("F1 IA|F1 IB", "A", 900.0), ("F2 IA|F2 IB|F2 IC", "A", 10.0))
    assert terminal.currents == ("F2 IA", "F2 IB", "F2 IC")


def test_what_does_not_alternate_is_no_instantaneous_current():
    rising = np.where(np.arange(N) < STARTS, 100.0, 900.0)
    signals = {f"I{p}": (rising + 0.1 * k, "A") for k, p in enumerate("ABC")}
    terminal, reason = assign_terminal(Record.from_arrays(signals, sample_rate_hz=RATE_HZ))
    assert terminal is None
    assert "alternating" in reason


def test_an_idle_phase_with_a_zero_of_its_converter_is_no_stored_rms():
    # No load: of a fault of one phase the other two show nothing but their converters' zero.
    currents = {"IA": np.where(np.arange(N) < STARTS, 0.4, wave(0, load=900.0)), "IB": 7.0, "IC": -9.0}
    signals = {name: (np.broadcast_to(values, N), "A") for name, values in currents.items()}
    terminal, _ = assign_terminal(Record.from_arrays(signals, sample_rate_hz=RATE_HZ))
    assert terminal is not None
    assert terminal.currents == ("IA", "IB", "IC")


def test_dead_feeders_are_passed_over():
    record = record_of(("F1 IA|F1 IB|F1 IC", "A", 0.0), ("F2 IA|F2 IB|F2 IC", "A", 900.0))
    dead = {c.id: (np.zeros(N) if c.id.startswith("F1") else record.signal(c.id), "A") for c in record.analog}
    terminal, _ = assign_terminal(Record.from_arrays(dead, sample_rate_hz=RATE_HZ))
    assert terminal.currents == ("F2 IA", "F2 IB", "F2 IC")


def test_unusable_channels_are_no_phase():
    record = record_of(("IA|IB|IC", "A", 900.0), ("F2 IA|F2 IB|F2 IC", "A", 50.0))
    broken = tuple(replace(c, unit="?") if c.id == "IB" else c for c in record.analog)
    terminal, _ = assign_terminal(replace(record, analog=broken))
    assert terminal.currents == ("F2 IA", "F2 IB", "F2 IC")


def test_names_that_are_there_twice_are_told_apart_by_their_circuits():
    n = {"I": ("A", 900.0), "V": ("V", -50.0)}
    signals, channels = {}, []
    for circuit in ("Elm", "Fir"):
        for letter, (unit, fault) in n.items():
            for k, phase in enumerate("ABC"):
                key = f"{letter}{phase}{circuit}"
                moved = fault if circuit == "Fir" else 0.01 * fault
                signals[key] = (wave(k, fault=moved), unit)
                channels.append((key, f"{letter}{phase}", circuit))
    record = Record.from_arrays(signals, sample_rate_hz=RATE_HZ)
    record = replace(
        record,
        analog=tuple(
            replace(channel, name=name, circuit=circuit)
            for channel, (_, name, circuit) in zip(record.analog, channels, strict=True)
        ),
    )
    terminal, _ = assign_terminal(record)
    assert terminal.currents == ("IAFir", "IBFir", "ICFir")
    assert terminal.voltages == ("VAFir", "VBFir", "VCFir")


def test_the_disturbance_of_a_long_record_decides_however_late_it_is(monkeypatch):
    monkeypatch.setattr(assign, "LONG_SAMPLES", 4_000)
    monkeypatch.setattr(assign, "_HEAD_SAMPLES", 1_000)
    times_s = np.arange(40_000) / RATE_HZ
    late = (times_s > 20.0) & (times_s < 20.1)
    signals = {
        f"{feeder} I{p}": (
            (100.0 + late * (900.0 if feeder == "F2" else 50.0))
            * np.cos(2 * np.pi * 50.0 * times_s - 2 * np.pi / 3 * k),
            "A",
        )
        for feeder in ("F1", "F2", "F3")
        for k, p in enumerate("ABC")
    }
    rms = {f"F9 I{p} RMS": (np.full(40_000, 70.0) + 5_000.0 * late, "A") for p in "ABC"}
    record = Record.from_arrays({**signals, **rms}, sample_rate_hz=RATE_HZ, nominal_frequency_hz=50.0)
    read, signals_of = [], Record.signals

    def noted(self, keys=None):
        read.append(self.n_samples)
        return signals_of(self, keys)

    monkeypatch.setattr(Record, "signals", noted)
    terminal, reason = assign_terminal(record)
    assert terminal is not None, reason
    assert terminal.currents == ("F2 IA", "F2 IB", "F2 IC")
    # One pass of all channels, which is one part here; then the beginning and the one window for each group.
    assert sorted(read)[-1] <= record.n_samples
    assert sum(n > 4_000 for n in read) == 1
