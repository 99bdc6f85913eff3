"""Columns of numbers into the channels of a record."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from analyzer.records.blobs import Blob
from analyzer.records.channels import AnalogChannel, DigitalChannel, unique_ids
from analyzer.records.delimited.columns import Columns
from analyzer.records.delimited.headings import STATE_UNIT
from analyzer.records.delimited.table import Table, note
from analyzer.records.delimited.timing import Fitted
from analyzer.records.model import Origin, Record
from analyzer.records.moment import Moment
from analyzer.records.options import ReadOptions
from analyzer.records.problems import Problem, gathered
from analyzer.records.sources import ArraySource
from analyzer.records.text import printable


def build_record(
    blob: Blob,
    table: Table,
    columns: Columns,
    fitted: Fitted,
    *,
    values: Sequence[int],
    start: Moment | None,
    options: ReadOptions,
) -> Record:
    """Return the record whose channels are the columns `values`, over the rows that `fitted` keeps."""
    kept = fitted.kept if fitted.kept is not None else slice(None)
    rows = {k: columns.numbers[k][kept] for k in values}
    is_state = {k: _is_state(table, k, rows[k], options) for k in values}
    analog_at = [k for k in values if not is_state[k]]
    digital_at = [k for k in values if is_state[k]]
    n = fitted.timebase.n_samples
    stored = np.empty((len(analog_at), n))
    for row, k in enumerate(analog_at):
        stored[row] = rows[k]
    states = np.empty((len(digital_at), n), dtype=np.uint8)
    n_filled = 0
    for row, k in enumerate(digital_at):
        n_filled += int(np.isnan(rows[k]).sum())
        states[row] = _held(rows[k])
    for array in (stored, states):
        array.setflags(write=False)
    names = {k: table.name(k) for k in values}
    ids = unique_ids((names[k] for k in analog_at), kind="analog")
    analog = tuple(
        AnalogChannel(number=j, id=ids[j], name=names[k], unit=_unit(table, k, ids[j], options))
        for j, k in enumerate(analog_at)
    )
    digital_ids = unique_ids((names[k] for k in digital_at), kind="digital")
    digital = tuple(
        DigitalChannel(number=j, id=digital_ids[j], name=names[k]) for j, k in enumerate(digital_at)
    )
    problems = [*table.problems, *fitted.problems, *columns.problems]
    guessed = [k for k in digital_at if table.headings[k].unit is None]
    if guessed:
        shown = ", ".join(printable(names[k], limit=30) for k in guessed[:8])
        more = f" and {len(guessed) - 8} more" if len(guessed) > 8 else ""
        message = f"taken as digital, since they hold only 0 and 1 and no unit: {shown}{more}"
        problems.append(note("digital-guessed", message, "heading"))
    if n_filled:
        message = f"{n_filled} missing states of digital channels are taken as the state before"
        problems.append(
            Problem(code="states-filled", message=message, where="digital channels", severity="warning")
        )
    return Record(
        origin=Origin(path=blob.shown, format="csv", data=blob, header_text=table.preamble),
        timebase=fitted.timebase,
        source=ArraySource(stored, states),
        analog=analog,
        digital=digital,
        nominal_frequency_hz=options.nominal_frequency_hz,
        start=start,
        problems=gathered(problems),
    )


def _unit(table: Table, column: int, channel_id: str, options: ReadOptions) -> str:
    return options.units.get(channel_id, table.headings[column].unit or "")


def _is_state(table: Table, column: int, values: NDArray[np.float64], options: ReadOptions) -> bool:
    heading = table.headings[column]
    written = column in table.layout.bits and heading.name and heading.unit is None
    if not (written or heading.unit == STATE_UNIT) or heading.name in options.units:
        return False
    missing = np.isnan(values)
    return bool(np.all((values == 0) | (values == 1) | missing)) and not missing.all()


def _held(values: NDArray[np.float64]) -> NDArray[np.uint8]:
    """Return states with each missing one replaced by the one before, the first ones by the one after."""
    present = np.isfinite(values)
    last = np.maximum.accumulate(np.where(present, np.arange(values.size), -1))
    last[last < 0] = int(np.argmax(present))
    return values[last].astype(np.uint8)
