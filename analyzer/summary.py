"""The sentence that a person reads first."""

from __future__ import annotations

from collections.abc import Sequence

from analyzer.findings import Event, Quantity, RecordVerdict

_VERDICTS: dict[str, str] = {
    "follows-theory": "It follows RL theory.",
    "departs": "It departs from RL theory",
    "undetermined": "Whether it follows RL theory cannot be told",
}


def summary_of(events: Sequence[Event], verdict: RecordVerdict, *, terminal_reason: str = "") -> str:
    """Return one sentence or two on what a record shows.

    Parameters
    ----------
    events : sequence of Event
    verdict : str
        The record's.
    terminal_reason : str
        Why no terminal was found; empty where one was.
    """
    if terminal_reason:
        return f"Not examined: {terminal_reason}."
    faults = [event for event in events if event.kind == "fault"]
    if not faults:
        plural = "s" if len(events) > 1 else ""
        if verdict != "no-fault":
            return f"No fault is recognised; {len(events)} change{plural} of current could not be classified."
        return f"No fault; {_without_fault(events)}." if events else "No fault."
    worst = max(faults, key=lambda event: _largest(event, "symmetrical_rms_a"))
    more = f" (the largest of {len(faults)} faults)" if len(faults) > 1 else ""
    parts = [f"{worst.fault_type} fault at {worst.inception.time_s.value:.4f} s{more}"]
    if worst.duration_s is not None and worst.duration_s.value is not None:
        parts.append(f"{worst.duration_s.value * 1e3:.0f} ms long")
    if worst.phases:
        parts.append(f"{_engineering(_largest(worst, 'symmetrical_rms_a'), 'A')} symmetrical")
        peak = max(phase.peak.model_a.value or 0.0 for phase in worst.phases.values())
        if peak > 0:
            parts.append(f"peak {_engineering(peak, 'A')}")
    parts.append(_x_over_r(worst))
    return ", ".join(part for part in parts if part) + ". " + _verdict_sentence(faults, verdict)


def _without_fault(events: Sequence[Event]) -> str:
    counts = {kind: sum(event.kind == kind for event in events) for kind in ("energisation", "switching")}
    parts = [f"{n} {kind}{'s' if n > 1 else ''}" for kind, n in counts.items() if n]
    return " and ".join(parts) + (" of load" if counts["switching"] and not counts["energisation"] else "")


def _verdict_sentence(faults: Sequence[Event], verdict: RecordVerdict) -> str:
    departures = (d for event in faults for d in event.departures if d.severity != "note")
    codes = ", ".join(dict.fromkeys(d.code for d in departures))
    ending = {
        "follows-theory": "",
        "departs": f": {codes}." if codes else ".",
        "undetermined": ": no decay could be determined.",
    }
    return _VERDICTS[verdict] + ending[verdict]


def _largest(event: Event, name: str) -> float:
    values = [getattr(phase, name).value for phase in event.phases.values()]
    return max((value for value in values if value is not None), default=0.0)


def _x_over_r(event: Event) -> str:
    routes: tuple[tuple[Quantity, str], ...] = (
        (event.x_over_r.from_decay, "from the decay"),
        (event.x_over_r.from_angle, "from the angle"),
    )
    for quantity, words in routes:
        if quantity.value is not None:
            span = f" ({quantity.low:.3g} to {quantity.high:.3g})" if quantity.low and quantity.high else ""
            return f"X/R {quantity.value:.3g}{span} {words}"
    return ""


def _engineering(value: float, unit: str) -> str:
    return f"{value / 1e3:.3g} k{unit}" if abs(value) >= 1e3 else f"{value:.3g} {unit}"
