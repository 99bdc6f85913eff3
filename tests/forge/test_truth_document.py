"""The truth document: its numbers against the closed form, its clock against the samples, and its form."""

from __future__ import annotations

import json
import math
from typing import Any

import numpy as np
import pytest

from analyzer.forge import ForgedRecord, Scenario, TruthDocument, forge_record, parse_scenario
from analyzer.forge.truth_document import TrueEvent
from tests.forge.scenarios import PLAIN, changed, with_event

# The circuit of PLAIN by hand: (2 Z1 + Z0)/3 with Z1 = 0.3 + j4 + (0.5 + j3)/2, Z0 = 0.5 + j6 + (1.2 + j9)/2.
_R, _X = (2 * 0.55 + 1.1) / 3, (2 * 5.5 + 10.5) / 3
_Z = math.hypot(_R, _X)


def _one(text: str = PLAIN) -> tuple[ForgedRecord, TrueEvent]:
    forged = forge_record(parse_scenario(text))
    (event,) = forged.truth.events
    return forged, event


def test_a_phase_to_ground_fault_against_the_closed_form():
    forged, event = _one()
    omega = 2 * math.pi * 50
    lag = math.degrees(math.atan2(_X, _R))
    assert (event.kind, event.fault_type, event.direction) == ("fault", "AG", "forward")
    # va = sqrt2 V cos(omega t): 30 degrees after a rising zero is 300 degrees into a cycle.
    assert event.inception.time_s == pytest.approx(0.06 + 300 / 360 * 0.02, abs=1e-12)
    assert event.inception.voltage_angle_deg == pytest.approx(30.0, abs=1e-9)
    assert (event.inception.reference, event.inception.delay_s) == ("AG", 0.0)
    phase = event.phases["A"]
    assert set(event.phases) == {"A"}
    assert phase.symmetrical_rms_a == pytest.approx(11000 / _Z, rel=1e-9)
    assert phase.steady_rms_a == pytest.approx(11000 / _Z, rel=1e-9)
    assert phase.angle_deg == pytest.approx(-lag, abs=1e-8)
    offset = -math.sqrt(2) * 11000 / _Z * math.sin(math.radians(30 - lag))
    assert phase.dc_initial_a == pytest.approx(offset, rel=1e-9)
    (decay,) = event.decay
    assert (decay.loop, decay.exact) == ("AG", True)
    assert decay.time_constant_s == pytest.approx(_X / omega / _R, rel=1e-9)
    assert decay.x_over_r == pytest.approx(_X / _R, rel=1e-9)
    assert event.x_over_r == pytest.approx(_X / _R, rel=1e-9)

    def current(t: np.ndarray) -> np.ndarray:
        wave = math.sqrt(2) * 11000 / _Z * np.sin(omega * t + math.radians(30 - lag))
        return wave + offset * np.exp(-t * omega * _R / _X)

    after_s = np.linspace(0, 0.02, 200_001)
    k = int(np.argmax(np.abs(current(after_s))))
    assert phase.peak.value_a == pytest.approx(abs(current(after_s)[k]), rel=1e-9)
    assert phase.peak.time_s == pytest.approx(event.inception.time_s + after_s[k], abs=1e-7)
    assert phase.peak.ratio == pytest.approx(phase.peak.value_a / (math.sqrt(2) * phase.symmetrical_rms_a))
    # The samples, to noise, resolution, and the mean over a fine sample at the very start.
    times = forged.record.times() - event.inception.time_s
    later = times > 1e-3
    apart = forged.record.signal("IA")[later] - current(times[later])
    assert np.sqrt(np.mean(apart**2)) == pytest.approx(0.5, rel=0.15)


def test_impedances():
    _, event = _one()
    z = event.impedance
    assert z is not None
    for found, r, x in (
        (z.source.z1, 0.3, 4.0),
        (z.source.z2, 0.3, 4.0),
        (z.source.z0, 0.5, 6.0),
        (z.faulted, 0.25, 1.5),
        (z.total, _R, _X),
        (z.faulted_loop, (2 * 0.25 + 0.6) / 3, (2 * 1.5 + 4.5) / 3),
        (z.loops[0].circuit, _R, _X),
    ):
        assert (found.r_ohm, found.x_ohm) == pytest.approx((r, x), rel=1e-9)
        assert found.magnitude_ohm == pytest.approx(math.hypot(r, x))
        assert found.angle_deg == pytest.approx(math.degrees(math.atan2(x, r)))
        assert found.x_over_r == pytest.approx(x / r)


