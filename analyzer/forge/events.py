"""The events of a solved record: which happenings belong together, from when to when."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Literal

from analyzer.forge.schedule import Fault
from analyzer.forge.solution import Solution
from analyzer.forge.story import Mark

EventKind = Literal["fault", "energisation", "switching"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Span:
    """One event in time.

    Parameters
    ----------
    kind : {'fault', 'energisation', 'switching'}
        What it is.
    start_s, stop_s : float
        From its first instant to where its currents end: the last faulted pole's opening, or the next event,
        or the record's end. [s]
    ended : bool
        Whether the fault was interrupted within the record.
    fault : Fault or None
        As it began.
    opened_s : tuple of three float or None
        Opening of the phases that were interrupted, the last one where there were several. [s]
    marks : tuple of Mark
        All that happened within it.
    """

    kind: EventKind
    start_s: float
    stop_s: float
    ended: bool = False
    fault: Fault | None = None
    opened_s: tuple[float | None, float | None, float | None] = (None, None, None)
    marks: tuple[Mark, ...] = ()


@dataclass(slots=True)
class _Reader:
    breaker: str
    poles_open: set[int]
    legs_open: set[int] = field(default_factory=lambda: {0, 1, 2})
    fault: Fault | None = None
    spans: list[Span] = field(default_factory=list)

    def burning(self) -> bool:
        return self.fault is not None and any(
            p not in self.poles_open and p not in self.legs_open for p in self.fault.phases
        )

    def current(self) -> Span | None:
        span = self.spans[-1] if self.spans else None
        return span if span is not None and span.kind == "fault" and not span.ended else None

    def begin(self, kind: EventKind, mark: Mark) -> None:
        fault = self.fault if kind == "fault" else None
        self.spans.append(
            Span(kind=kind, start_s=mark.time_s, stop_s=mark.time_s, fault=fault, marks=(mark,))
        )

    def extend(self, mark: Mark) -> None:
        if self.spans:
            span = self.spans[-1]
            self.spans[-1] = replace(span, marks=(*span.marks, mark))

    def read(self, mark: Mark) -> None:
        if mark.what in ("start", "change"):
            assert mark.fault is not None
            self.fault = mark.fault
            self.legs_open -= set(mark.fault.phases)
            self._kindle(mark)
        elif mark.where == self.breaker and mark.what in ("closed", "restruck"):
            dead = len(self.poles_open) == 3
            self.poles_open.discard(mark.phase if mark.phase is not None else -1)
            if self.burning():
                self._kindle(mark)
            elif self.spans and (self.spans[-1].start_s == mark.time_s or self._follows_fault(mark)):
                self.extend(mark)
            else:
                self.begin("energisation" if dead else "switching", mark)
        elif mark.where in (self.breaker, "fault"):
            self._interrupt(mark)
        elif mark.where == "remote" and self.breaker == "line" and len(self.poles_open) == 3:
            return  # what happens beyond an open line does not reach the recorder
        elif mark.what == "connected" and self.current() is None:
            self.begin("energisation" if mark.where == "transformer" else "switching", mark)
        elif self.current() is not None or self._same_order(mark):
            self.extend(mark)
        else:
            self.begin("switching", mark)

    def _same_order(self, mark: Mark) -> bool:
        # The three poles of one order interrupt one after the other.
        last = self.spans[-1].marks[-1] if self.spans else None
        return last is not None and (last.where, last.what) == (mark.where, mark.what)

    def _follows_fault(self, mark: Mark) -> bool:
        return mark.what == "restruck" and self.spans[-1].kind == "fault"

    def _kindle(self, mark: Mark) -> None:
        # A restrike belongs to the fault it follows; a closing onto a standing fault is an event of its own.
        span = self.spans[-1] if self.spans else None
        if span is not None and span.kind == "fault" and (not span.ended or mark.what == "restruck"):
            self.spans[-1] = replace(span, ended=False, marks=(*span.marks, mark))
        elif span is not None and span.start_s == mark.time_s and self.burning():
            self.spans[-1] = replace(span, kind="fault", fault=self.fault, marks=(*span.marks, mark))
        elif self.burning():
            self.begin("fault", mark)

    def _interrupt(self, mark: Mark) -> None:
        group = self.legs_open if mark.where == "fault" else self.poles_open
        if mark.phase is not None:
            group.add(mark.phase)
        span = self.spans[-1] if self.spans else None
        if span is None or span.kind != "fault":
            if self._same_order(mark):
                self.extend(mark)
            elif mark.where != "fault":
                self.begin("switching", mark)
            return
        opened = list(span.opened_s)
        if mark.phase is not None and mark.phase < 3:
            opened[mark.phase] = mark.time_s
        # Sound poles may open after the last faulted one, where the fault has ended already.
        ended = span.ended or not self.burning()
        self.spans[-1] = replace(
            span,
            marks=(*span.marks, mark),
            opened_s=(opened[0], opened[1], opened[2]),
            ended=ended,
            stop_s=mark.time_s if ended and not span.ended else span.stop_s,
        )


def read_events(solution: Solution) -> tuple[Span, ...]:
    """Return the events of a solution, in order of time.

    Parameters
    ----------
    solution : Solution
        The solved record.

    Returns
    -------
    tuple of Span
        A fault that stands on an open line is no event before a pole closes onto it.
    """
    fault = solution.schedule.fault
    breaker = "adjacent" if fault is not None and fault.side == "behind" else "line"
    poles = solution.circuit.poles[breaker].tolist()
    opened = {poles.index(b) for b in solution.stretches[0].space.open_branches if b in poles}
    reader = _Reader(breaker=breaker, poles_open=opened)
    for mark in solution.marks:
        reader.read(mark)
    spans = []
    for k, span in enumerate(reader.spans):
        following = reader.spans[k + 1].start_s if k + 1 < len(reader.spans) else solution.duration_s
        whole = span if span.ended else replace(span, stop_s=following)
        # Poles that close without a path and open at once carried nothing.
        if whole.stop_s > whole.start_s:
            spans.append(whole)
    return tuple(spans)
