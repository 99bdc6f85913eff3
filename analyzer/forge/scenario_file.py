"""Scenario files: read, checked, and every error said with its key and, where it can be found, its line."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from analyzer.forge.errors import ForgeError
from analyzer.forge.scenario import Scenario

_LARGEST_BYTES = 1 << 20  # a scenario is a page or two
_HEADER = re.compile(r"^\s*(\[\[|\[)\s*([A-Za-z0-9_.\s-]+?)\s*\]\]?\s*(#.*)?$")
_KEY = re.compile(r"^\s*([A-Za-z0-9_-]+(?:\s*\.\s*[A-Za-z0-9_-]+)*)\s*=")
_STEP = re.compile(r"[^.\[\]]+|\[\d+\]")


@dataclass(frozen=True, slots=True, kw_only=True)
class ScenarioFile:
    """A scenario with the text it came from.

    Parameters
    ----------
    path : Path
    text : str
    scenario : Scenario
    """

    path: Path
    text: str
    scenario: Scenario

    @contextmanager
    def naming(self) -> Iterator[None]:
        """Let errors of the forge say the file and the line of their key as well."""
        try:
            yield
        except ForgeError as error:
            raise _placed(error, str(self.path), self.text) from error


def read_scenario(path: Path) -> ScenarioFile:
    """Read and check a scenario file.

    Parameters
    ----------
    path : Path
        TOML in UTF-8.

    Returns
    -------
    ScenarioFile

    Raises
    ------
    ForgeError
        If it cannot be read (code ``cannot-read``), is no TOML (``bad-toml``), or a key is missing, unknown
        or has a wrong value (``bad-scenario``); one error, of the first such key.
    """
    try:
        with path.open("rb") as file:
            content = file.read(_LARGEST_BYTES + 1)
    except (OSError, ValueError) as error:  # a NUL in the name is a ValueError
        reason = getattr(error, "strerror", None) or str(error)
        raise ForgeError("cannot-read", f"cannot be read: {reason}", where=str(path)) from error
    if len(content) > _LARGEST_BYTES:
        raise ForgeError("cannot-read", "is too large for a scenario", where=str(path))
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise ForgeError("bad-toml", "is not UTF-8 text", where=str(path)) from error
    return ScenarioFile(path=path, text=text, scenario=parse_scenario(text, name=str(path)))


def parse_scenario(text: str, *, name: str = "scenario") -> Scenario:
    """Return the scenario of a TOML text; errors as `read_scenario`.

    Parameters
    ----------
    text : str
    name : str
        What errors call it.
    """
    try:
        tree = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise ForgeError("bad-toml", f"is no valid TOML: {error}", where=name) from error
    try:
        return Scenario.model_validate(tree)
    except ValidationError as error:
        raise _placed(as_forge_error(error), name, text) from error


def as_forge_error(error: ValidationError) -> ForgeError:
    """Return what is wrong with a scenario, by its key; the first thing where there are several."""
    # A key that is misspelt is also missing; the misspelt one is what its writer looks for.
    errors = error.errors(include_url=False)
    first = next((e for e in errors if e["type"] == "extra_forbidden"), errors[0])
    message = str(first["msg"]).removeprefix("Value error, ")
    message = {
        "missing": "is missing",
        "extra_forbidden": "is no key of this section",
        "too_short": "is empty",
        "string_pattern_mismatch": "is not spelt as it has to be",
    }.get(first["type"], message[:1].lower() + message[1:])
    given = first["input"]
    if isinstance(given, str | int | float):
        message += f", got {given!r}" if first["type"] != "extra_forbidden" else ""
    location = (*first["loc"], "do") if first["type"] == "event" else first["loc"]
    return ForgeError("bad-scenario", message, where=_key_of(location))


def _key_of(location: Sequence[int | str]) -> str:
    key = ""
    for step in location:
        if isinstance(step, int):
            key += f"[{step}]"
        elif not step.startswith("<") and step != "[key]":  # which branch of a choice was taken
            key += f".{step}" if key else step
    return key or "record.duration_s"  # what the scenario as a whole checks


def _placed(error: ForgeError, name: str, text: str) -> ForgeError:
    line = line_of(text, error.where)
    place = f"{name}, line {line}" if line is not None else name
    where = f"{place}: {error.where}" if error.where else place
    return ForgeError(error.code, error.message, where=where, hint=error.hint)


def line_of(text: str, key: str) -> int | None:
    """Return the line of a key in TOML text, or of the innermost of its tables that has a line.

    Parameters
    ----------
    text : str
    key : str
        Such as ``network.line.z1.r_ohm`` or ``events[1].fraction``.

    Returns
    -------
    int or None
        Counted from 1.
    """
    wanted = _STEP.findall(key)
    table: list[str] = []
    counts: dict[str, int] = {}
    best, best_line = 0, None
    for number, line in enumerate(text.splitlines(), start=1):
        header, assignment = _HEADER.match(line), _KEY.match(line)
        if header is not None:
            table = re.split(r"\s*\.\s*", header[2])
            if header[1] == "[[":
                counts[header[2]] = counts.get(header[2], -1) + 1
                table = [*table, f"[{counts[header[2]]}]"]
            here: list[str] = table
        elif assignment is not None:
            here = [*table, *re.split(r"\s*\.\s*", assignment[1])]
        else:
            continue
        if here == wanted[: len(here)] and len(here) > best:
            best, best_line = len(here), number
    return best_line


def plain_tree(scenario: Scenario) -> dict[str, Any]:
    """Return a scenario as plain data for JSON, with only what was given."""
    return scenario.model_dump(mode="json", exclude_unset=True)
