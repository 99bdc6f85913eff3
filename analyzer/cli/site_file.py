"""The site file on the command line: read for `examine`, written as a template by `describe`."""

from __future__ import annotations

import sys
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from analyzer.cli.documents import STANDARD_OUTPUT
from analyzer.cli.exits import UNREADABLE
from analyzer.cli.messages import say_error
from analyzer.errors import FaultassayError

if TYPE_CHECKING:
    from analyzer.records.model import Record
    from analyzer.records.options import ReadOptions
    from analyzer.site import Site

SiteFile = Annotated[
    str | None,
    typer.Option(
        "--site",
        metavar="FILE",
        help="Site file: channels, ratios, expected impedances and what else the owner knows. "
        "`describe --site-template` writes one.",
    ),
]
TemplateTarget = Annotated[
    str | None,
    typer.Option(
        "--site-template",
        metavar="FILE",
        help="Also write a site file for the record, to be filled in. - is standard output, which then "
        "carries nothing else.",
    ),
]


def site_of(path: str, *, options: ReadOptions) -> Site:
    """Return the site file's statements less what options of the command line say instead.

    Raises
    ------
    typer.Exit
        If it cannot be read.
    """
    from analyzer.site import read_site

    try:
        site = read_site(path)
    except FaultassayError as error:
        say_error(str(error))
        raise typer.Exit(UNREADABLE) from None
    return site.after(nominal_frequency_hz=options.nominal_frequency_hz, units=options.units)


def write_template(record: Record, target: str, *, inputs: Sequence[Path]) -> None:
    """Write a site file for a record; one that is there already is never replaced.

    Raises
    ------
    RecordError
        If the file is there or cannot be written.
    """
    from analyzer.records.output import written_beside
    from analyzer.site_template import site_template

    text = site_template(record)
    if target == STANDARD_OUTPUT:
        sys.stdout.write(text)
        return
    with written_beside(Path(target), existing="refuse", inputs=inputs) as draft:
        draft.write_text(text, encoding="utf-8", newline="\n")
