"""What goes to the terminal: safe text, one-line errors, a console that never reads markup."""

from __future__ import annotations

import os
import sys
from typing import TYPE_CHECKING

import typer

if TYPE_CHECKING:
    from rich.console import Console
    from rich.text import Text

_ERROR_LIMIT = 1000


def say_error(text: str) -> None:
    """Write one line to standard error."""
    from analyzer.records.text import printable

    typer.echo(printable(text, limit=_ERROR_LIMIT), err=True)


def safe(text: str, *, style: str = "", limit: int = 256) -> Text:
    """Return text from a file as it may be shown: without control codes, and never read as markup."""
    from rich.text import Text

    from analyzer.records.text import printable

    return Text(printable(text, limit=limit), style=style)


def console() -> Console:
    """Return the console on standard output."""
    from rich.console import Console

    class QuietConsole(Console):
        def on_broken_pipe(self) -> None:
            raise BrokenPipeError

    return QuietConsole(markup=False, highlight=False, emoji=False)


def stop_writing() -> None:
    """Send what is still in standard output's buffer nowhere: whoever read it has gone."""
    nowhere = os.open(os.devnull, os.O_WRONLY)
    os.dup2(nowhere, sys.stdout.fileno())
    os.close(nowhere)
