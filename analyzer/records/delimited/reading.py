"""Delimited text to a record: what the file does not state is guessed, and every guess is listed."""

from __future__ import annotations

import math
from dataclasses import replace

from analyzer.records.blobs import Blob
from analyzer.records.delimited.assembly import build_record
from analyzer.records.delimited.columns import read_columns
from analyzer.records.delimited.headings import time_divisor
from analyzer.records.delimited.layout import Layout, find_layout
from analyzer.records.delimited.opening import open_text
from analyzer.records.delimited.table import Table, describe_table, note
from analyzer.records.delimited.timecolumn import build_timebase, find_counter, find_time
from analyzer.records.model import Record
from analyzer.records.options import ReadOptions
from analyzer.records.problems import Problem, RecordError

_SUFFIXES = (".csv", ".tsv", ".txt", ".tab", ".asc", ".prn")
_SNIFFED_ROWS = 3


def sniff_delimited(head: bytes, name: str) -> bool:
    """Whether the first bytes of a file look like a table of delimited numbers; never raises.

    Parameters
    ----------
    head : bytes
        The first bytes, 4 kB or more where the file has them.
    name : str
        File name.
    """
    if not name.lower().endswith(_SUFFIXES):
        return False
    try:
        opened = open_text(Blob(name=name, shown=name, data=head), encoding=None)
    except RecordError:
        return False
    lines = opened.shown()
    found = find_layout(lines[:-1] if len(lines) > _SNIFFED_ROWS + 1 else lines, separator=opened.separator)
    if not isinstance(found, Layout):
        return found in ("ambiguous-decimal", "thousands-marks")
    return found.n_columns > 1 and found.n_rows >= _SNIFFED_ROWS


def read_delimited(blob: Blob, *, options: ReadOptions) -> Record:
    """Return the record in a file of delimited text.

    Parameters
    ----------
    blob : Blob
        The file.
    options : ReadOptions
        What is stated about it; everything stated goes before what would be guessed.

    Returns
    -------
    Record
        Every guess is among its problems, as a note; that of the unit of time as a warning.

    Raises
    ------
    RecordError
        If the file is no table of numbers with times. Codes: ``empty-file``, ``not-text``, ``not-a-table``,
        ``no-rows``, ``line-too-long``, ``too-many-columns``, ``ambiguous-decimal``, ``thousands-marks``,
        ``broken-table``, ``no-times``, ``no-such-column``, ``time-unit-unknown``, ``time-stamps-not-read``,
        ``time-not-rising``, ``time-too-coarse``, ``unknown-encoding``, ``unreadable-file``.
    ValueError
        If an option has no meaning, such as a separator of two characters.
    """
    _check(options)
    table = describe_table(blob, options)
    time = find_time(table, options)
    time_columns = time.columns if time is not None else ()
    kinds = table.layout.kinds
    empty = [k for k, kind in enumerate(kinds) if kind == "missing" and table.headings[k].name]
    numeric = sorted({*(k for k, kind in enumerate(kinds) if kind == "number"), *empty})
    counter = find_counter(table)
    values = [k for k in numeric if k not in time_columns and k != counter]
    if not values:
        raise _no_rows(table, "there is no column of values beside the times")
    columns = read_columns(
        table.body,
        table.layout,
        numeric=numeric,
        textual=[k for k in time_columns if k not in numeric],
        time_columns=time_columns,
    )
    fitted, start = build_timebase(table, time, columns, options)
    if fitted.timebase.n_samples < 2:
        raise _no_rows(table, "there are no two samples")
    record = build_record(blob, table, columns, fitted, values=values, start=start, options=options)
    return replace(record, problems=(*record.problems, *_unused(table, {*values, *time_columns})))


def _check(options: ReadOptions) -> None:
    mark = options.separator
    if mark is not None and (len(mark) != 1 or not mark.isascii() or mark.isalnum() or mark in '"\r\n.+-#'):
        raise ValueError(f"separator must be one mark, not {options.separator!r}")
    if options.decimal not in (None, ".", ","):
        raise ValueError(f"decimal must be '.' or ',', not {options.decimal!r}")
    if options.time_unit is not None and time_divisor(options.time_unit) is None:
        raise ValueError(f"time_unit must be s, ms, us or ns, not {options.time_unit!r}")
    rate_hz = options.sample_rate_hz
    if rate_hz is not None and not 0 < rate_hz < math.inf:
        raise ValueError(f"sample_rate_hz must be positive, not {rate_hz!r}")


def _no_rows(table: Table, message: str) -> RecordError:
    hint = "check that the file is whole"
    return RecordError("no-rows", message, path=table.path, line=table.first_line, hint=hint)


def _unused(table: Table, used: set[int]) -> list[Problem]:
    """Return the notes on columns that became no channel; those without a name and cells are nothing."""
    return [
        note("column-not-used", "holds no numbers of its own", table.called(k))
        for k, kind in enumerate(table.layout.kinds)
        if k not in used and (kind != "missing" or table.headings[k].name)
    ]
