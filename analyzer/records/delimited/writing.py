"""A record as delimited text that reads back to the same numbers."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

from analyzer.records.channels import AnalogChannel, DigitalChannel
from analyzer.records.delimited.headings import written_heading
from analyzer.records.model import Record
from analyzer.records.output import Existing, input_files, written_beside

if TYPE_CHECKING:
    import pyarrow as pa

_SAMPLES_AT_A_TIME = 1 << 16
_SEPARATORS = (",", ";", "\t", "|")


def write_delimited(
    record: Record,
    path: Path,
    *,
    separator: str = ",",
    decimal: str = ".",
    existing: Existing = "refuse",
) -> Path:
    """Write the record as delimited text: a line of names with units, then a line for each sample.

    Values are in primary SI units, in as few digits as give back the same number; an empty cell is a missing
    sample. A channel whose unit or ratio is not known is written as it is in its file, under the unit that is
    written there, so that reading it back refuses it as well.

    Parameters
    ----------
    record : Record
    path : Path
        The output.
    separator : {",", ";", tab, "|"}
    decimal : {".", ","}
    existing : {"refuse", "replace"}
        What to do when there is such a file already.

    Returns
    -------
    Path
        `path`.

    Raises
    ------
    RecordError
        As :func:`analyzer.records.output.written_beside`.
    ValueError
        If `separator` or `decimal` is none of the choices, or both are the same.
    """
    if separator not in _SEPARATORS or decimal not in (".", ",") or separator == decimal:
        raise ValueError(f"cannot write with separator {separator!r} and decimal mark {decimal!r}")
    import pyarrow.csv as pa_csv

    heading = separator.join(_quoted(cell, separator) for cell in _headings(record))
    options = pa_csv.WriteOptions(include_header=False, delimiter=separator, quoting_style="none")
    beside = written_beside(path, existing=existing, inputs=input_files(record.origin))
    with beside as draft, draft.open("wb") as file:
        file.write(f"{heading}\n".encode(errors="replace"))
        for table in _tables(record, decimal):
            pa_csv.write_csv(table, file, options)
    return path


def written_name(channel: AnalogChannel | DigitalChannel) -> str:
    """Return the channel's name in the output: the one in its file, or its id where that is not unique."""
    return channel.name if channel.name.strip() == channel.id else channel.id


def written_unit(channel: AnalogChannel) -> str:
    """Return the unit of the channel's values in the output."""
    if channel.refusal is None:
        return channel.si_unit
    if channel.known_unit is None:
        return channel.unit
    # An ampere on the secondary side must not come back as one on the primary side.
    return f"{'secondary' if channel.ratio is None else 'unscaled'} {channel.unit}"


def _headings(record: Record) -> list[str]:
    analog = [written_heading(written_name(channel), written_unit(channel)) for channel in record.analog]
    digital = [written_heading(written_name(channel), None) for channel in record.digital]
    return ["time [s]", *analog, *digital]


def _quoted(cell: str, separator: str) -> str:
    needed = any(mark in cell for mark in (separator, '"', "\r", "\n"))
    return '"' + cell.replace('"', '""') + '"' if needed else cell


def _tables(record: Record, decimal: str) -> Iterator[pa.Table]:
    import pyarrow as pa
    import pyarrow.compute as pc

    usable = [channel.id for channel in record.analog if channel.refusal is None]
    refused = [channel.id for channel in record.analog if channel.refusal is not None]
    for first in range(record.first, record.first + record.n_samples, _SAMPLES_AT_A_TIME):
        stop = min(first + _SAMPLES_AT_A_TIME, record.first + record.n_samples)
        part = replace(record, first=first, stop=stop)
        # Plus zero, so that a negative zero is not printed as such.
        values = dict(zip(usable, part.signals(usable) + 0.0, strict=True))
        values |= dict(zip(refused, part.as_written(refused) + 0.0, strict=True))
        floats = [part.times(), *(values[channel.id] for channel in record.analog)]
        columns = [pa.array(column, from_pandas=True) for column in floats]  # not a number becomes empty
        if decimal == ",":
            columns = [pc.replace_substring(column.cast(pa.string()), ".", ",") for column in columns]
        columns += [pa.array(part.states(channel.id)) for channel in record.digital]
        yield pa.table(columns, names=[str(k) for k in range(len(columns))])
