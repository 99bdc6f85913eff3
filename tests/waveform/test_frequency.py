"""The power frequency: what the wave says, held against what the file says."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from analyzer.records import Record
from analyzer.terminals import Terminal
from analyzer.waveform.frequency import power_frequency

NAMES = ("IA", "IB", "IC", "VA", "VB", "VC")
TERMINAL = Terminal(name="f", currents=NAMES[:3], voltages=NAMES[3:])


def record_of(
    wave_hz: float, stated_hz: float | None, *, rate_hz: float = 3200.0, volts: float = 100.0
) -> Record:
    times_s = np.arange(960) / rate_hz
    signals = {
        name: (
            (10.0 if k < 3 else volts) * np.cos(2 * np.pi * wave_hz * times_s - 2 * np.pi / 3 * (k % 3)),
            "A" if k < 3 else "V",
        )
        for k, name in enumerate(NAMES)
    }
    return Record.from_arrays(signals, sample_rate_hz=rate_hz, nominal_frequency_hz=stated_hz)


@pytest.mark.parametrize(("wave_hz", "stated_hz"), [(50.0, 50.0), (60.0, 60.0), (49.0, 50.0), (61.5, 60.0)])
def test_what_is_stated_and_borne_out_is_taken(wave_hz, stated_hz):
    assert power_frequency(record_of(wave_hz, stated_hz), TERMINAL) == (stated_hz, ())


@pytest.mark.parametrize(("wave_hz", "stated_hz"), [(60.0, 50.0), (50.0, 60.0), (50.3, 60.0), (59.2, 50.0)])
def test_a_wave_that_contradicts_goes_before_the_file(wave_hz, stated_hz):
    found_hz, (problem,) = power_frequency(record_of(wave_hz, stated_hz), TERMINAL)
    assert found_hz == round(wave_hz, -1)
    assert (problem.code, problem.severity) == ("frequency-contradicted", "warning")
    assert f"{stated_hz:g} Hz is stated" in problem.message
    assert f"{found_hz:g} Hz used" in problem.message


@pytest.mark.parametrize("wave_hz", [50.0, 60.0, 49.7, 60.4])
def test_without_a_statement_the_nearest_usual_one_is_assumed_and_said(wave_hz):
    found_hz, (problem,) = power_frequency(record_of(wave_hz, None), TERMINAL)
    assert found_hz == round(wave_hz, -1)
    assert (problem.code, problem.severity) == ("frequency-assumed", "note")
    assert f"{found_hz:g} Hz by the wave" in problem.message


def test_currents_tell_it_where_voltages_are_lacking_or_dead():
    record = record_of(60.0, 50.0)
    assert power_frequency(record, replace(TERMINAL, voltages=()))[0] == 60.0
    assert power_frequency(record_of(60.0, 50.0, volts=0.0), TERMINAL)[0] == 60.0


def test_an_odd_frequency_contradicts_nothing():
    # Halfway, or a railway's: no usual one is near, and the file stands.
    assert power_frequency(record_of(55.0, 50.0), TERMINAL) == (50.0, ())


def test_what_is_sampled_too_slowly_keeps_what_is_stated():
    assert power_frequency(record_of(50.0, 60.0, rate_hz=200.0), TERMINAL) == (60.0, ())
    assert power_frequency(record_of(50.0, None, rate_hz=200.0), TERMINAL) == (50.0, ())
