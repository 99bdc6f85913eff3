"""Findings on a terminal, 80 columns wide if need be."""

from __future__ import annotations

from collections.abc import Iterator

from rich.console import Console
from rich.table import Table
from rich.text import Text

from analyzer.cli.figures import NOT_DETERMINED, engineering, plain_number, with_interval
from analyzer.cli.messages import safe
from analyzer.cli.tables import plain_table, show_problems, show_titled
from analyzer.findings import Comparison, DepartureInfo, Event, Findings, Impedance, Quantity

_CAUTION = (
    "An aid to engineering judgement: settings, ratings and switching decisions follow local codes and "
    "licensed practice."
)
_VERDICTS = {
    "follows-theory": "follows theory",
    "departs": "departs from theory",
    "undetermined": "undetermined",
    "no-fault": "no fault",
}
_TIME_OF = {
    "switching": "Load or an element was switched",
    "energisation": "An element was energised",
    "unclassified": "The current changes in a way that is not told from these channels",
}
Row = tuple[str, str, str]


def show_findings(findings: Findings, screen: Console) -> None:
    """Print what was found in one record."""
    screen.print(safe(findings.record.path or "record in memory", style="bold"), overflow="fold")
    screen.print(safe(findings.summary, limit=1000), overflow="fold")
    for number, event in enumerate(findings.events, start=1):
        screen.print()
        screen.print(_title(number, event))
        if event.kind != "fault":  # only its time is known
            screen.print(Text(f"{_TIME_OF[event.kind]}, {' '.join(_when(event)).strip()}"))
            continue
        screen.print(_quantities(event))
        if event.comparison:
            show_titled("Compared with theory", _comparisons(event.comparison), screen)
        if event.departures:
            show_titled("Departures from a single RL circuit", _departures(event.departures), screen)
    warnings = [p.model_dump() for p in findings.record.problems if p.severity == "warning"]
    if warnings:
        show_problems(warnings, findings.record.path, screen)
    screen.print()


def show_caution(screen: Console) -> None:
    """Print what the findings are for, and what they are not."""
    screen.print(Text(_CAUTION, style="italic"))


def _title(number: int, event: Event) -> Text:
    what = f"{event.fault_type} {event.kind}" if event.fault_type else event.kind
    text = Text(f"Event {number}: {what}", style="bold")
    if event.kind == "fault":
        known = event.direction != "undetermined"
        text.append(f", {event.direction if known else 'direction undetermined'}")
    text.append(", terminal ").append_text(safe(event.terminal or "without a name", limit=40))
    return text.append(f", {_VERDICTS[event.verdict]}")


def _quantities(event: Event) -> Table:
    table = plain_table()
    table.add_column("quantity", overflow="fold")
    table.add_column("value", justify="right", no_wrap=True)
    table.add_column("95 % interval", justify="right", overflow="fold")
    for row in _rows(event):
        table.add_row(*(Text(cell) for cell in row))
    return table


def _when(event: Event) -> tuple[str, str]:
    value, interval = with_interval(event.inception.time_s)
    return value, f"({interval})" if interval else ""


def _row(label: str, quantity: Quantity) -> Row:
    return (label, *with_interval(quantity))


def _rows(event: Event) -> Iterator[Row]:
    inception = event.inception
    yield _row("Inception, after the first sample", inception.time_s)
    loop = f", {inception.reference} voltage" if inception.reference else ""
    yield _row(f"Point on wave{loop}", inception.voltage_angle_deg)
    if event.duration_s is not None:
        yield _row("Duration", event.duration_s)
    if event.clearing is not None:
        yield _row("Cleared", event.clearing.time_s)
    for phase, found in sorted(event.phases.items()):
        yield _row(f"Phase {phase}: symmetrical current, RMS", found.symmetrical_rms_a)
        yield _row(f"Phase {phase}: offset at inception", found.dc_initial_a)
        peak = found.peak
        if peak.measured_a is not None:
            yield (f"Phase {phase}: largest peak, measured", engineering(peak.measured_a, "A"), "")
        yield _row(f"Phase {phase}: largest peak, of the model", peak.model_a)
        yield _row(f"Phase {phase}: peak over symmetrical peak", peak.ratio)
        yield _row(f"Phase {phase}: peak at the worst point on wave", peak.worst_case_a)
    for decay in event.decay:
        yield _row(f"Time constant, loop {decay.loop}", decay.time_constant_s)
    routes = event.x_over_r
    yield _row("X/R from the decay", routes.from_decay)
    yield _row("X/R from the angle", routes.from_angle)
    yield _row("X/R from the waveform", routes.from_waveform)
    yield _row("X/R combined", routes.combined)
    source = event.impedance.source
    for name, impedance in (("Z1", source.z1), ("Z2", source.z2), ("Z0", source.z0)):
        yield from _impedance_rows(f"Source {name}", impedance)
    for name, beyond in (
        ("Faulted loop", event.impedance.faulted_loop),
        ("Terminal to fault", event.impedance.faulted),
        ("Total", event.impedance.total),
    ):
        if beyond is not None:
            yield from _impedance_rows(name, beyond)


def _impedance_rows(name: str, impedance: Impedance) -> Iterator[Row]:
    if impedance.magnitude_ohm.value is None and impedance.x_ohm.value is None:
        yield (name, NOT_DETERMINED, "")
        return
    yield _row(f"{name}: magnitude", impedance.magnitude_ohm)
    yield _row(f"{name}: angle", impedance.angle_deg)


def _comparisons(comparisons: tuple[Comparison, ...]) -> Table:
    table = plain_table()
    table.add_column("check", overflow="fold", ratio=2)
    table.add_column("measured", justify="right", overflow="fold")
    table.add_column("theory", justify="right", overflow="fold")
    table.add_column("sigmas", justify="right", no_wrap=True)
    table.add_column("verdict", no_wrap=True)
    for one in comparisons:
        sigmas = "" if one.in_sigmas is None else plain_number(one.in_sigmas, 1)
        measured, theory = (with_interval(quantity)[0] for quantity in (one.measured, one.theory))
        table.add_row(safe(one.check), Text(measured), Text(theory), Text(sigmas), _marked(one.verdict))
    return table


def _marked(verdict: str) -> Text:
    return Text(verdict, style="bold" if verdict == "departs" else "")


def _departures(departures: tuple[DepartureInfo, ...]) -> Table:
    table = plain_table()
    table.add_column("departure", no_wrap=True)
    table.add_column("severity", no_wrap=True)
    table.add_column("what the record shows", overflow="fold")
    for one in departures:
        table.add_row(Text(one.code), Text(one.severity), safe(one.says, limit=500))
    return table
