"""Names and units of the columns, from the lines above the numbers."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from analyzer.records.delimited.cells import Kind, kind_of, split_cells
from analyzer.records.units import parse_unit

STATE_UNIT = "0/1"
ESCAPED_STARTS = ("=", "+", "-", "@", "\t", "\r", "'")

_BRACKETED = re.compile(r"(.*?)\s*\[([^\[\]]*)\]", re.DOTALL)
_IN_PARENTHESES = re.compile(r"(.+?)\s*\(([^()]*)\)", re.DOTALL)
_OVER_UNIT = re.compile(r"(.+?)(\s*)/(\s*)([^\s/]+)", re.DOTALL)
_NAMED_TIME = re.compile(r"(t|time)[ _](s|ms|us|µs|ns)", re.IGNORECASE)
_CURRENT_OR_VOLTAGE = re.compile(r"\d?[iIuUvV][A-Za-z0-9_]{0,3}")
_TWO_BLANKS = re.compile(r"\s{2,}|\t")
_UNIT_APART = re.compile(r"\s+(?=[\[(])|\s*/\s*")
_SHARE_OF_KNOWN_UNITS = 0.5

_TIME_NAMES = frozenset({
    "t", "time", "times", "zeit", "temps", "tiempo", "tempo", "czas", "время", "час", "时间", "時間",
    "timestamp", "time stamp", "datetime", "date time", "date/time", "date and time", "utc", "elapsed",
    "elapsed time", "relative time", "seconds", "sec",
})  # fmt: skip
_TIME_DIVISORS = {1.0: 1.0, 1e-3: 1e3, 1e-6: 1e6, 1e-9: 1e9}
_MORE_TIME_UNITS = {
    "с": 1.0, "сек": 1.0, "мс": 1e3, "мкс": 1e6, "μs": 1e6, "milliseconds": 1e3, "microseconds": 1e6,
    "nanoseconds": 1e9, "millisecond": 1e3, "microsecond": 1e6, "nanosecond": 1e9, "秒": 1.0, "毫秒": 1e3,
}  # fmt: skip


@dataclass(frozen=True, slots=True, kw_only=True)
class Heading:
    """Name of a column, and its unit as written; the unit is None where the heading gives none."""

    name: str
    unit: str | None = None

    @property
    def time_divisor(self) -> float | None:
        """Units of time in a second, if the unit is one of time."""
        return None if self.unit is None else time_divisor(self.unit)

    @property
    def names_time(self) -> bool:
        """Whether the name says that the column holds times."""
        return self.name.strip().casefold().replace("_", " ") in _TIME_NAMES


@dataclass(frozen=True, slots=True, kw_only=True)
class Headings:
    """What the lines above the numbers say.

    Attributes
    ----------
    columns : tuple of Heading or None
        One for each column, None without usable heading line.
    unused : str
        A line that should have been the heading but does not match the columns; empty if there is none.
    preamble : str
        All lines that are not headings.
    """

    columns: tuple[Heading, ...] | None
    unused: str
    preamble: str


def time_divisor(unit: str) -> float | None:
    """Return how many of `unit` make a second, None when it is no unit of time."""
    text = unit.strip().strip("[]()").strip()
    known = parse_unit(text)
    if known is not None:
        return _TIME_DIVISORS.get(known.factor) if known.quantity == "time" else None
    return _MORE_TIME_UNITS.get(text.lower())


def split_heading(cell: str) -> Heading:
    """Return name and unit of a heading such as ``IA [A]``, ``Ia (kA)`` or ``Ia / A``.

    What stands in square brackets is the unit, known or not; what stands in parentheses or after a stroke is
    one only if it is known, because both are part of many names.
    """
    match = _BRACKETED.fullmatch(cell)
    if match:
        return Heading(name=_unescaped(match[1]), unit=match[2].strip())
    match = _IN_PARENTHESES.fullmatch(cell)
    if match and _is_unit(match[2]) and match[2].strip() != "1":  # 'Bay (1)' is a number, not a ratio
        return Heading(name=_unescaped(match[1]), unit=match[2].strip())
    match = _OVER_UNIT.fullmatch(cell)
    if (
        match
        and _is_unit(match[4])
        and match[4] != "1"
        and _is_over(name=match[1], gaps=(match[2], match[3]), unit=match[4])
    ):
        return Heading(name=_unescaped(match[1]), unit=match[4])
    match = _NAMED_TIME.fullmatch(cell)
    if match:
        return Heading(name=cell, unit=match[2])
    if time_divisor(cell) is not None:
        return Heading(name=cell, unit=cell)
    return Heading(name=_unescaped(cell))


def written_heading(name: str, unit: str | None) -> str:
    """Return the cell from which :func:`split_heading` gives back `name` and `unit`.

    A name that a spreadsheet would run as a formula gets an apostrophe before it. Blanks at its ends are
    lost, and so are control codes, which could move a terminal's cursor.
    """
    name, unit = _without_controls(name), None if unit is None else _without_controls(unit)
    cleaned = name.rstrip() if name.startswith(("\t", "\r")) else name.strip()
    safe = f"'{cleaned}" if cleaned.startswith(ESCAPED_STARTS) else cleaned
    if unit is not None:
        return f"{safe} [{unit.translate({ord('['): '(', ord(']'): ')'})}]"
    if split_heading(safe) == Heading(name=cleaned) and kind_of(safe, ".") == "text":
        return safe
    return f"{safe} [{STATE_UNIT}]"


def find_headings(lines: Sequence[str], *, separator: str, kinds: Sequence[Kind]) -> Headings:
    """Return what the lines above the numbers say of the columns.

    Parameters
    ----------
    lines : sequence of str
        All lines above the first row of numbers.
    separator : str
        As in the rows; a blank stands for any run of blanks and tabs.
    kinds : sequence of Kind
        What the cells of each column are.
    """
    fitting: dict[int, tuple[str, ...]] = {}
    for k, line in enumerate(lines):
        cells = _fitted(line.lstrip("# \t") if _is_comment(line) else line, separator, kinds)
        if cells is not None:
            fitting[k] = cells
    misfit = _last_misfit(lines, fitting, separator)
    usable = [k for k in fitting if k > misfit]
    if not usable:
        unused = lines[misfit] if misfit >= 0 else ""
        return Headings(columns=None, unused=unused, preamble="\n".join(lines))
    names_at = _names_at(lines, usable, fitting)
    units_at = next((k for k in usable if k > names_at and _are_units(fitting[k])), None)
    columns = [split_heading(cell) for cell in fitting[names_at]]
    if units_at is not None:
        columns = [
            Heading(name=heading.name, unit=cell.strip("[]() ")) if cell and heading.unit is None else heading
            for heading, cell in zip(columns, fitting[units_at], strict=True)
        ]
    rest = [line for k, line in enumerate(lines) if k not in (names_at, units_at) and line.strip()]
    return Headings(columns=tuple(columns), unused="", preamble="\n".join(rest))


def _is_comment(line: str) -> bool:
    return line.lstrip().startswith("#")


def _last_misfit(lines: Sequence[str], fitting: Mapping[int, object], separator: str) -> int:
    """Return the last line of several words that does not match the columns, -1 if there is none."""
    for k in range(len(lines) - 1, -1, -1):
        if k in fitting or _is_comment(lines[k]) or not any(c.isalnum() for c in lines[k]):
            continue
        if len(split_cells(lines[k], separator)) > 1:
            return k
    return -1


def _names_at(lines: Sequence[str], usable: Sequence[int], cells: Mapping[int, Sequence[str]]) -> int:
    spoken = [k for k in usable if not _is_comment(lines[k])] or list(usable)
    named = [k for k in spoken if not _are_units(cells[k])]
    if named:
        return named[-1]
    # Channels may be called A, B, C: the line above the last one is theirs.
    return spoken[-2] if len(spoken) > 1 else spoken[-1]


def _fitted(line: str, separator: str, kinds: Sequence[Kind]) -> tuple[str, ...] | None:
    """Return the line's cells if they match the columns and are not numbers."""
    for cells in _splits(line, separator):
        while len(cells) > len(kinds) and not cells[-1]:
            cells = cells[:-1]
        while len(cells) < len(kinds) and kinds[len(cells)] == "missing":
            cells = (*cells, "")  # rows that end with separators, under a line that does not
        words = sum(bool(cell) and kind_of(cell, ".") == "text" for cell in cells)
        if len(cells) == len(kinds) and 2 * words >= sum(map(bool, cells)) > 0:
            return cells
    return None


