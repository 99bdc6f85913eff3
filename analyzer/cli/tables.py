"""The one layout of tables on a terminal."""

from __future__ import annotations

import os
from typing import Any

from rich import box
from rich.console import Console
from rich.table import Table
from rich.text import Text

from analyzer.cli.messages import safe


def plain_table() -> Table:
    """Return an empty table: a rule under the headings, two blanks between columns."""
    return Table(box=box.SIMPLE_HEAD, show_edge=False, padding=(0, 1, 0, 0))


def show_titled(title: str, table: Table, screen: Console) -> None:
    """Print a table under a line that may be longer than it."""
    screen.print()
    screen.print(Text(title))
    screen.print(table)


def show_problems(problems: list[dict[str, Any]], path: str, screen: Console) -> None:
    """Print the problems of the record at `path`: severity, what, where."""
    table = plain_table()
    table.add_column("severity", no_wrap=True)
    table.add_column("what", overflow="fold", ratio=3)
    table.add_column("where", overflow="fold", ratio=2)
    folder = os.path.join(os.path.dirname(path), "")  # noqa: PTH118, PTH120 -- as written, not as a path
    for problem in problems:
        # The folder stands above the table already.
        where = problem["where"].replace(folder, "") if len(folder) > 1 else problem["where"]
        table.add_row(
            Text(problem["severity"], style="bold" if problem["severity"] == "warning" else ""),
            safe(problem["message"]),
            safe(where),
        )
    show_titled("Problems found in the file", table, screen)
