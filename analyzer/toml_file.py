"""TOML files that a person writes: read, checked against a model, errors said with their key and line."""

from __future__ import annotations

import difflib
import re
import tomllib
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, TypeVar, get_args

from pydantic import BaseModel, ValidationError

from analyzer.errors import FaultassayError

Step = int | str
Model = TypeVar("Model", bound=BaseModel)

_LARGEST_BYTES = 1 << 20  # what a person writes is a page or two
_PART = r"""(?:[A-Za-z0-9_-]+|"(?:[^"\\]|\\.)*"|'[^']*')"""
_DOTTED = rf"{_PART}(?:\s*\.\s*{_PART})*"
_HEADER = re.compile(rf"\s*(?P<open>\[\[?)\s*(?P<key>{_DOTTED})\s*\]\]?\s*(?:#.*)?$")
_ASSIGNMENT = re.compile(rf"\s*(?P<key>{_DOTTED})\s*=")
_BARE = re.compile(r"[A-Za-z0-9_-]+")
_PLACE = re.compile(r" \(at (?:line (?P<line>\d+), column (?P<column>\d+)|end of document)\)$")
_SAID = {
    "missing": "is missing",
    "extra_forbidden": "is no key of this section",
    "bool_type": "must be true or false",
    "dict_type": "must be a table",
    "float_type": "must be a number",
    "int_type": "must be a whole number",
    "finite_number": "must be a finite number",
    "string_type": "must be text in quotation marks",
    "string_too_short": "must not be empty",
}


@dataclass(frozen=True, slots=True, kw_only=True)
class TomlFile:
    """A TOML file: what errors call it, its text and its tree."""

    name: str
    text: str
    tree: dict[str, Any] = field(repr=False)

    def where(self, location: Sequence[Step]) -> str:
        """Return file, line and key of a location in the tree, as errors show it."""
        line, key = line_of(self.text, location), key_of(location)
        place = self.name if line is None else f"{self.name}, line {line}"
        return f"{place}: {key}" if key else place


def read_toml(path: Path, *, raises: type[FaultassayError]) -> TomlFile:
    """Read a TOML file.

    Parameters
    ----------
    path : Path
    raises : type
        Class of the error.

    Returns
    -------
    TomlFile

    Raises
    ------
    FaultassayError
        Of the class `raises`: if the file cannot be read (code ``cannot-read``) or is no TOML in UTF-8
        (``bad-toml``).
    """
    name = str(path)
    try:
        with path.open("rb") as file:
            content = file.read(_LARGEST_BYTES + 1)
    except (OSError, ValueError) as error:  # a NUL in the name is a ValueError
        reason = getattr(error, "strerror", None) or str(error)
        raise raises("cannot-read", f"cannot be read: {reason}", where=name) from error
    if len(content) > _LARGEST_BYTES:
        raise raises("cannot-read", "is larger than 1 MiB: hardly what is meant", where=name)
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        hint = "save it as UTF-8"
        raise raises("bad-toml", "is not UTF-8 text", where=f"{name}, line {line}", hint=hint) from error
    return parse_toml(text, name=name, raises=raises)


def parse_toml(text: str, *, name: str, raises: type[FaultassayError]) -> TomlFile:
    """Return the TOML file of a text; errors as `read_toml`."""
    try:
        tree = tomllib.loads(text)
    except RecursionError as error:
        raise raises("bad-toml", "is nested too deeply", where=name) from error
    except tomllib.TOMLDecodeError as error:
        place = _PLACE.search(str(error))
        line = (place and place["line"]) or text.rstrip().count("\n") + 1
        hint = "text stands in quotation marks, a number without; # begins a comment"
        message = f"is no valid TOML: {_PLACE.sub('', str(error))}"
        raise raises("bad-toml", message, where=f"{name}, line {line}", hint=hint) from error
    except ValueError as error:  # Python's limit on digits
        raise raises("bad-toml", "has a number of too many digits", where=name) from error
    return TomlFile(name=name, text=text, tree=tree)


def checked(toml: TomlFile, model: type[Model], *, raises: type[FaultassayError], code: str) -> Model:
    """Return what a file says as a model.

    Parameters
    ----------
    toml : TomlFile
    model : type
        Subclass of pydantic's BaseModel.
    raises, code
        Class and code of the error.

    Raises
    ------
    FaultassayError
        Of the class `raises`: one, of the uppermost key in the file that is wrong.
    """
    try:
        return model.model_validate(toml.tree)
    except ValidationError as error:
        wrong = error.errors(include_url=False)
        first = min(wrong, key=lambda one: line_of(toml.text, one["loc"]) or 0)
        message, hint = _said(first, model)
        raise raises(code, message, where=toml.where(first["loc"]), hint=hint) from error


