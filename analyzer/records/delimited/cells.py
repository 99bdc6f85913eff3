"""Lines of a text table into cells, and what a cell is."""

from __future__ import annotations

import csv
import re
from typing import Literal

Kind = Literal["number", "missing", "stamp", "date", "clock", "grouped", "text"]

MISSING_WORDS = (
    "",
    "-",
    "--",
    "---",
    "NaN",
    "NAN",
    "nan",
    "NA",
    "N/A",
    "n/a",
    "#N/A",
    "NULL",
    "null",
    "None",
)

_MISSING = frozenset((*MISSING_WORDS, "inf", "Inf", "INF", "-inf", "-Inf", "-INF"))
_DATE = r"\d{4}[-/]\d{2}[-/]\d{2}"
_CLOCK = r"\d{2}:\d{2}(?::\d{2}(?:[.,]\d+)?)?"
_ZONE = r"\s?(?:Z|z|[+-]\d{2}(?::?\d{2})?)?"
_INSTANTS: tuple[tuple[Kind, re.Pattern[str]], ...] = (
    ("stamp", re.compile(rf"{_DATE}(?:T|\s+){_CLOCK}{_ZONE}")),
    ("clock", re.compile(rf"{_CLOCK}{_ZONE}")),
    ("date", re.compile(_DATE)),
)
_GROUPED = re.compile(r"[+-]?[1-9]\d{0,2}(?:[ ',.\u00a0\u202f]\d{3})+(?:[.,]\d+)?")
_OTHER_INSTANT = re.compile(r"\d{1,2}[./-]\d{1,2}[./-]\d{2,4}\b.*")
_BLANKS = re.compile(r"[ \t]+")


def number_pattern(decimal: str) -> str:
    """Return the regular expression of a number with the given decimal mark."""
    mark = re.escape(decimal)
    return rf"[+-]?(?:[0-9]+(?:{mark}[0-9]*)?|{mark}[0-9]+)(?:[eE][+-]?[0-9]+)?"


_NUMBER = {mark: re.compile(number_pattern(mark)) for mark in (".", ",")}


def split_cells(line: str, separator: str) -> tuple[str, ...]:
    """Return the cells of a line, without quotes and surrounding blanks.

    Parameters
    ----------
    line : str
        Without line end.
    separator : str
        One character; a blank stands for any run of blanks and tabs.
    """
    if '"' in line:
        single = _BLANKS.sub(" ", line.strip(" \t")) if separator == " " else line
        try:
            cells = next(csv.reader([single], delimiter=separator, skipinitialspace=True), [])
        except csv.Error:  # a quote that never ends
            cells = single.split(separator)
        return tuple(cell.strip() for cell in cells)
    if separator == " ":
        stripped = line.strip(" \t")
        return tuple(_BLANKS.split(stripped)) if stripped else ()
    return tuple(cell.strip() for cell in line.split(separator))


def kind_of(cell: str, decimal: str) -> Kind:
    """Return what a cell without surrounding blanks is, under the given decimal mark."""
    if _NUMBER[decimal].fullmatch(cell):
        return "number"
    if cell in _MISSING:
        return "missing"
    if ":" in cell or "-" in cell or "/" in cell:
        for kind, pattern in _INSTANTS:
            if pattern.fullmatch(cell):
                return kind
    return "grouped" if has_thousands_marks(cell) else "text"


def has_thousands_marks(cell: str) -> bool:
    """Whether a cell reads like a number with marks between groups of three digits."""
    return _GROUPED.fullmatch(cell) is not None


def is_other_instant(cell: str) -> bool:
    """Whether a cell reads like a date or time that is not in ISO 8601."""
    return _OTHER_INSTANT.fullmatch(cell) is not None