def test_a_pair_to_ground_has_two_loops_and_a_load_that_is_seen_before():
    text = changed('"AG"', '"BCG"', text=changed(
        "[[events]]", "[[network.loads]]\nz = { magnitude_ohm = 200, angle_deg = 0 }\n\n[[events]]"
    ))  # fmt: skip
    _, event = _one(text)
    assert event.impedance is not None
    assert [decay.loop for decay in event.decay] == ["BC", "BC+G"]
    assert [loop.loop for loop in event.impedance.loops] == ["BC", "BC+G"]
    assert set(event.phases) == {"B", "C"}
    assert event.inception.reference == "BC"
    # 11 kV behind 0.8 + j7 ohm and 200 ohm: 54.75 A.
    expected = 11000 / abs(200.8 + 7j)
    assert list(event.prefault.current_rms_a.values()) == pytest.approx([expected] * 3, rel=1e-9)
    # vb - vc lags va by 90 degrees.
    assert event.prefault.voltage_angle_deg["A"] == pytest.approx(90.0, abs=1e-6)
    turned = event.prefault.voltage_angle_deg["B"] - event.prefault.current_angle_deg["B"]
    # The bus sees the load behind the line.
    assert turned == pytest.approx(math.degrees(math.atan2(3.0, 200.5)), abs=1e-6)


def test_the_clock_is_the_records_and_the_filter_only_delays():
    filtered = changed("noise =", "anti_alias = { order = 2, cutoff_hz = 400 }\nnoise =")
    (_, plain), (_, event) = _one(), _one(filtered)
    assert event.inception.time_s == plain.inception.time_s
    # Second-order Butterworth: sqrt2/omega_c at frequency zero.
    truth = forge_record(parse_scenario(filtered)).truth
    assert truth.instruments.delay_at_zero_s == pytest.approx(math.sqrt(2) / (2 * math.pi * 400), rel=1e-9)
    assert event.inception.delay_s == truth.instruments.delay_s
    assert 0.9 < truth.instruments.delay_s / truth.instruments.delay_at_zero_s < 1.1


def test_a_lead_of_another_length_changes_no_instant():
    """Instruments that need a longer run-up start the solution earlier; the record must not move."""
    filtering = 'relay_filter = { kind = "full-cycle-cosine", applies_to = "currents" }'
    longer = changed("noise =", f"{filtering}\nskew_s = {{ ib = 5e-3 }}\nnoise =")
    (short, plain), (long, event) = _one(), _one(longer)
    assert event.inception.time_s == pytest.approx(plain.inception.time_s, abs=1e-14)
    assert event.phases["A"].peak.time_s == pytest.approx(plain.phases["A"].peak.time_s, abs=1e-12)
    # Voltages pass unfiltered: the wave of the scenario, to noise and half a count.
    times = short.record.times()
    before = times < event.inception.time_s
    wave = math.sqrt(2) * 11000 * np.cos(100 * math.pi * times[before])
    for record in (short.record, long.record):
        assert np.abs(record.signal("VA")[before] - wave).max() < 6 * 2.0 + 0.5


def test_clearing_of_each_phase_and_duration():
    _, event = _one(with_event('do = "open"\nafter_s = 0.05', text=changed('"AG"', '"ABC"')))
    assert event.clearing is not None
    opened = event.clearing.by_phase_s
    assert set(opened) == {"A", "B", "C"}
    order_s = event.inception.time_s + 0.05
    assert all(order_s <= time_s < order_s + 0.015 for time_s in opened.values())
    assert event.clearing.time_s == max(opened.values())
    assert event.duration_s == pytest.approx(event.clearing.time_s - event.inception.time_s)


def test_the_truth_ends_with_the_record():
    """The instruments look beyond the last sample, by the skew; what happens there is not in the record."""
    order = with_event(
        'do = "open"\ntime_s = 0.199', text=changed("noise =", "skew_s = { ib = 15e-3 }\nnoise =")
    )
    forged, event = _one(order)
    assert event.clearing is None
    assert event.duration_s is None
    assert event.phases["A"].peak.time_s < forged.record.duration_s
    beyond = changed("duration_s = 0.2", "duration_s = 0.22", text=order)
    _, longer = _one(beyond)
    assert longer.clearing is not None
    assert forged.record.duration_s < longer.clearing.time_s < 0.22


