"""``faultassay forge``: records with known truth, from a scenario."""

from __future__ import annotations

from contextlib import contextmanager
from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from analyzer.cli.convert import EncodingChoice, ExistingChoice, RevisionChoice
from analyzer.cli.exits import DONE, UNREADABLE
from analyzer.cli.messages import say_error
from analyzer.cli.reading import wrong

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    from analyzer.forge import CampaignRecord, Scenario
FORGE_EXAMPLES = """\
Beside each record NAME its truth is written as NAME.truth.json: inception, currents, offsets, time constants
and impedances as the circuit has them. Several records are called NAME-0001, NAME-0002 and so on; each is the
same whatever the number of records and of processes.

\b
Examples
  faultassay forge --example > feeder.toml
  faultassay forge feeder.toml --out try/
  faultassay forge feeder.toml --count 1000 --seed 7 --workers 2 --out many/
"""


class FormatChoice(StrEnum):
    """What forge writes."""

    COMTRADE = "comtrade"
    CSV = "csv"


def forge(
    scenario: Annotated[
        str | None,
        typer.Argument(metavar="SCENARIO", help="The scenario, a TOML file.", show_default=False),
    ] = None,
    out: Annotated[
        str, typer.Option("--out", metavar="DIR", help="Folder to write to; made when it is not there.")
    ] = ".",
    count: Annotated[int, typer.Option(min=1, help="Number of records.")] = 1,
    seed: Annotated[
        int | None,
        typer.Option(min=0, help="Of distributions, classes and noise; the scenario's when left out."),
    ] = None,
    workers: Annotated[int, typer.Option(min=1, help="Processes that share the records.")] = 1,
    format_choice: Annotated[
        FormatChoice | None, typer.Option("--format", help="In place of the scenario's.")
    ] = None,
    revision: Annotated[
        RevisionChoice | None, typer.Option(help="Revision of COMTRADE, in place of the scenario's.")
    ] = None,
    encoding: Annotated[
        EncodingChoice | None, typer.Option(help="Encoding of COMTRADE, in place of the scenario's.")
    ] = None,
    existing: Annotated[
        ExistingChoice, typer.Option(help="What to do about files of that name that are there.")
    ] = ExistingChoice.REFUSE,
    show_schema: Annotated[
        bool, typer.Option("--show-schema", help="Show the JSON Schema of scenarios and stop.")
    ] = False,
    example: Annotated[
        bool, typer.Option("--example", help="Show a commented scenario with every section and stop.")
    ] = False,
) -> None:
    """Make records with known truth from a circuit.

    A scenario describes a network, what happens in it, and the instruments in front of the recorder. The
    circuit is solved exactly, so that what an analysis says of the record can be held against its truth.
    """
    if show_schema or example:
        _show(schema=show_schema)
        raise typer.Exit(DONE)
    if scenario is None:
        raise wrong("SCENARIO", "is needed; `faultassay forge --example` shows one")

    from analyzer.forge import ForgeError, forge_campaign, read_scenario

    try:
        file = read_scenario(Path(scenario))
    except ForgeError as error:
        if error.code != "cannot-read":
            raise
        say_error(str(error))
        raise typer.Exit(UNREADABLE) from None
    written_as = _written_as(file.scenario, format_choice, revision, encoding)
    with _progress(count) as progress, file.naming():
        records = forge_campaign(
            written_as,
            Path(out),
            count=count,
            seed=seed,
            name=written_as.record.name or file.path.stem,
            workers=workers,
            existing=existing.value,
            progress=progress,
        )
    typer.echo(_written(records, out))


def _show(*, schema: bool) -> None:
    if schema:
        import json

        from analyzer.forge import Scenario

        typer.echo(json.dumps(Scenario.model_json_schema(), indent=2))
    else:
        from analyzer.forge.example import EXAMPLE

        typer.echo(EXAMPLE, nl=False)


def _written_as(
    scenario: Scenario,
    format_choice: FormatChoice | None,
    revision: RevisionChoice | None,
    encoding: EncodingChoice | None,
) -> Scenario:
    given = {
        "format": None if format_choice is None else format_choice.value,
        "revision": None if revision is None else int(revision.value),
        "encoding": None if encoding is None else encoding.value,
    }
    given = {key: value for key, value in given.items() if value is not None}
    if not given:
        return scenario
    if given.get("format", scenario.record.format) == "csv" and len(given) > 1:
        raise wrong("--revision/--encoding", "are for COMTRADE, not for csv")
    from pydantic import ValidationError

    record = scenario.record
    try:
        changed = type(record).model_validate(record.model_dump(exclude_unset=True) | given)
    except ValidationError as error:
        message = str(error.errors(include_url=False)[0]["msg"]).removeprefix("Value error, ")
        raise wrong("--revision/--encoding", message) from None
    return scenario.model_copy(update={"record": changed})


@contextmanager
def _progress(count: int) -> Iterator[Callable[[int], None] | None]:
    """A bar on a terminal, nothing elsewhere."""
    from rich.console import Console

    console = Console(stderr=True)
    if count == 1 or not console.is_terminal:
        yield None
        return
    from rich.progress import Progress

    with Progress(console=console, transient=True) as bar:
        task = bar.add_task("forging", total=count)
        yield lambda done: bar.update(task, completed=done)


def _written(records: tuple[CampaignRecord, ...], out: str) -> str:
    if len(records) == 1:
        return f"wrote {', '.join(str(path) for path in records[0].files)}"
    return f"wrote {len(records)} records, {records[0].name} to {records[-1].name}, to {out}"
