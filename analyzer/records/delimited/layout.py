"""Separator, decimal mark and first row of numbers of a text table, found out from its first lines."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

from analyzer.records.delimited.cells import Kind, kind_of, split_cells

_SEPARATORS = ("\t", ";", ",", "|", " ")
_SCORED_LINES = 256
_SCORED_CHARACTERS = 128_000
_SCORED_LINES_AT_LEAST = 3
MAX_COLUMNS = 20_000
_ACCEPTED_SHARE = 0.5  # half of the cells after the first row must be readable; our choice

# A number with marks between thousands is refused, but tells the separator all the same.
_READABLE: dict[Kind, float] = {"text": 0.0, "grouped": 0.75}

_STATED_SEPARATOR = re.compile(r'"?sep=(.)"?\s*', re.IGNORECASE)  # a line that spreadsheets write and heed
_GROUPS_OF_THREE = re.compile(r"[+-]?[1-9]\d{0,2}(?:,\d{3})+")

Trouble = Literal["no-table", "too-many-columns", "ambiguous-decimal", "thousands-marks"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Layout:
    """How the lines of a text table are laid out.

    Attributes
    ----------
    separator : str
        Between cells; a blank stands for any run of blanks and tabs.
    decimal : {".", ","}
        Decimal mark.
    first_row : int
        Line of the first row of numbers, counted from 0.
    kinds : tuple of Kind
        What most cells of each column are.
    bits : frozenset of int
        Columns whose cells are all written as a bare 0 or 1.
    fractions : bool
        Whether a decimal mark was seen.
    n_rows : int
        Rows of numbers among the lines looked at.
    sample : tuple of tuple of str
        Cells of the first rows.
    """

    separator: str
    decimal: str
    first_row: int
    kinds: tuple[Kind, ...]
    bits: frozenset[int]
    fractions: bool
    n_rows: int
    sample: tuple[tuple[str, ...], ...]

    @property
    def n_columns(self) -> int:
        """Number of columns."""
        return len(self.kinds)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Reading:
    """The lines as they come out under one separator and decimal mark.

    `n_readable` counts the rows, each with the share of its cells that can be read, and `n_lines` all lines
    from the first row on.
    """

    separator: str
    decimal: str
    cells: list[tuple[str, ...]]
    kinds: list[tuple[Kind, ...]]
    rows: list[int]
    n: int
    n_readable: float
    n_lines: int

    @property
    def rank(self) -> tuple[bool, float, bool, bool, int]:
        # On a par, marks that cannot be part of the layout of a page win over blanks, and the point wins.
        return self.n > 1, round(self.n_readable, 3), self.separator != " ", self.decimal == ".", self.n


def is_content(line: str) -> bool:
    """Whether a line is neither empty nor a comment."""
    return bool(line.strip()) and not line.lstrip().startswith("#")


def stated_separator(line: str) -> str | None:
    """Return the separator that a first line such as ``sep=;`` states."""
    match = _STATED_SEPARATOR.fullmatch(line)
    return match.group(1) if match else None


def find_layout(
    lines: Sequence[str], *, separator: str | None = None, decimal: str | None = None
) -> Layout | Trouble:
    """Return how the lines are laid out, or why that cannot be said.

    Parameters
    ----------
    lines : sequence of str
        The first lines of the file, without line ends.
    separator, decimal : str, optional
        As stated; found out when left out.
    """
    scored = _scored(lines)
    text = "\n".join(scored)
    readings = []
    too_wide = False
    for mark in _SEPARATORS if separator is None else (separator,):
        if separator is None and mark not in text and mark != " ":
            continue
        if max((line.count(mark) for line in scored), default=0) >= MAX_COLUMNS:
            too_wide = True
            continue
        cells = [split_cells(line, mark) if is_content(line) else () for line in scored]
        for point in (".", ",") if decimal is None else (decimal,):
            if decimal is None and point == "," and "," not in text:
                continue
            reading = _read(cells, mark, point)
            if reading is not None:
                readings.append(reading)
    best = max(readings, key=lambda reading: reading.rank, default=None)
    if best is None or best.n_readable < _ACCEPTED_SHARE * best.n_lines:
        return "too-many-columns" if too_wide else "no-table"
    return _layout(best, decimal_stated=decimal is not None)


def _scored(lines: Sequence[str]) -> list[str]:
    kept: list[str] = []
    characters = 0
    for line in lines[:_SCORED_LINES]:
        if characters > _SCORED_CHARACTERS and len(kept) >= _SCORED_LINES_AT_LEAST:
            break
        kept.append(line)
        characters += len(line)
    return kept


def _read(cells: list[tuple[str, ...]], separator: str, decimal: str) -> _Reading | None:
    kinds: list[tuple[Kind, ...]] = [tuple(kind_of(cell, decimal) for cell in row) for row in cells]
    readable = [sum(_READABLE.get(kind, 1.0) for kind in row) for row in kinds]
    counts = [row.count("number") + row.count("grouped") for row in kinds]
    rows = [k for k, row in enumerate(kinds) if counts[k] and 2 * readable[k] >= len(row)]
    if not rows:
        return None
    weights: Counter[int] = Counter()
    for k in rows:
        weights[len(kinds[k])] += counts[k]
    n = weights.most_common(1)[0][0]
    rows = [k for k in rows if len(kinds[k]) == n]
    return _Reading(
        separator=separator,
        decimal=decimal,
        cells=cells,
        kinds=kinds,
        rows=rows,
        n=n,
        n_readable=sum(readable[k] / n for k in rows),
        n_lines=sum(1 for row in kinds[rows[0] :] if row),
    )


def _layout(reading: _Reading, *, decimal_stated: bool) -> Layout | Trouble:
    kinds = tuple(_usual([reading.kinds[k][column] for k in reading.rows]) for column in range(reading.n))
    conforming = [k for k in reading.rows if _conforms(reading.kinds[k], kinds)]
    if not conforming:
        return "no-table"
    rows = [reading.cells[k] for k in conforming]
    if any("grouped" in reading.kinds[k] for k in reading.rows):
        return "thousands-marks" if reading.n > 1 else "no-table"
    mark = reading.decimal
    fractions = [cell for row in rows for cell in row if mark in cell and kind_of(cell, mark) == "number"]
    if mark == "," and not decimal_stated and all(_GROUPS_OF_THREE.fullmatch(cell) for cell in fractions):
        return "ambiguous-decimal"
    return Layout(
        separator=reading.separator,
        decimal=mark,
        first_row=conforming[0],
        kinds=kinds,
        bits=frozenset(
            column for column in range(reading.n) if {row[column] for row in rows} <= {"0", "1", ""}
        ),
        fractions=bool(fractions),
        n_rows=len(rows),
        sample=tuple(rows),
    )


def _usual(kinds: list[Kind]) -> Kind:
    present = Counter(kind for kind in kinds if kind != "missing")
    return present.most_common(1)[0][0] if present else "missing"


def _conforms(row: tuple[Kind, ...], usual: tuple[Kind, ...]) -> bool:
    return all(kind in (expected, "missing") or expected in ("text", "missing")
               for kind, expected in zip(row, usual, strict=True))  # fmt: skip