def test_segments_of_an_evolving_fault():
    _, event = _one(with_event('do = "change"\nafter_s = 0.03\ntype = "ABG"'))
    start_s = event.inception.time_s
    assert [(round(s.time_s - start_s, 9), s.fault_type) for s in event.segments] == [
        (0, "AG"),
        (0.03, "ABG"),
    ]
    (departure,) = [d for d in event.departures if d.code == "evolving-fault"]
    assert departure.time_s == pytest.approx(start_s + 0.03)
    assert departure.strength == 1.0


def test_departures_of_the_instruments_stand_with_their_channels():
    text = changed("noise =", 'wiring = { reversed = ["ib"] }\nnoise =')
    forged, _ = _one(text.replace("current_range_a = 10000", "current_range_a = 1500"))
    found = {d.code: d for d in forged.truth.departures}
    assert set(found) == {"wiring", "clipped-channel"}
    assert found["wiring"].channels == ("ib",)
    assert found["clipped-channel"].channels == ("ia",)
    clipped = forged.truth.instruments.clipped_samples
    assert found["clipped-channel"].strength == clipped["ia"] > 0
    assert clipped["ib"] == clipped["va"] == 0


def test_saturation_is_told_phase_by_phase():
    text = changed('station = "Invented"', "current_ratio = { primary = 200, secondary = 1 }").replace(
        "noise =",
        "ct = { winding_ohm = 1, burden_ohm = 4, time_constant_s = 3, "
        "knee = { voltage_v = 60, exciting_current_a = 0.05 } }\nnoise =",
    )
    forged, event = _one(text)
    instruments = forged.truth.instruments
    assert instruments.ct_time_constant_s == pytest.approx(3.0)
    assert instruments.saturation is not None
    assert instruments.saturation["A"].peak_flux_pu > 1.0
    assert instruments.saturation["A"].first_crossing_s > event.inception.time_s
    assert instruments.saturation["B"].first_crossing_s is None
    assert [d.code for d in forged.truth.departures] == ["ct-saturation"]


def _numbers(value: Any) -> list[float]:
    if isinstance(value, dict):
        return [n for item in value.values() for n in _numbers(item)]
    if isinstance(value, list):
        return [n for item in value for n in _numbers(item)]
    return [value] if isinstance(value, float) else []


_UNDAMPED = PLAIN
for _r in ("r_ohm = 0.3", "r_ohm = 0.5", "r_ohm = 1.2"):
    _UNDAMPED = _UNDAMPED.replace(_r, "r_ohm = 0")
_EVENT = PLAIN[PLAIN.index("[[events]]") : PLAIN.index("[instruments]")]
_QUIET = PLAIN.replace(_EVENT, "")


@pytest.mark.parametrize(
    "text",
    [PLAIN, _UNDAMPED, _QUIET, with_event('do = "open"\ntime_s = 0.05', text=_QUIET)],
    ids=["plain", "nothing damps it", "nothing happens", "a line is switched off"],
)
def test_documents_are_finite_and_come_back(text):
    truth = forge_record(parse_scenario(text)).truth
    document = json.loads(truth.to_json())
    assert document["schema"] == "faultassay/truth/1"
    assert all(math.isfinite(number) for number in _numbers(document))
    assert TruthDocument.model_validate(document) == truth
    assert truth.to_json().isascii()


def test_what_nothing_damps_is_null():
    _, event = _one(_UNDAMPED)
    assert event.decay[0].time_constant_s is None
    assert event.decay[0].x_over_r is None
    assert event.x_over_r is None


def test_the_scenario_in_the_truth_forges_the_record_again():
    varied = changed("fraction = 0.5", "fraction = { uniform = [0.1, 0.9] }")
    forged, event = _one(varied)
    scenario = Scenario.model_validate(forged.truth.to_dict()["scenario"])
    again = forge_record(scenario)
    assert again.truth.events == (event,)
    assert np.array_equal(again.record.stored(), forged.record.stored())


def test_the_schema_says_what_is_required():
    schema = TruthDocument.json_schema()
    assert schema["$id"] == "faultassay/truth/1"
    assert set(schema["required"]) == {
        "schema", "record", "instruments", "events", "departures", "scenario"
    }  # fmt: skip