def _said(wrong: Any, model: type[BaseModel]) -> tuple[str, str]:
    """What is wrong, in plain words, and what to do."""
    kind, given = wrong["type"], wrong["input"]
    if kind == "extra_forbidden":
        known = _known_keys(model, wrong["loc"][:-1])
        near = difflib.get_close_matches(str(wrong["loc"][-1]), known, n=1)
        hint = f"did you mean {near[0]}?" if near else f"known here are: {', '.join(known)}"
        return _SAID[kind], hint if known else ""
    if kind in ("model_type", "model_attributes_type"):
        several = isinstance(given, list) and any(isinstance(one, dict) for one in given)
        return "must be a table", "its name stands in single brackets, and once" if several else ""
    if kind in ("tuple_type", "list_type"):
        return "must be a list", "tables of a list stand in double brackets" if isinstance(
            given, dict
        ) else ""
    message = _SAID.get(kind) or str(wrong["msg"]).removeprefix("Value error, ")
    message = message.replace("Input should be", "must be")
    message = message.replace("greater than or equal to", "at least").replace(
        "less than or equal to", "at most"
    )
    if isinstance(given, str | int | float) and kind != "string_too_short":
        message += f", got {str(given).lower() if isinstance(given, bool) else repr(given)[:80]}"
    return message, ""


def _known_keys(model: type[BaseModel], location: Sequence[Step]) -> list[str]:
    """Keys that the model knows in the table at a location."""
    here: type[BaseModel] | None = model
    for step in location:
        if isinstance(step, str) and here is not None:
            known = here.model_fields.get(step)
            here = _model_in(known.annotation) if known is not None else None
    return list(here.model_fields) if here is not None else []


def _model_in(annotation: Any) -> type[BaseModel] | None:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    return next((found for part in get_args(annotation) if (found := _model_in(part))), None)


def key_of(location: Sequence[Step]) -> str:
    """Return a location as a dotted key, such as ``terminal[0].currents.a``."""
    key = ""
    for step in location:
        if isinstance(step, int):
            key += f"[{step}]"
        elif step != "[key]":  # the key of a mapping itself is wrong, not its value
            part = step if _BARE.fullmatch(step) else f'"{step}"'
            key += f".{part}" if key else part
    return key


def line_of(text: str, location: Sequence[Step]) -> int | None:
    """Return the line of a key in TOML text, or the nearest to it that has a line.

    That is the innermost table or key around it, or the first that is within it.

    Parameters
    ----------
    text : str
        Valid TOML.
    location : sequence of str and int
        Keys, and positions in arrays, from the root.

    Returns
    -------
    int or None
        Counted from 1.
    """
    best, best_line, within = 0, None, None
    wanted = tuple(location)
    for number, here in _lines(text):
        if len(here) > best and here == wanted[: len(here)]:
            best, best_line = len(here), number
        elif within is None and wanted and here[: len(wanted)] == wanted:
            within = number
    return within if best_line is None else best_line


def _lines(text: str) -> Iterator[tuple[int, tuple[Step, ...]]]:
    """Lines that begin with a key or a table's header, and where in the tree these are."""
    table: tuple[Step, ...] = ()
    last: dict[tuple[Step, ...], int] = {}  # position of the last table of each array of tables
    quotes = ""  # of the text of several lines that goes on
    for number, line in enumerate(text.split("\n"), start=1):
        if quotes:
            quotes = "" if line.count(quotes) % 2 else quotes
            continue
        quotes = next((mark for mark in ('"""', "'''") if line.count(mark) % 2), "")
        header, assignment = _HEADER.match(line.rstrip("\r")), _ASSIGNMENT.match(line)
        if header is not None:
            table = ()
            for part in _parts(header["key"]):
                table = (*table, last[table]) if table in last else table
                table = (*table, part)
            if header["open"] == "[[":
                last[table] = last.get(table, -1) + 1
            table = (*table, last[table]) if table in last else table
            yield number, table
        elif assignment is not None:
            yield number, (*table, *_parts(assignment["key"]))


def _parts(dotted: str) -> list[str]:
    return [
        next(iter(tomllib.loads(f"{part} = 0"))) if part[0] in "\"'" else part
        for part in re.findall(_PART, dotted)
    ]
