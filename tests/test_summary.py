"""The sentence that a person reads first."""

from __future__ import annotations

import pytest

from analyzer.examine import examine
from analyzer.findings import DepartureInfo, Event, Quantity
from analyzer.summary import summary_of
from tests.simulated import Case, simulate


@pytest.fixture(scope="module")
def fault() -> Event:
    (event,) = examine(simulate(Case(snr_db=70.0))[0]).events
    return event


def departure(code: str, severity: str = "warning") -> DepartureInfo:
    return DepartureInfo(
        code=code, severity=severity, time_s=None, channels=(), statistic=1.0, threshold=1.0, says="So."
    )


def test_a_fault_is_said_with_its_numbers(fault):
    said = summary_of([fault], fault.verdict)
    assert said.startswith(f"AG fault at {fault.inception.time_s.value:.4f} s, ")
    assert f"{fault.duration_s.value * 1e3:.0f} ms long" in said
    phase = fault.phases["A"]
    assert f"{phase.symmetrical_rms_a.value / 1e3:.3g} kA symmetrical" in said
    assert f"peak {phase.peak.model_a.value / 1e3:.3g} kA" in said
    ratio = fault.x_over_r.from_decay
    assert f"X/R {ratio.value:.3g} ({ratio.low:.3g} to {ratio.high:.3g}) from the decay" in said
    assert said.endswith(". It follows RL theory.")


def test_what_departs_is_named_once_and_notes_are_not(fault):
    departures = (departure("xr-mismatch"), departure("short-window", "note"), departure("xr-mismatch"))
    said = summary_of([fault.model_copy(update={"verdict": "departs", "departures": departures})], "departs")
    assert said.endswith("It departs from RL theory: xr-mismatch.")
    several = (departure("ct-saturation", "disqualifies"), departure("residual-structure"))
    said = summary_of([fault.model_copy(update={"verdict": "departs", "departures": several})], "departs")
    assert said.endswith(": ct-saturation, residual-structure.")


def test_what_cannot_be_told_says_so(fault):
    unknown = Quantity.unknown("1")
    event = fault.model_copy(
        update={
            "verdict": "undetermined",
            "x_over_r": fault.x_over_r.model_copy(update={"from_decay": unknown}),
            "duration_s": None,
        }
    )
    said = summary_of([event], "undetermined")
    assert "Whether it follows RL theory cannot be told" in said
    assert "ms long" not in said
    assert "from the angle" in said  # the other route is left
    neither = event.model_copy(update={"x_over_r": event.x_over_r.model_copy(update={"from_angle": unknown})})
    assert "X/R" not in summary_of([neither], "undetermined")


def test_of_several_faults_the_largest_is_said(fault):
    phase = fault.phases["A"]
    larger = phase.model_copy(
        update={"symmetrical_rms_a": Quantity.of(phase.symmetrical_rms_a.value * 3, 1.0, "A")}
    )
    other = fault.model_copy(update={"phases": {"A": larger}})
    said = summary_of([fault, other], "follows-theory")
    assert "(the largest of 2 faults)" in said
    assert f"{larger.symmetrical_rms_a.value / 1e3:.3g} kA symmetrical" in said


def test_small_currents_are_in_amperes(fault):
    phase = fault.phases["A"].model_copy(update={"symmetrical_rms_a": Quantity.of(123.4, 1.0, "A")})
    assert "123 A symmetrical" in summary_of([fault.model_copy(update={"phases": {"A": phase}})], "departs")


@pytest.mark.parametrize(
    ("n", "verdict", "said"),
    [
        (0, "no-fault", "No fault."),
        (1, "no-fault", "No fault; 1 switching of load."),
        (3, "no-fault", "No fault; 3 switchings of load."),
        (1, "undetermined", "No fault is recognised; 1 change of current could not be classified."),
        (2, "undetermined", "No fault is recognised; 2 changes of current could not be classified."),
    ],
)
def test_records_without_a_fault(fault, n, verdict, said):
    kind = "switching" if verdict == "no-fault" else "unclassified"
    events = [fault.model_copy(update={"kind": kind, "fault_type": None})] * n
    assert summary_of(events, verdict) == said


def test_what_was_not_examined_says_why():
    said = summary_of([], "undetermined", terminal_reason="no three currents are recognised")
    assert said == "Not examined: no three currents are recognised."
