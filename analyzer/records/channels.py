"""Channels of a record: what the file says of each, and how its numbers become primary SI values."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal

from analyzer.records.problems import Problem
from analyzer.records.units import Quantity, Unit, parse_unit

Side = Literal["primary", "secondary", "unstated"]
# Beyond these no scaling is meant; within them no stored number overflows.
_SCALE_LIMIT = 1e60


@dataclass(frozen=True, slots=True, kw_only=True)
class AnalogChannel:
    """One analog channel as the file describes it.

    Attributes
    ----------
    number : int
        Position among the analog channels, counted from 0.
    id : str
        Name made unique within the record; the key by which the channel is asked for.
    name, phase, circuit, unit : str
        As written in the file.
    multiplier, addend : float
        Value in `unit` = multiplier * stored + addend.
    skew_s : float
        Delay of this channel's sampling after the sample time. [s]
    stored_min, stored_max : float or None
        Declared range of the stored numbers.
    primary, secondary : float or None
        Rated values of the instrument transformer; only their ratio counts.
    side : {"primary", "secondary", "unstated"}
        Side that the values in `unit` are on.
    """

    number: int
    id: str
    name: str
    unit: str
    phase: str = ""
    circuit: str = ""
    multiplier: float = 1.0
    addend: float = 0.0
    skew_s: float = 0.0
    stored_min: float | None = None
    stored_max: float | None = None
    primary: float | None = None
    secondary: float | None = None
    side: Side = "primary"

    @property
    def known_unit(self) -> Unit | None:
        """The unit, None when its spelling is not known."""
        return parse_unit(self.unit)

    @property
    def quantity(self) -> Quantity | None:
        """What the channel measures, by its unit; None when that is not known."""
        unit = self.known_unit
        return unit.quantity if unit else None

    @property
    def si_unit(self) -> str:
        """Unit of the values this package hands out; empty when the file's unit is not known."""
        unit = self.known_unit
        return unit.si if unit else ""

    @property
    def ratio(self) -> float | None:
        """Factor from the values in the file to the primary side; None when the file does not tell it."""
        unit = self.known_unit
        if self.side != "secondary" or (unit is not None and unit.quantity not in ("voltage", "current")):
            return 1.0
        if not self.primary or not self.secondary or self.primary < 0 or self.secondary < 0:
            return None
        return self.primary / self.secondary

    @property
    def refusal(self) -> Problem | None:
        """Why the values cannot be given in primary SI units; None when they can."""
        unit, ratio = self.known_unit, self.ratio
        if unit is None:
            written = f"unit {self.unit!r} is not known" if self.unit.strip() else "no unit is given"
            return Problem(
                code="unknown-unit",
                severity="warning",
                message=f"{written}: the channel's values are not used; state its unit to use them",
                where=f"channel {self.id}",
            )
        if ratio is None:
            return Problem(
                code="unknown-ratio",
                severity="warning",
                message="values are secondary and the transformer ratio is missing or zero: "
                "the channel's values are not used",
                where=f"channel {self.id}",
            )
        scale = ratio * unit.factor
        if not max(abs(self.multiplier * scale), abs(self.addend * scale)) < _SCALE_LIMIT:
            return Problem(
                code="absurd-scale",
                severity="warning",
                message="multiplier, addend or transformer ratio is beyond all reason: "
                "the channel's values are not used",
                where=f"channel {self.id}",
            )
        return None


@dataclass(frozen=True, slots=True, kw_only=True)
class DigitalChannel:
    """One digital channel: `id` is unique, `normal_state` is None where the file is silent."""

    number: int
    id: str
    name: str
    phase: str = ""
    circuit: str = ""
    normal_state: int | None = None


def unique_ids(names: Iterable[str], *, kind: Literal["analog", "digital"]) -> list[str]:
    """Return the names made unique: blanks become a number, repeats get one.

    Parameters
    ----------
    names : iterable of str
        As written, in the order of the channels.
    kind : {"analog", "digital"}
        For the word used where a name is blank.

    Returns
    -------
    list of str
    """
    taken: set[str] = set()
    ids = []
    for position, name in enumerate(names, start=1):
        base = name.strip() or f"{kind} {position}"
        candidate = base
        if candidate in taken:
            candidate = f"{base} #{position}"
            while candidate in taken:
                candidate += "'"
        taken.add(candidate)
        ids.append(candidate)
    return ids
