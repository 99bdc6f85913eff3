"""The one way in which an instrument refuses a value: an error that names the key."""

from __future__ import annotations

import math

from analyzer.forge.errors import ForgeError


def need_positive(**values: float) -> None:
    """Raise `ForgeError` naming the first value that is not positive and finite."""
    for name, value in values.items():
        if not (math.isfinite(value) and value > 0):
            raise ForgeError("bad-value", f"{value} is not positive", where=name)


def need_not_negative(**values: float) -> None:
    """Raise `ForgeError` naming the first value that is negative or not finite."""
    for name, value in values.items():
        if not (math.isfinite(value) and value >= 0):
            raise ForgeError("bad-value", f"{value} is negative or not finite", where=name)


def need_one_of(value: str, choices: tuple[str, ...], *, where: str) -> None:
    """Raise `ForgeError` if a choice is not among those there are."""
    if value not in choices:
        raise ForgeError("bad-choice", f"{value!r} is not one of {', '.join(choices)}", where=where)
