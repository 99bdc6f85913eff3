"""``faultassay convert``: a record from one open format to another."""

from __future__ import annotations

import math
from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Literal, cast

import typer

from analyzer.cli.exits import UNREADABLE
from analyzer.cli.messages import say_error
from analyzer.cli.reading import (
    Decimal,
    NominalFrequency,
    SampleRate,
    Separator,
    TextEncoding,
    TimeColumn,
    TimeUnitOption,
    UnitOfChannel,
    read_options,
    wrong,
)
from analyzer.errors import FaultassayError

if TYPE_CHECKING:
    from analyzer.records.model import Record

CONVERT_EXAMPLES = """\
\b
Examples
  faultassay convert trip_0412.cfg trip_0412.csv
  faultassay convert old.cfg new.cff --encoding float32
  faultassay convert long.cfg cut.cfg --channels IA,IB --from 0.9 --until 1.4
"""


class Kind(StrEnum):
    """What can be written."""

    COMTRADE = "comtrade"
    CSV = "csv"
    PARQUET = "parquet"


class RevisionChoice(StrEnum):
    """Revisions of COMTRADE."""

    R1991 = "1991"
    R1999 = "1999"
    R2013 = "2013"


class EncodingChoice(StrEnum):
    """Encodings of COMTRADE data."""

    ASCII = "ascii"
    BINARY = "binary"
    BINARY32 = "binary32"
    FLOAT32 = "float32"


class ExistingChoice(StrEnum):
    """What to do about a file that is there already."""

    REFUSE = "refuse"
    REPLACE = "replace"


_KINDS = {
    ".cfg": Kind.COMTRADE,
    ".cff": Kind.COMTRADE,
    ".csv": Kind.CSV,
    ".tsv": Kind.CSV,
    ".parquet": Kind.PARQUET,
}


def convert(
    source: Annotated[str, typer.Argument(metavar="SOURCE", help="The record.", show_default=False)],
    target: Annotated[
        str,
        typer.Argument(
            metavar="TARGET",
            help="File to write: .cfg or .cff (COMTRADE), .csv or .tsv (text), .parquet.",
            show_default=False,
        ),
    ],
    to: Annotated[
        Kind | None, typer.Option("--to", help="What to write, where the name of TARGET does not tell.")
    ] = None,
    revision: Annotated[
        RevisionChoice | None, typer.Option(help="Revision of COMTRADE; 2013 when left out.")
    ] = None,
    encoding: Annotated[
        EncodingChoice | None,
        typer.Option(
            help="Encoding of the COMTRADE data; float32 when left out, binary for revisions before 2013."
        ),
    ] = None,
    channels: Annotated[
        str | None,
        typer.Option(metavar="A,B,...", help="Analog channels to keep, in this order; all when left out."),
    ] = None,
    start_s: Annotated[
        float | None,
        typer.Option("--from", metavar="SECONDS", help="Start of the part to keep, after the first sample."),
    ] = None,
    end_s: Annotated[
        float | None, typer.Option("--until", metavar="SECONDS", help="End of the part to keep, included.")
    ] = None,
    existing: Annotated[
        ExistingChoice, typer.Option(help="What to do about files of that name that are there.")
    ] = ExistingChoice.REFUSE,
    text_encoding: TextEncoding = None,
    unit: UnitOfChannel = None,
    nominal_frequency: NominalFrequency = None,
    sample_rate: SampleRate = None,
    separator: Separator = None,
    decimal: Decimal = None,
    time_column: TimeColumn = None,
    time_unit: TimeUnitOption = None,
) -> None:
    """Write a record, or a part of it, in another open format.

    The source is never written over. Text and Parquet hold primary values in V and A; COMTRADE keeps the
    numbers and the scaling of the source where the encoding can hold them.
    """
    options = read_options(
        text_encoding=text_encoding,
        unit=unit,
        nominal_frequency=nominal_frequency,
        sample_rate=sample_rate,
        separator=separator,
        decimal=decimal,
        time_column=time_column,
        time_unit=time_unit,
    )
    path = Path(target)
    kind = to or _KINDS.get(path.suffix.lower())
    if kind is None:
        raise wrong("TARGET", f"{path.suffix or target!r} tells no format; say it with --to")
    if kind is not Kind.COMTRADE and (revision is not None or encoding is not None):
        raise wrong("--revision/--encoding", f"are for COMTRADE, not for {kind.value}")
    for option, seconds in (("--from", start_s), ("--until", end_s)):
        if seconds is not None and not math.isfinite(seconds):
            raise wrong(option, "must be a number of seconds")

    from analyzer.records.registry import read

    try:
        record = read(source, options=options)
    except FaultassayError as error:
        say_error(str(error))
        raise typer.Exit(UNREADABLE) from None
    record = _part(record, channels=channels, start_s=start_s, end_s=end_s)
    written = _write(record, path, kind=kind, revision=revision, encoding=encoding, existing=existing.value)
    typer.echo(f"wrote {', '.join(str(file) for file in written)}")


def _part(record: Record, *, channels: str | None, start_s: float | None, end_s: float | None) -> Record:
    if channels is not None:
        names = _channel_names(channels)
        if not names:
            raise wrong("--channels", "names no channel")
        record = record.select(names)
    if start_s is not None or end_s is not None:
        record = record.between(
            start_s if start_s is not None else 0.0, end_s if end_s is not None else record.duration_s
        )
        if record.n_samples == 0:
            raise wrong("--from/--until", "leave no sample")
    return record


def _channel_names(text: str) -> list[str]:
    """Names are separated by commas; one that holds a comma itself is put in quotation marks."""
    import csv

    return [name.strip() for name in next(csv.reader([text], skipinitialspace=True), []) if name.strip()]


def _write(
    record: Record,
    path: Path,
    *,
    kind: Kind,
    revision: RevisionChoice | None,
    encoding: EncodingChoice | None,
    existing: Literal["refuse", "replace"],
) -> tuple[Path, ...]:
    if kind is Kind.COMTRADE:
        from analyzer.records.comtrade import write_comtrade

        year = cast("Literal[1991, 1999, 2013]", int(revision.value) if revision else 2013)
        if encoding is None:
            encoding = EncodingChoice.FLOAT32 if year == 2013 else EncodingChoice.BINARY
        return write_comtrade(record, path, revision=year, encoding=encoding.value, existing=existing)
    if kind is Kind.CSV:
        from analyzer.records.delimited import write_delimited

        separator = "\t" if path.suffix.lower() == ".tsv" else ","
        return (write_delimited(record, path, separator=separator, existing=existing),)
    from analyzer.records.parquet import write_parquet

    return (write_parquet(record, path, existing=existing),)