def _splits(line: str, separator: str) -> list[tuple[str, ...]]:
    whole = split_cells(line, separator)
    if separator not in " \t" or '"' in line:
        return [whole]
    # Names may hold blanks of their own: try wider gaps, and units that stand apart from their names.
    apart = tuple(_TWO_BLANKS.split(line.strip()))
    joined = split_cells(_UNIT_APART.sub(lambda gap: "/" if "/" in gap[0] else "", line), " ")
    return [whole, apart, joined]


def _are_units(cells: Sequence[str]) -> bool:
    present = [cell for cell in cells if cell]
    known = sum(_is_unit(cell) for cell in present)
    return bool(present) and known >= _SHARE_OF_KNOWN_UNITS * len(present)


def _is_unit(text: str) -> bool:
    return parse_unit(text) is not None or time_divisor(text) is not None


def _is_over(*, name: str, gaps: tuple[str, str], unit: str) -> bool:
    # Without blanks, 'Bay 3/A' is phase A of bay 3, but 'Ia/A' and 'UL1/V' are a quantity over its unit.
    return all(gaps) or len(unit) > 1 or _CURRENT_OR_VOLTAGE.fullmatch(name) is not None


def _without_controls(text: str) -> str:
    return "".join(c if c in "\t\r\n" or unicodedata.category(c) != "Cc" else " " for c in text)


def _unescaped(name: str) -> str:
    stripped = name.strip(" \n")
    if stripped.startswith("'") and stripped[1:].startswith(ESCAPED_STARTS):
        return stripped[1:]
    return stripped
