"""Which column holds the times, and the time base that it gives."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from analyzer.records.delimited.cells import is_other_instant, kind_of
from analyzer.records.delimited.columns import Columns
from analyzer.records.delimited.headings import time_divisor
from analyzer.records.delimited.table import Table, note
from analyzer.records.delimited.timing import (
    Fitted,
    Times,
    fit_timebase,
    guess_divisor,
    times_from_numbers,
    times_from_stamps,
)
from analyzer.records.moment import Moment
from analyzer.records.options import ReadOptions
from analyzer.records.problems import Problem, RecordError
from analyzer.records.text import printable
from analyzer.records.timebase import TimeBase

_RATE_AGREEMENT = 1e-3  # our choice
_COUNTER_NAMES = frozenset({"n", "no", "nr", "#", "sample", "samples", "index", "row", "point", "№", "序号"})


@dataclass(frozen=True, slots=True, kw_only=True)
class TimeColumn:
    """Where a row's time stands: one column, or a date and the time of day after it."""

    columns: tuple[int, ...]
    divisor: float | None = None
    problems: tuple[Problem, ...] = ()


def find_time(table: Table, options: ReadOptions) -> TimeColumn | None:
    """Return where the times stand, None if the rows are only counted.

    Raises
    ------
    RecordError
        If the stated column is not there (code ``no-such-column``), or there is none and no rate is stated
        either (``no-times``, ``time-stamps-not-read``).
    """
    if options.time_column is not None:
        return _stated_time(table, options.time_column)
    kinds, headings = table.layout.kinds, table.headings
    for k, (kind, heading) in enumerate(zip(kinds, headings, strict=True)):
        if kind in ("stamp", "clock"):
            columns: tuple[int, ...] = (k,)
        elif kind == "date" and kinds[k + 1 : k + 2] == ("clock",):
            columns = (k, k + 1)
        elif kind == "number" and (
            heading.time_divisor is not None or (heading.names_time and not heading.unit)
        ):
            columns = (k,)
        else:
            continue
        guess = note("time-column-guessed", f"times are taken from {table.called(k)}", "heading")
        return TimeColumn(columns=columns, divisor=heading.time_divisor, problems=(guess,))
    if options.sample_rate_hz is None and kinds[0] == "number" and headings[0].unit is None and _rises(table):
        message = f"{table.called(0)} rises steadily and is taken to hold the times"
        return TimeColumn(columns=(0,), problems=(note("time-column-guessed", message, "heading"),))
    if options.sample_rate_hz is None:
        _refuse_timeless(table)
    return None


def find_counter(table: Table) -> int | None:
    """Return the column that merely counts the rows, if there is one."""
    for k, heading in enumerate(table.headings):
        counts = table.layout.kinds[k] == "number" and heading.name.casefold().rstrip(".") in _COUNTER_NAMES
        if counts and heading.unit is None and _counts([row[k] for row in table.layout.sample]):
            return k
    return None


def _stated_time(table: Table, name: str) -> TimeColumn:
    kinds = table.layout.kinds
    known = [table.name(k) for k in range(table.layout.n_columns)]
    for k, heading in enumerate(table.headings):
        if name.strip() in (known[k], f"column {k + 1}", f"{heading.name} [{heading.unit}]"):
            pair = kinds[k] == "date" and kinds[k + 1 : k + 2] == ("clock",)
            return TimeColumn(columns=(k, k + 1) if pair else (k,), divisor=heading.time_divisor)
    shown = ", ".join(printable(column, limit=40) for column in known[:12])
    raise RecordError(
        "no-such-column",
        f"there is no column {name!r} for the times",
        path=table.path,
        hint=f"columns are: {shown}" + (" …" if len(known) > 12 else ""),
    )


def _rises(table: Table) -> bool:
    """Whether the first column rises from row to row and does not merely count them."""
    cells = [row[0] for row in table.layout.sample]
    numbers = [
        float(cell.replace(table.layout.decimal, "."))
        for cell in cells
        if kind_of(cell, table.layout.decimal) == "number"
    ]
    rising = len(numbers) > 2 and numbers[-1] > numbers[0] and bool(np.all(np.diff(numbers) >= 0))
    return rising and not _counts(cells)


def _counts(cells: Sequence[str]) -> bool:
    """Whether the cells are whole numbers, each one more than the one before."""
    if not all(cell.isdecimal() and len(cell) < 16 for cell in cells):
        return False
    return bool(np.all(np.diff([int(cell) for cell in cells]) == 1))


