"""Scenario files: read, checked, and every error said with its key and, where it can be found, its line."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from analyzer.forge.errors import ForgeError
from analyzer.forge.scenario import Scenario
from analyzer.toml_file import line_of, parse_toml, read_toml

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
    text = read_toml(path, raises=ForgeError).text
    return ScenarioFile(path=path, text=text, scenario=parse_scenario(text, name=str(path)))


def parse_scenario(text: str, *, name: str = "scenario") -> Scenario:
    """Return the scenario of a TOML text; errors as `read_scenario`.

    Parameters
    ----------
    text : str
    name : str
        What errors call it.
    """
    tree = parse_toml(text, name=name, raises=ForgeError).tree
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
    line = line_of(text, steps_of(error.where)) if error.where else None
    place = f"{name}, line {line}" if line is not None else name
    where = f"{place}: {error.where}" if error.where else place
    return ForgeError(error.code, error.message, where=where, hint=error.hint)


def steps_of(key: str) -> tuple[int | str, ...]:
    """The way to a key such as ``events[1].fraction``."""
    return tuple(int(step[1:-1]) if step.startswith("[") else step for step in _STEP.findall(key))


def plain_tree(scenario: Scenario) -> dict[str, Any]:
    """Return a scenario as plain data for JSON, with only what was given."""
    return scenario.model_dump(mode="json", exclude_unset=True)
