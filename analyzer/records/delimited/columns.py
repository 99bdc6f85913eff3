"""The rows of a text table into arrays, by pyarrow; what it cannot read is mended or emptied."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from analyzer.records.delimited.cells import (
    MISSING_WORDS,
    has_thousands_marks,
    kind_of,
    number_pattern,
    split_cells,
)
from analyzer.records.delimited.layout import Layout
from analyzer.records.problems import Problem, RecordError
from analyzer.records.text import printable

if TYPE_CHECKING:
    import pyarrow as pa

_BLOCK_BYTES = 1 << 20
_LARGEST_BLOCK_BYTES = 1 << 28
_SQUEEZE_BYTES = 1 << 24
_BROKEN_SHARE = 0.5  # of a table, half of the rows must be as its first rows say; our choice
_LF, _CR, _TAB, _BLANK = 10, 13, 9, 32


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Columns:
    """Columns of a text table.

    Attributes
    ----------
    numbers : dict of int to ndarray of float64
        Columns of numbers, NaN where a cell is missing.
    texts : dict of int to pyarrow.ChunkedArray
        Columns of text.
    problems : tuple of Problem
    """

    numbers: dict[int, NDArray[np.float64]]
    texts: dict[int, pa.ChunkedArray]
    problems: tuple[Problem, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class Body:
    """The part of a file from its first row of numbers on.

    Attributes
    ----------
    data : bytes-like
        In `encoding`, in which ASCII must be as such.
    encoding : str
    path : str
        For messages.
    first_line : int
        Line of the first row in the file, counted from 1.
    """

    data: memoryview | bytes
    encoding: str
    path: str
    first_line: int


def read_columns(
    body: Body,
    layout: Layout,
    *,
    numeric: Sequence[int],
    textual: Sequence[int],
    time_columns: Sequence[int],
) -> Columns:
    """Return the columns asked for.

    Parameters
    ----------
    body, layout
        The rows and how they are laid out.
    numeric, textual : sequence of int
        Columns to read as numbers, and those to leave as text, counted from 0.
    time_columns : sequence of int
        The columns of these that say when a row was taken; a broken row keeps only them. Where there are none
        a row's position is its time, so that a broken row stays, empty.

    Raises
    ------
    RecordError
        If the rows are no table (codes ``broken-table``, ``thousands-marks``).
    """
    import pyarrow as pa

    data = _squeezed(body.data) if layout.separator == " " else body.data
    problems: list[Problem] = []
    try:
        table = _parsed(data, layout, numeric, textual)
    except pa.ArrowInvalid:  # a row of another length, or a cell that is no number
        mended, problems = _mended(data, body, layout, time_columns)
        try:
            table = _parsed(mended, layout, numeric, textual)
        except pa.ArrowInvalid:
            table = _parsed(mended, layout, (), (*numeric, *textual))
    numbers: dict[int, NDArray[np.float64]] = {}
    unreadable = _Unreadable()
    for column in numeric:
        cells = table.column(str(column))
        if cells.type != pa.float64():
            cells = unreadable.sifted(cells, column, layout.decimal, body.path)
        numbers[column] = _finite(cells.to_numpy())
    problems += unreadable.problems()
    return Columns(
        numbers=numbers,
        texts={column: table.column(str(column)) for column in textual},
        problems=tuple(problems),
    )


def _parsed(
    data: memoryview | bytes, layout: Layout, numeric: Sequence[int], textual: Sequence[int]
) -> pa.Table:
    import pyarrow as pa
    import pyarrow.csv as pa_csv

    longest = max(sum(len(cell) + 1 for cell in row) for row in layout.sample)
    block = min(max(_BLOCK_BYTES, 8 * longest), _LARGEST_BLOCK_BYTES)
    types = {str(column): pa.float64() for column in numeric} | {
        str(column): pa.string() for column in textual
    }
    return pa_csv.read_csv(
        pa.BufferReader(pa.py_buffer(data)),
        read_options=pa_csv.ReadOptions(
            column_names=[str(column) for column in range(layout.n_columns)], block_size=block
        ),
        parse_options=pa_csv.ParseOptions(delimiter=layout.separator),
        convert_options=pa_csv.ConvertOptions(
            column_types=types,
            include_columns=list(types),
            null_values=list(MISSING_WORDS),
            strings_can_be_null=True,
            decimal_point=layout.decimal,
        ),
    )


def _finite(values: NDArray[np.float64]) -> NDArray[np.float64]:
    infinite = np.isinf(values)
    return np.where(infinite, np.nan, values) if infinite.any() else values


def _squeezed(data: memoryview | bytes) -> bytes:
    """Return the text with one blank for each run of blanks and tabs, and none at the ends of lines."""
    whole = memoryview(data)
    parts: list[bytes] = []
    start = 0
    while start < len(whole):
        chunk = bytes(whole[start : start + _SQUEEZE_BYTES])
        if start + len(chunk) < len(whole):
            chunk = chunk[: chunk.rfind(b"\n") + 1] or chunk
        start += len(chunk)
        codes = np.frombuffer(chunk, dtype=np.uint8).copy()
        codes[codes == _TAB] = _BLANK
        blank = codes == _BLANK
        edge = (codes == _LF) | (codes == _CR)
        after_gap = np.concatenate(([True], (blank | edge)[:-1]))
        codes = codes[~(blank & after_gap)]
        before_edge = np.append((codes[1:] == _LF) | (codes[1:] == _CR), True)
        parts.append(codes[~((codes == _BLANK) & before_edge)].tobytes())
    return b"".join(parts)


def _mended(
    data: memoryview | bytes, body: Body, layout: Layout, time_columns: Sequence[int]
) -> tuple[bytes, list[Problem]]:
    """Return the rows in UTF-8, all of the same length, and what was done for that."""
    text = bytes(data)
    if not text.isascii():
        text = text.decode(body.encoding, errors="replace").encode("utf-8")
    lines = text.splitlines()
    separator, n = layout.separator.encode(), layout.n_columns
    rows: list[bytes] = []
    broken: list[int] = []
    n_comments = 0
    for k, line in enumerate(lines):
        if not line.strip(b" \t\0\x1a"):
            continue
        if line.lstrip().startswith(b"#"):
            n_comments += 1
            continue
        if b'"' not in line and line.count(separator) == n - 1:
            rows.append(line)
            continue
        cells = split_cells(line.decode("utf-8", errors="replace"), layout.separator)
        while len(cells) > n and not cells[-1]:
            cells = cells[:-1]
        if len(cells) == n:
            rows.append(_joined(cells, layout.separator))
            continue
        broken.append(body.first_line + k)
        cut_short = k == len(lines) - 1 and not text.endswith((b"\n", b"\r"))
        is_prose = not any(kind_of(cell, layout.decimal) == "number" for cell in cells)
        if not cut_short and not (is_prose and time_columns):
            rows.append(_emptied(cells, layout, time_columns))
    if len(broken) > _BROKEN_SHARE * (len(rows) + 1):
        raise RecordError(
            "broken-table",
            f"{len(broken)} of the rows do not have the {n} cells of the first ones",
            path=body.path,
            line=broken[0],
            hint="check that the file is one table, or state its separator",
        )
    problems = []
    if broken:
        message = (
            f"{len(broken)} row{'s' if len(broken) > 1 else ''} without the {n} cells of the others: "
            f"the values there are taken as missing"
        )
        problems.append(
            Problem(code="broken-rows", message=message, where=f"line {broken[0]}", severity="warning")
        )
    if n_comments:
        problems.append(Problem(code="comments-among-rows", message=f"{n_comments} comment lines left out"))
    return b"\n".join(rows) + b"\n", problems


def _emptied(cells: Sequence[str], layout: Layout, time_columns: Sequence[int]) -> bytes:
    """Return a row with nothing but its time, and not even that if it may have been cut."""
    row = ["NaN"] * layout.n_columns
    for column in time_columns:
        if column < len(cells) - 1:
            row[column] = cells[column]
    return _joined(row, layout.separator)


def _joined(cells: Sequence[str], separator: str) -> bytes:
    quoted = (
        '"' + cell.replace('"', '""') + '"' if separator in cell or '"' in cell or not cell else cell
        for cell in cells
    )
    return separator.join(quoted).encode("utf-8")


class _Unreadable:
    """Counts the cells among numbers that are none."""

    def __init__(self) -> None:
        self._count = 0
        self._columns = 0
        self._example = ""
        self._where = ""

    def sifted(self, cells: pa.ChunkedArray, column: int, decimal: str, path: str) -> pa.ChunkedArray:
        """Return the cells as numbers, null where they are none."""
        import pyarrow as pa
        import pyarrow.compute as pc

        text = pc.utf8_trim_whitespace(cells)
        good = pc.match_substring_regex(text, f"^{number_pattern(decimal)}$")
        bad = text.filter(pc.and_(pc.invert(good), pc.not_equal(text, "")))
        if len(bad):
            examples = [str(cell) for cell in bad.slice(0, 1000).to_pylist()]
            if any(has_thousands_marks(cell) for cell in examples):
                raise RecordError(
                    "thousands-marks",
                    f"numbers with marks between thousands, such as {printable(examples[0])!r}, are not read",
                    path=path,
                    field=f"column {column + 1}",
                    hint="write the file without them",
                )
            self._columns += 1
            self._count += len(bad)
            self._example = self._example or printable(examples[0], limit=24)
            self._where = self._where or f"column {column + 1}"
        chosen = pc.if_else(good, text, pa.scalar(None, pa.string()))
        if decimal == ",":
            chosen = pc.replace_substring(chosen, ",", ".")
        return chosen.cast(pa.float64())

    def problems(self) -> list[Problem]:
        """Return what was counted."""
        if not self._count:
            return []
        message = (
            f"{self._count} cell{'s' if self._count > 1 else ''} among the numbers of {self._columns} "
            f"column{'s' if self._columns > 1 else ''}, such as {self._example!r}, taken as missing"
        )
        return [Problem(code="unreadable-cells", message=message, where=self._where, severity="warning")]
