"""From the command line's paths and reading options to records; shared by the commands."""

from __future__ import annotations

import codecs
import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from analyzer.errors import FaultassayError

if TYPE_CHECKING:
    from analyzer.records.model import Record
    from analyzer.records.options import ReadOptions
    from analyzer.records.registry import Found

_PANEL = "Statements that go before what the file says"


class TimeUnit(StrEnum):
    """Units of a time column."""

    S = "s"
    MS = "ms"
    US = "us"
    NS = "ns"


Paths = Annotated[
    list[str],
    typer.Argument(
        metavar="PATH",
        help="A file of a record, the name its files share, a folder, a .zip, or archive.zip!member.",
        show_default=False,
    ),
]
TextEncoding = Annotated[
    str | None,
    typer.Option(metavar="NAME", help="Code page of station and channel names, such as gbk or cp1252."),
]
UnitOfChannel = Annotated[
    list[str] | None,
    typer.Option(
        "--unit", metavar="CHANNEL=UNIT", help="Unit of a channel, such as IA=kA. May be given again."
    ),
]
NominalFrequency = Annotated[float | None, typer.Option(metavar="HZ", help="Nominal power frequency.")]
SampleRate = Annotated[
    float | None,
    typer.Option(metavar="HZ", help="Sampling rate of delimited text without a time column."),
]
Separator = Annotated[
    str | None, typer.Option(metavar="CHAR", help=r"Field separator of delimited text; \t for a tab.")
]
Decimal = Annotated[str | None, typer.Option(metavar="CHAR", help="Decimal mark of delimited text.")]
TimeColumn = Annotated[
    str | None, typer.Option(metavar="NAME", help="Heading of the time column of delimited text.")
]
TimeUnitOption = Annotated[
    TimeUnit | None, typer.Option("--time-unit", help="Unit of that column.", show_choices=True)
]
JsonTarget = Annotated[
    str | None,
    typer.Option(
        "--json",
        metavar="FILE",
        help="Also write a JSON document: one object for one record, an array for several. "
        "- is standard output, which then carries nothing else.",
    ),
]


def read_options(
    *,
    text_encoding: str | None,
    unit: Sequence[str] | None,
    nominal_frequency: float | None,
    sample_rate: float | None,
    separator: str | None,
    decimal: str | None,
    time_column: str | None,
    time_unit: TimeUnit | None,
) -> ReadOptions:
    """Return the options for the readers.

    Raises
    ------
    typer.BadParameter
        If one of them makes no sense.
    """
    from analyzer.records.options import ReadOptions

    if text_encoding is not None:
        try:
            codecs.lookup(text_encoding)
        except LookupError as error:
            raise wrong("--text-encoding", f"{text_encoding!r} is no code page that is known") from error
    for option, hertz in (("--nominal-frequency", nominal_frequency), ("--sample-rate", sample_rate)):
        if hertz is not None and not 0.0 < hertz < math.inf:
            raise wrong(option, "must be above zero")
    separator = "\t" if separator == "\\t" else separator
    for option, mark in (("--separator", separator), ("--decimal", decimal)):
        if mark is not None and len(mark) != 1:
            raise wrong(option, "must be one character")
    return ReadOptions(
        text_encoding=text_encoding,
        units=dict(_unit_statement(text) for text in unit or ()),
        nominal_frequency_hz=nominal_frequency,
        sample_rate_hz=sample_rate,
        separator=separator,
        decimal=decimal,
        time_column=time_column,
        time_unit=None if time_unit is None else time_unit.value,
    )


def _unit_statement(text: str) -> tuple[str, str]:
    from analyzer.records.units import parse_unit

    channel, mark, unit = text.rpartition("=")
    if not mark or not channel.strip() or not unit.strip():
        raise wrong("--unit", f"{text!r} is not of the form CHANNEL=UNIT")
    if parse_unit(unit) is None:
        raise wrong("--unit", f"{unit!r} is no unit that is known")
    return channel.strip(), unit.strip()


def wrong(option: str, message: str) -> typer.BadParameter:
    """Return the error of an option that makes no sense."""
    return typer.BadParameter(message, param_hint=option)


@dataclass(frozen=True, slots=True, kw_only=True)
class Opened:
    """One record of those asked for, or why it could not be read.

    Attributes
    ----------
    shown : str
        Where it is.
    record : Record or None
    error : FaultassayError or None
        Set where `record` is None.
    inputs : tuple of Path
        The files it is made of, which no output may replace.
    """

    shown: str
    record: Record | None
    error: FaultassayError | None
    inputs: tuple[Path, ...]


def opened(paths: Sequence[str], *, options: ReadOptions) -> Iterator[Opened]:
    """Yield the records behind the paths one by one; an error of one does not keep the others back."""
    from analyzer.records.problems import RecordError
    from analyzer.records.registry import find_records

    for path in paths:
        n_found = 0
        try:
            for found in find_records(Path(path)):
                n_found += 1
                yield _opened(found, options)
            if not n_found:
                raise RecordError(
                    "no-record",
                    "holds no record that can be read",
                    path=path,
                    hint="give a record, or a folder or archive with records directly in it",
                )
        except FaultassayError as error:
            yield Opened(shown=path, record=None, error=error, inputs=(Path(path),))


def _opened(found: Found, options: ReadOptions) -> Opened:
    from analyzer.records.model import Origin
    from analyzer.records.output import input_files

    shown = found.shown
    inputs = input_files(Origin(path=shown, format=found.format.name))
    try:
        record = found.read(options=options)
    except FaultassayError as error:
        return Opened(shown=shown, record=None, error=error, inputs=inputs)
    return Opened(shown=shown, record=record, error=None, inputs=(*inputs, *input_files(record.origin)))
