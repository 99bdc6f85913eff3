"""One record, from its samples to its findings."""

from __future__ import annotations

import time
from dataclasses import replace

from analyzer.assemble import event_findings
from analyzer.estimate.event import Estimate, estimate_fault
from analyzer.findings import ClockInfo, Findings, ProblemInfo, RecordInfo, TerminalInfo, worst_verdict
from analyzer.records import Problem, Record
from analyzer.site import Site
from analyzer.summary import summary_of
from analyzer.terminals import Terminal
from analyzer.terminals.by_site import stated_record, terminals_of
from analyzer.waveform.events import Event, find_events, following_fault
from analyzer.waveform.frequency import power_frequency
from analyzer.waveform.stretches import usable_stretches


def examine(record: Record, *, site: Site | None = None) -> Findings:
    """Find the faults in a record, fit RL theory to them, and say whether they agree.

    Parameters
    ----------
    record : Record
    site : Site, optional
        What the owner states; it goes before what the record and its channels' names say.

    Returns
    -------
    Findings
        With no events where nothing happened, or where no terminal was recognised; the problems then say
        which.

    Raises
    ------
    SiteError
        If the site file does not fit the record.
    """
    started = time.perf_counter()
    stated: tuple[Problem, ...] = ()
    if site is not None:
        record, stated = stated_record(record, site)
    record = record.survey()
    assigned = terminals_of(record, site)
    terminals, reason = assigned.terminals, assigned.reason
    events, problems = [], [*record.problems, *stated, *assigned.problems]
    if not terminals:
        problems.append(Problem(code="no-terminal", severity="warning", message=reason))
    for terminal in terminals:
        frequency_hz, doubts = power_frequency(record, terminal)
        stretches, left_out = usable_stretches(record, frequency_hz=frequency_hz)
        problems += [problem for problem in (*doubts, *left_out) if problem not in problems]
        for found in find_events(record, terminal, stretches, nominal_hz=frequency_hz):
            event: Event | None = found
            while event is not None:
                estimate = _estimate(event, terminal)
                events.append(event_findings(event, estimate, terminal, nominal_frequency_hz=frequency_hz))
                changed = estimate.changed if estimate is not None else None
                event = following_fault(event, changed) if changed is not None else None
    events.sort(key=lambda event: event.inception.time_s.value or 0.0)
    verdict = worst_verdict(events) if terminals else "undetermined"
    return Findings(
        record=_record_info(replace(record, problems=tuple(problems)), site),
        terminals=tuple(_terminal_info(terminal) for terminal in terminals),
        events=tuple(events),
        verdict=verdict,
        summary=summary_of(events, verdict, terminal_reason="" if terminals else reason),
        elapsed_ms=(time.perf_counter() - started) * 1e3,
    )


def _estimate(event: Event, terminal: Terminal) -> Estimate | None:
    if event.fault_type is None:
        return None
    return estimate_fault(
        event,
        event.fault_type,
        k0=terminal.stated.line.k0 if terminal.stated is not None else None,
        zero_sequence_voltage="known" if terminal.voltages_have_zero_sequence else "unknown",
    )


def _terminal_info(terminal: Terminal) -> TerminalInfo:
    return TerminalInfo(
        name=terminal.name, channels=terminal.channels, how=terminal.how, confidence=terminal.confidence
    )


def _record_info(record: Record, site: Site | None) -> RecordInfo:
    clock = record.clock
    quality = clock.quality
    if clock.quality_code is None and site is not None and site.clock.stated_error_s is not None:
        quality = f"within {site.clock.stated_error_s:g} s, as the site file states"
    return RecordInfo(
        path=record.origin.path,
        sha256=record.origin.sha256(),
        format=record.origin.format,
        revision=record.origin.revision,  # type: ignore[arg-type]  # checked by the model
        encoding=record.origin.encoding,  # type: ignore[arg-type]
        station=record.station,
        device=record.device,
        start_time=record.start.isoformat() if record.start else None,
        trigger_time=record.trigger.isoformat() if record.trigger else None,
        clock=ClockInfo(
            quality=quality,
            time_code=clock.time_code,
            local_code=clock.local_code,
            leap_second=clock.leap_second,
        ),
        nominal_frequency_hz=record.nominal_frequency_hz,
        sample_rates_hz=record.sample_rates_hz,
        n_samples=record.n_samples,
        duration_s=record.duration_s,
        n_analog=len(record.analog),
        n_digital=len(record.digital),
        problems=tuple(
            ProblemInfo(code=p.code, severity=p.severity, message=p.message, where=p.where)
            for p in record.problems
        ),
    )
