"""A text table described: layout, names, units and encoding, before its rows are read."""

from __future__ import annotations

from dataclasses import dataclass

from analyzer.records.blobs import Blob
from analyzer.records.delimited.columns import Body
from analyzer.records.delimited.headings import Heading, find_headings
from analyzer.records.delimited.layout import MAX_COLUMNS, Layout, Trouble, find_layout, is_content
from analyzer.records.delimited.opening import Opened, open_text
from analyzer.records.options import ReadOptions
from analyzer.records.problems import Problem, RecordError
from analyzer.records.text import printable

_SEPARATOR_NAMES = {",": "commas", ";": "semicolons", "\t": "tabs", "|": "upright strokes", " ": "blanks"}
_TROUBLE: dict[Trouble, tuple[str, str, str]] = {
    "no-table": (
        "not-a-table",
        "there are no rows of numbers",
        "each sample needs a line of its own, with as many cells; state the separator if it is unusual",
    ),
    "too-many-columns": ("too-many-columns", f"there are more than {MAX_COLUMNS} columns", "split the file"),
    "ambiguous-decimal": (
        "ambiguous-decimal",
        "a comma may be the decimal mark or stand between thousands",
        "state the decimal mark",
    ),
    "thousands-marks": (
        "thousands-marks",
        "numbers with marks between thousands are not read",
        "write the file without them",
    ),
}


@dataclass(frozen=True, slots=True, kw_only=True)
class Table:
    """A table before its rows are read.

    Attributes
    ----------
    path : str
        The file, for messages.
    layout : Layout
    headings : tuple of Heading
        One for each column; the name is empty where there is none.
    body : Body
        The rows.
    preamble : str
        The lines above the rows that are no headings.
    problems : tuple of Problem
    """

    path: str
    layout: Layout
    headings: tuple[Heading, ...]
    body: Body
    preamble: str
    problems: tuple[Problem, ...]

    @property
    def first_line(self) -> int:
        """Line of the first row in the file, counted from 1."""
        return self.body.first_line

    def name(self, column: int) -> str:
        """Return the name of a column, made up from its position where the file gives none."""
        return self.headings[column].name or f"column {column + 1}"

    def called(self, column: int) -> str:
        """Return how to speak of a column in a message."""
        name = self.headings[column].name
        return f"column {printable(name, limit=40)!r}" if name else f"column {column + 1}"


def note(code: str, message: str, where: str) -> Problem:
    """Return the problem that lists a guess."""
    return Problem(code=code, message=message, where=where)


def describe_table(blob: Blob, options: ReadOptions) -> Table:
    """Return what the first lines of a file tell of its table.

    Raises
    ------
    RecordError
        As :func:`analyzer.records.delimited.read_delimited`.
    """
    opened = open_text(blob, encoding=options.text_encoding)
    shown = opened.shown()
    stated = options.separator or opened.separator
    layout = find_layout(shown, separator=stated, decimal=options.decimal)
    if not isinstance(layout, Layout):
        code, message, hint = _TROUBLE[layout]
        at = next((k for k, line in enumerate(shown) if is_content(line)), 0)
        raise RecordError(code, message, path=blob.shown, line=opened.line_number(at), hint=hint)
    lines, encoding, guessed = opened.decoded(layout.first_row, path=blob.shown)
    found = find_headings(lines, separator=layout.separator, kinds=layout.kinds)
    problems = list(opened.problems)
    if guessed:
        problems.append(note("encoding-guessed", f"names are taken to be in {encoding}", "heading"))
    if stated is None and layout.n_columns > 1:
        name = _SEPARATOR_NAMES[layout.separator]
        problems.append(note("separator-guessed", f"cells are taken to be separated by {name}", "whole file"))
    if options.decimal is None and layout.fractions:
        name = "comma" if layout.decimal == "," else "point"
        problems.append(note("decimal-guessed", f"the decimal mark is taken to be the {name}", "whole file"))
    if found.columns is None:
        problems.append(_unnamed(found.unused, layout, blob, opened))
    return Table(
        path=blob.shown,
        layout=layout,
        headings=found.columns or tuple(Heading(name="") for _ in layout.kinds),
        body=Body(
            data=opened.data[sum(map(len, opened.lines[: layout.first_row])) :],
            encoding=encoding,
            path=blob.shown,
            first_line=opened.line_number(layout.first_row),
        ),
        preamble=found.preamble,
        problems=tuple(problems),
    )


def _unnamed(unused: str, layout: Layout, blob: Blob, opened: Opened) -> Problem:
    """Return the problem of a table whose columns have no usable names."""
    if not unused:
        return note(
            "no-heading", "no line of names was found; columns are named by their position", "heading"
        )
    n_names = unused.count(layout.separator) + 1
    if layout.separator == "," and 2 * n_names == layout.n_columns and not layout.fractions:
        raise RecordError(
            "ambiguous-decimal",
            f"{n_names} names stand over {layout.n_columns} cells: the comma seems to be both separator and "
            "decimal mark",
            path=blob.shown,
            line=opened.line_number(layout.first_row),
            hint="write the file with another separator or with decimal points",
        )
    return Problem(
        code="heading-not-used",
        severity="warning",
        message=f"{printable(unused, limit=60)!r} does not match the {layout.n_columns} columns; "
        "columns are named by their position and have no unit",
        where=f"line {opened.line_number(layout.first_row) - 1}",
    )
