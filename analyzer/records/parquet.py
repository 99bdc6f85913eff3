"""A record as Parquet: a column for each channel, its unit beside it."""

from __future__ import annotations

import json
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING

from analyzer.records.channels import unique_ids
from analyzer.records.model import Record
from analyzer.records.output import Existing, input_files, written_beside

if TYPE_CHECKING:
    import pyarrow as pa

_SAMPLES_AT_A_TIME = 1 << 18


def write_parquet(record: Record, path: Path, *, existing: Existing = "refuse") -> Path:
    """Write the record as Parquet.

    The first column, ``time_s``, counts from the record's first sample; analog channels are in primary SI
    units, null where a sample is missing; digital ones are boolean. Each column's metadata has its ``unit``,
    ``quantity``, ``name``, ``phase`` and ``circuit``; where unit or ratio are not known, the numbers are
    those of the file, and ``as_written`` is ``yes``. The schema's metadata has ``station``, ``device``,
    ``start`` and ``trigger`` (ISO 8601), ``trigger_s``, ``nominal_frequency_hz``, ``sample_rates_hz`` (JSON)
    and ``source``; what the record does not tell is left out.

    Parameters
    ----------
    record : Record
    path : Path
        The output.
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
    """
    import pyarrow.parquet as pq

    schema = _schema(record)
    beside = written_beside(path, existing=existing, inputs=input_files(record.origin))
    with beside as draft, pq.ParquetWriter(draft, schema) as writer:
        for table in _tables(record, schema):
            writer.write_table(table)
    return path


def _schema(record: Record) -> pa.Schema:
    import pyarrow as pa

    ids = ["time_s", *(channel.id for channel in record.analog), *(channel.id for channel in record.digital)]
    names = iter(unique_ids(ids, kind="analog"))
    fields = [pa.field(next(names), pa.float64(), metadata={"unit": "s", "quantity": "time"})]
    for channel in record.analog:
        told = {"name": channel.name, "phase": channel.phase, "circuit": channel.circuit}
        if channel.refusal is None:
            told |= {"unit": channel.si_unit, "quantity": channel.quantity or "other"}
        else:
            told |= {"unit": channel.unit, "as_written": "yes", "why": channel.refusal.code}
        fields.append(pa.field(next(names), pa.float64(), metadata=told))
    for digital in record.digital:
        told = {"name": digital.name, "phase": digital.phase, "circuit": digital.circuit, "quantity": "state"}
        fields.append(pa.field(next(names), pa.bool_(), metadata=told))
    return pa.schema(fields, metadata=_facts(record))


def _facts(record: Record) -> dict[str, str]:
    facts = {
        "station": record.station,
        "device": record.device,
        "start": record.start.isoformat() if record.start is not None else "",
        "trigger": record.trigger.isoformat() if record.trigger is not None else "",
        "trigger_s": "" if record.trigger_s is None else repr(record.trigger_s),
        "nominal_frequency_hz": ""
        if record.nominal_frequency_hz is None
        else repr(float(record.nominal_frequency_hz)),
        "sample_rates_hz": json.dumps(record.sample_rates_hz),
        "source": record.origin.path,
    }
    return {key: value for key, value in facts.items() if value}


def _tables(record: Record, schema: pa.Schema) -> Iterator[pa.Table]:
    import pyarrow as pa

    usable = [channel.id for channel in record.analog if channel.refusal is None]
    refused = [channel.id for channel in record.analog if channel.refusal is not None]
    for first in range(record.first, record.first + record.n_samples, _SAMPLES_AT_A_TIME):
        stop = min(first + _SAMPLES_AT_A_TIME, record.first + record.n_samples)
        part = replace(record, first=first, stop=stop)
        values = dict(zip(usable, part.signals(usable), strict=True))
        values |= dict(zip(refused, part.as_written(refused), strict=True))
        columns = [part.times(), *(values[channel.id] for channel in record.analog)]
        arrays = [pa.array(column, from_pandas=True) for column in columns]
        arrays += [pa.array(part.states(channel.id) != 0) for channel in record.digital]
        yield pa.Table.from_arrays(arrays, schema=schema)
