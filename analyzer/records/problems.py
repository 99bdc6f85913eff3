"""What is wrong with a file: problems that were repaired or tolerated, and errors that stop the reading."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Literal

from analyzer.errors import FaultassayError
from analyzer.records.text import printable

_SHOWN_PLACES = 8
_MESSAGE_LIMIT = 1000

Severity = Literal["note", "warning"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Problem:
    """Something in a file that was repaired or tolerated.

    Attributes
    ----------
    code : str
        Stable, lower-case, hyphenated.
    severity : {"note", "warning"}
        A warning may change a result; a note should not.
    message : str
        What was found and what was done about it.
    where : str
        File, line, field or channel.
    """

    code: str
    message: str
    where: str = ""
    severity: Severity = "note"


def gathered(problems: Iterable[Problem]) -> tuple[Problem, ...]:
    """Return the problems with equal ones of many places made one that names the places."""
    places: dict[Problem, list[str]] = {}
    for problem in problems:
        places.setdefault(replace(problem, where=""), []).append(
            printable(problem.where, limit=_MESSAGE_LIMIT)
        )
    merged = []
    for problem, wheres in places.items():
        shown = "; ".join(dict.fromkeys(wheres[:_SHOWN_PLACES]))
        more = len(wheres) - _SHOWN_PLACES
        merged.append(replace(problem, where=f"{shown} and {more} more" if more > 0 else shown))
    return tuple(merged)


class RecordError(FaultassayError):
    """A record, or a channel of it, that cannot be read.

    Parameters
    ----------
    code, message, hint
        As in :class:`analyzer.errors.FaultassayError`.
    path : str, optional
        The file.
    line : int, optional
        Line in that file, counted from 1.
    field : str, optional
        The field of that line, or the channel.
    """

    def __init__(
        self,
        code: str,
        message: str,
        *,
        path: str = "",
        line: int | None = None,
        field: str = "",
        hint: str = "",
    ) -> None:
        where = ", ".join(part for part in (path, f"line {line}" if line is not None else "", field) if part)
        # A file's name may hold what moves a terminal's cursor; the path itself is kept as it is.
        message, where, hint = (printable(text, limit=_MESSAGE_LIMIT) for text in (message, where, hint))
        super().__init__(code, message, where=where, hint=hint)
        self.path = path
        self.line = line
        self.field = field
