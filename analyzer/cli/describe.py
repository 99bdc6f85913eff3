"""``faultassay describe``: what is in a file, and what is wrong with it."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import typer

from analyzer.cli.documents import STANDARD_OUTPUT, write_documents
from analyzer.cli.exits import UNREADABLE
from analyzer.cli.messages import console, say_error
from analyzer.cli.reading import (
    Decimal,
    JsonTarget,
    NominalFrequency,
    Paths,
    SampleRate,
    Separator,
    TextEncoding,
    TimeColumn,
    TimeUnitOption,
    UnitOfChannel,
    opened,
    read_options,
    wrong,
)
from analyzer.cli.site_file import TemplateTarget, write_template
from analyzer.errors import FaultassayError

if TYPE_CHECKING:
    from analyzer.records.model import Record

DESCRIBE_EXAMPLES = """\
\b
Examples
  faultassay describe trip_0412.cfg
  faultassay describe records_of_may/ --json contents.json
  faultassay describe export.csv --unit IA=kA --sample-rate 4800
  faultassay describe trip_0412.cfg --site-template site.toml
"""


def describe(
    paths: Paths,
    json_target: JsonTarget = None,
    template_target: TemplateTarget = None,
    text_encoding: TextEncoding = None,
    unit: UnitOfChannel = None,
    nominal_frequency: NominalFrequency = None,
    sample_rate: SampleRate = None,
    separator: Separator = None,
    decimal: Decimal = None,
    time_column: TimeColumn = None,
    time_unit: TimeUnitOption = None,
) -> None:
    """Show what is in a file, and what is wrong with it.

    Station and device, times and clock, sampling, each analog channel with the range of its primary values,
    the digital channels that change, and every problem that was found and how it was dealt with.
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
    from analyzer.cli.description import description, failed_description
    from analyzer.cli.description_tables import show_description

    if json_target == template_target == STANDARD_OUTPUT:
        raise wrong("--json/--site-template", "only one of them can be written to standard output")
    screen = console() if STANDARD_OUTPUT not in (json_target, template_target) else None
    records: list[Record] = []
    documents: list[dict[str, Any]] = []
    inputs: list[Path] = []
    failed = False
    for one in opened(paths, options=options):
        inputs += one.inputs
        error = one.error
        if one.record is not None:
            try:
                document = description(one.record)
            except FaultassayError as found:
                error = found
            else:
                records.append(one.record)
                if template_target is not None and len(records) > 1:
                    raise wrong("--site-template", "is for one record, and there are several")
                if screen is not None:
                    if documents:
                        screen.print()
                    show_description(document, screen)
        if error is not None:
            failed = True
            say_error(str(error))
            document = failed_description(one.shown, error)
        documents.append(document)
    if template_target is not None and records:
        write_template(records[0], template_target, inputs=inputs)
    if json_target is not None:
        write_documents(documents, json_target, inputs=inputs)
    if failed:
        raise typer.Exit(UNREADABLE)
