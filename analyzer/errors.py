"""Errors that a person can act on: a stable code, what happened, where, and what to do."""

from __future__ import annotations

from typing import Any


class FaultassayError(Exception):
    """Base of every error raised on purpose.

    Parameters
    ----------
    code : str
        Stable, lower-case, hyphenated; programs may rely on it.
    message : str
        What is wrong, in one line.
    where : str, optional
        File, line, field or key.
    hint : str, optional
        What the reader can do about it.
    """

    def __init__(self, code: str, message: str, *, where: str = "", hint: str = "") -> None:
        super().__init__(message)
        self.code = code
        self.message = message
        self.where = where
        self.hint = hint

    def __str__(self) -> str:
        text = f"{self.where}: {self.message}" if self.where else self.message
        return f"{text} ({self.hint})" if self.hint else text

    def __reduce__(self) -> tuple[Any, ...]:
        # Keyword-only arguments are lost by the default, which would break errors crossing processes.
        return _rebuild, (type(self), self.__dict__)


def _rebuild(cls: type[FaultassayError], state: dict[str, Any]) -> FaultassayError:
    error = cls.__new__(cls)
    Exception.__init__(error, state.get("message", ""))
    error.__dict__.update(state)
    return error
