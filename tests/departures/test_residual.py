"""``residual-structure``: significant and material, or not at all."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from analyzer.departures import residual_structure
from analyzer.examine import examine
from analyzer.records import Record
from tests.simulated import Case, simulate
from tests.test_comparison import seen

CHANNELS = ("ch1", "ch2", "ch3")


@pytest.mark.parametrize(
    ("share", "chi", "departs"),
    [(0.01, 1.0, False), (0.01, 50.0, False), (0.10, 1.5, False), (0.10, 50.0, True), (0.031, 3.1, True)],
)
def test_it_takes_both_a_share_of_the_peak_and_more_than_the_noise(share, chi, departs):
    _, estimate = seen(simulate(Case(fault_type="BC"))[0])
    ((loop, fit),) = estimate.loops
    peak_a = np.hypot(*fit.coefficients[:2])
    fit = replace(fit, residual_rms=share * peak_a, reduced_chi_square=chi**2)
    found = residual_structure(replace(estimate, loops=((loop, fit),)), CHANNELS)
    assert len(found) == departs
    for departure in found:
        assert (departure.code, departure.severity) == ("residual-structure", "warning")
        assert departure.channels == ("ch2", "ch3")  # of the pair BC
        assert departure.statistic == pytest.approx(share)
        assert departure.threshold == 0.03
        assert f"{share:.1%}" in departure.says
        assert f"{chi:.0f} times" in departure.says
        assert "loop BC" in departure.says


def test_each_loop_of_two_phases_to_ground_is_looked_at():
    _, estimate = seen(simulate(Case(fault_type="CAG"))[0])
    loops = tuple(
        (loop, replace(fit, residual_rms=fit.residual_rms * 0 + 1e5, reduced_chi_square=1e4))
        for loop, fit in estimate.loops
    )
    found = residual_structure(replace(estimate, loops=loops), CHANNELS)
    assert [d.channels for d in found] == [("ch1", "ch3"), ("ch1", "ch3")]
    assert ["CA " in found[0].says, "CA+G" in found[1].says] == [True, True]


def distorted(share: float, snr_db: float) -> Record:
    record, _ = simulate(Case(snr_db=snr_db))
    times_s = record.times()
    signals = {c.id: (record.signal(c.id), c.unit) for c in record.analog}
    fault = (times_s > 0.1234) & (times_s < 0.21)
    peak_a = np.abs(signals["IA"][0]).max() / 1.7
    ripple = share * np.sqrt(2) * peak_a * np.cos(2 * np.pi * 150.0 * times_s + 0.4)
    signals["IA"] = (signals["IA"][0] + np.where(fault, ripple, 0.0), "A")
    return Record.from_arrays(signals, sample_rate_hz=3200.0, nominal_frequency_hz=50.0)


@pytest.mark.parametrize(("share", "snr_db", "departs"), [(0.08, 60.0, True), (0.005, 80.0, False)])
def test_a_distorted_current_trips_it_and_a_slight_one_at_any_resolution_does_not(share, snr_db, departs):
    (event,) = examine(distorted(share, snr_db)).events
    codes = [departure.code for departure in event.departures]
    assert ("residual-structure" in codes) == departs
    if not departs:
        assert event.fit.reduced_chi_square > 9  # it was significant
