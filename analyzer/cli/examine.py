"""``faultassay examine``: one record after the other, fully."""

from __future__ import annotations

from collections import Counter
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from analyzer.cli.documents import STANDARD_OUTPUT, write_documents
from analyzer.cli.exits import DEPARTS, UNREADABLE
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
)
from analyzer.cli.site_file import SiteFile, site_of
from analyzer.errors import FaultassayError

if TYPE_CHECKING:
    from collections.abc import Mapping

EXAMINE_EXAMPLES = """\
Several records are examined one after the other; one that cannot be read does not stop the others. In the
JSON array it has its own object, with "error" in place of findings.

\b
Examples
  faultassay examine trip_0412.cfg
  faultassay examine trip_0412.cfg --json -
  faultassay examine records_of_may/ --json may.json --quiet --strict
  faultassay examine trip_0412.cfg --site site.toml
"""
_READ_FAILED = "unreadable"
_TALLY = {
    "follows-theory": "follow theory",
    "departs": "depart from it",
    "undetermined": "undetermined",
    "no-fault": "without a fault",
    _READ_FAILED: "could not be examined",
}


def examine(
    paths: Paths,
    json_target: JsonTarget = None,
    site_file: SiteFile = None,
    strict: Annotated[
        bool, typer.Option("--strict", help="Exit with code 1 when a record departs from theory.")
    ] = False,
    quiet: Annotated[
        bool, typer.Option("--quiet", help="Show errors only; --json and the exit code say the rest.")
    ] = False,
    text_encoding: TextEncoding = None,
    unit: UnitOfChannel = None,
    nominal_frequency: NominalFrequency = None,
    sample_rate: SampleRate = None,
    separator: Separator = None,
    decimal: Decimal = None,
    time_column: TimeColumn = None,
    time_unit: TimeUnitOption = None,
) -> None:
    """Find the fault and say whether theory explains it.

    Inception and point on wave, fault type and direction, symmetrical current, offset and largest peak, X/R
    by three routes, source impedance and duration, each with its 95 % interval; how they compare with
    theory, and where the record departs from it. Values are primary.
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
    from analyzer.cli.findings_tables import show_caution, show_findings
    from analyzer.examine import examine as examine_record
    from analyzer.findings import FailedRecord

    examine_one = examine_record
    inputs: list[Path] = []
    if site_file is not None:
        examine_one = partial(examine_record, site=site_of(site_file, options=options))
        inputs.append(Path(site_file))
    screen = None if quiet or json_target == STANDARD_OUTPUT else console()
    documents: list[dict[str, Any]] = []
    verdicts: Counter[str] = Counter()
    for one in opened(paths, options=options):
        inputs += one.inputs
        error = one.error
        if one.record is not None:
            try:
                findings = examine_one(one.record)
            except FaultassayError as found:
                error = found
            else:
                verdicts[findings.verdict] += 1
                documents.append(findings.to_dict())
                if screen is not None:
                    show_findings(findings, screen)
        if error is not None:
            verdicts[_READ_FAILED] += 1
            say_error(str(error))
            documents.append(FailedRecord.of(one.shown, error).to_dict())
    if screen is not None:
        if len(documents) > 1:
            screen.print(_tally(verdicts))
        if verdicts.total() > verdicts[_READ_FAILED]:
            show_caution(screen)
    if json_target is not None:
        write_documents(documents, json_target, inputs=inputs)
    if verdicts[_READ_FAILED]:
        raise typer.Exit(UNREADABLE)
    if strict and verdicts["departs"]:
        raise typer.Exit(DEPARTS)


def _tally(verdicts: Mapping[str, int]) -> str:
    parts = [f"{verdicts[key]} {words}" for key, words in _TALLY.items() if verdicts[key]]
    return f"{sum(verdicts.values())} records: {', '.join(parts)}"