def _refuse_timeless(table: Table) -> None:
    for k, kind in enumerate(table.layout.kinds):
        if kind == "text" and any(is_other_instant(row[k]) for row in table.layout.sample):
            raise RecordError(
                "time-stamps-not-read",
                f"{table.called(k)} holds dates that are not in ISO 8601",
                path=table.path,
                line=table.first_line,
                hint="write them as 2024-05-01T12:00:00.000250, or state the sampling rate",
            )
    raise RecordError(
        "no-times",
        "no column holds times",
        path=table.path,
        line=table.first_line,
        hint="state the sampling rate, or which column holds the times",
    )


def build_timebase(
    table: Table, time: TimeColumn | None, columns: Columns, options: ReadOptions
) -> tuple[Fitted, Moment | None]:
    """Return the time base with the rows that it keeps, and the instant of the first row.

    Raises
    ------
    RecordError
        If the times cannot be used (codes ``time-unit-unknown``, ``time-stamps-not-read``,
        ``time-not-rising``, ``time-too-coarse``).
    """
    n_rows = next((values.size for values in columns.numbers.values()), 0)
    if time is None:
        assert options.sample_rate_hz is not None  # find_time has seen to that
        return _counted(options.sample_rate_hz, n_rows), None
    times, n_used = _cut(_printed_times(table, time, columns, options))
    problems = [*time.problems, *times.problems]
    if options.sample_rate_hz is not None:
        fitted = _counted(options.sample_rate_hz, n_used)
        problems += _compared(times.seconds, options)
    else:
        fitted = fit_timebase(times, path=table.path, first_line=table.first_line)
    first_s = float(times.seconds[0]) if n_used else 0.0
    if times.start is None and first_s and math.isfinite(first_s):
        message = f"times in the file begin at {first_s:.9g} s; they are counted from the first sample here"
        problems.append(note("times-from-first", message, "time column"))
    kept = None
    if fitted.kept is not None or n_used < n_rows:
        kept = np.zeros(n_rows, dtype=bool)
        kept[:n_used] = True if fitted.kept is None else fitted.kept
    problems += fitted.problems
    return Fitted(timebase=fitted.timebase, kept=kept, problems=tuple(problems)), times.start


def _counted(rate_hz: float, n: int) -> Fitted:
    return Fitted(timebase=TimeBase.from_rates([rate_hz], [n], n_samples=n), kept=None, problems=())


def _printed_times(table: Table, time: TimeColumn, columns: Columns, options: ReadOptions) -> Times:
    column = time.columns[0]
    if column in columns.texts:
        text = columns.texts[column]
        if len(time.columns) > 1:
            import pyarrow.compute as pc

            text = pc.binary_join_element_wise(text, columns.texts[time.columns[1]], "T")
        return times_from_stamps(text, path=table.path, first_line=table.first_line)
    values = columns.numbers[column]
    divisor = time_divisor(options.time_unit) if options.time_unit is not None else time.divisor
    if divisor is not None:
        return times_from_numbers(values, divisor)
    guess = guess_divisor(values)
    if guess is None:
        raise RecordError(
            "time-unit-unknown",
            f"{table.called(column)} holds times in a unit that is not given",
            path=table.path,
            line=table.first_line,
            hint="state the unit of the times: s, ms, us or ns",
        )
    unit, divisor = guess
    message = f"times are taken to be in {unit}, which makes the sampling rate a usual one"
    # A warning, unlike other guesses: when it is wrong, so is every time and every rate.
    problem = Problem(code="time-unit-guessed", message=message, where="time column", severity="warning")
    return replace(times_from_numbers(values, divisor), problems=(problem,))


def _cut(times: Times) -> tuple[Times, int]:
    """Return the times without those missing at the end, where the rows are padding, and their number."""
    present = np.flatnonzero(np.isfinite(times.seconds))
    n_used = int(present[-1]) + 1 if present.size else 0
    n_cut = times.seconds.size - n_used
    if not n_cut:
        return times, n_used
    message = f"{n_cut} row{'s' if n_cut > 1 else ''} without a time at the end left out"
    problems = (*times.problems, note("rows-after-end", message, "time column"))
    return replace(times, seconds=times.seconds[:n_used], problems=problems), n_used


def _compared(seconds: NDArray[np.float64], options: ReadOptions) -> list[Problem]:
    """Return the disagreement of the times in the file with the rate that was stated, if there is any."""
    finite = np.flatnonzero(np.isfinite(seconds))
    rate_hz = options.sample_rate_hz
    if rate_hz is None or finite.size < 2:
        return []
    span_s = seconds[finite[-1]] - seconds[finite[0]]
    expected_s = (finite[-1] - finite[0]) / rate_hz
    if abs(span_s - expected_s) <= _RATE_AGREEMENT * expected_s + 1 / rate_hz:
        return []
    message = f"the times in the file last {span_s:.6g} s, at the stated rate they would {expected_s:.6g} s"
    return [Problem(code="rate-disagrees", message=message, where="time column", severity="warning")]
