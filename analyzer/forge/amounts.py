"""Numbers of a scenario that may be distributions, from which a campaign draws for each record."""

from __future__ import annotations

import math
from typing import Annotated, Any, Generic, Self, TypeVar

import numpy as np
from pydantic import AfterValidator, BaseModel, ConfigDict, Discriminator, Field, Tag, model_validator

from analyzer.forge.errors import ForgeError

Word = TypeVar("Word", bound=str)
_LARGEST, _SMALLEST = 1e12, 1e-15  # beyond what any network has, and well within what arithmetic holds


def _within_reason(value: float) -> float:
    if value != 0.0 and not _SMALLEST <= abs(value) <= _LARGEST:
        raise ValueError(f"is beyond all reason: not 0, nor between {_SMALLEST:g} and {_LARGEST:g} in size")
    return value


Number = Annotated[float, Field(strict=True, allow_inf_nan=False), AfterValidator(_within_reason)]


class Section(BaseModel):
    """Base of a scenario's parts: what it does not know is refused, and nothing in it can be changed."""

    model_config = ConfigDict(frozen=True, extra="forbid", allow_inf_nan=False)


class Uniform(Section):
    """Evenly between two ends: ``{ uniform = [low, high] }``."""

    uniform: tuple[Number, Number]

    @model_validator(mode="after")
    def _in_order(self) -> Self:
        if self.uniform[0] > self.uniform[1]:
            raise ValueError("the lower end comes first")
        return self


class LogUniform(Section):
    """With a logarithm evenly between those of two positive ends: ``{ log_uniform = [low, high] }``."""

    log_uniform: tuple[Number, Number]

    @model_validator(mode="after")
    def _in_order(self) -> Self:
        if not 0.0 < self.log_uniform[0] <= self.log_uniform[1]:
            raise ValueError("both ends are above zero, the lower one first")
        return self


class Normal(Section):
    """Normally distributed: ``{ normal = [mean, standard_deviation] }``."""

    normal: tuple[Number, Number]

    @model_validator(mode="after")
    def _not_negative(self) -> Self:
        if self.normal[1] < 0.0:
            raise ValueError("a standard deviation is not negative")
        return self


class Choice(Section):
    """One of several numbers, each as likely: ``{ choice = [1, 2, 5] }``."""

    choice: Annotated[tuple[Number, ...], Field(min_length=1)]


class WordChoice(Section, Generic[Word]):
    """One of several words, each as likely: ``{ choice = ["AG", "BC"] }``."""

    choice: Annotated[tuple[Word, ...], Field(min_length=1)]


Distribution = Uniform | LogUniform | Normal | Choice
_BY_KEY: dict[str, type[Distribution]] = {
    "uniform": Uniform,
    "log_uniform": LogUniform,
    "normal": Normal,
    "choice": Choice,
}


def _kind_of_amount(value: Any) -> str | None:
    if isinstance(value, Distribution):
        return f"<{type(value).__name__}>"
    if isinstance(value, dict):
        known = [cls.__name__ for key, cls in _BY_KEY.items() if key in value]
        return f"<{known[0]}>" if len(known) == 1 else None
    return "<number>"


Amount = Annotated[
    Annotated[Number, Tag("<number>")]
    | Annotated[Uniform, Tag("<Uniform>")]
    | Annotated[LogUniform, Tag("<LogUniform>")]
    | Annotated[Normal, Tag("<Normal>")]
    | Annotated[Choice, Tag("<Choice>")],
    Discriminator(
        _kind_of_amount,
        custom_error_type="amount",
        custom_error_message="must be a number or one of { uniform = [low, high] }, { log_uniform = "
        "[low, high] }, { normal = [mean, deviation] }, { choice = [one, another] }",
    ),
]


def settled(amount: float | Distribution) -> float:
    """Return the number of an amount.

    Parameters
    ----------
    amount : float or distribution

    Raises
    ------
    ForgeError
        If it is still a distribution (code ``not-drawn``).
    """
    if isinstance(amount, Distribution):
        raise ForgeError("not-drawn", "is still a distribution", hint="draw the scenario first")
    return amount


def drawn_tree(value: Any, rng: np.random.Generator) -> Any:
    """Return plain data with a number or word in place of each distribution, drawn in the data's order."""
    if isinstance(value, dict):
        if len(value) == 1 and next(iter(value)) in _BY_KEY:
            ((kind, numbers),) = value.items()
            return _drawn(kind, numbers, rng)
        return {key: drawn_tree(item, rng) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [drawn_tree(item, rng) for item in value]
    return value


def _drawn(kind: str, of: Any, rng: np.random.Generator) -> Any:
    if kind == "choice":
        return of[int(rng.integers(len(of)))]
    first, second = of
    if kind == "uniform":
        return float(rng.uniform(first, second))
    if kind == "normal":
        return float(rng.normal(first, second))
    # Rounding of the logarithm must not leave the interval.
    return float(np.clip(np.exp(rng.uniform(math.log(first), math.log(second))), first, second))
