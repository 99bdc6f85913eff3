"""Instants as records state them: to the nanosecond, with what is said of the clock."""

from __future__ import annotations

from dataclasses import dataclass, replace
from datetime import datetime, timedelta
from typing import Literal


@dataclass(frozen=True, slots=True, kw_only=True)
class Moment:
    """An instant of the recorder's clock.

    Attributes
    ----------
    second : datetime
        Date and time to the whole second, without time zone.
    nanosecond : int
        Fraction, 0 to 999 999 999. [ns]
    utc_offset : timedelta or None
        Offset of this clock from UTC; None when the record does not say.
    digits : int
        Decimals of the second that the record gave.
    """

    second: datetime
    nanosecond: int
    utc_offset: timedelta | None = None
    digits: int = 6

    def isoformat(self) -> str:
        """Return the instant in ISO 8601, with as many decimals as the record gave (0, 3, 6 or 9)."""
        fraction = f".{self.nanosecond:09d}"[: self.digits + 1] if self.digits else ""
        text = (
            self.second.strftime("%Y-%m-%dT%H:%M:%S") if self.second.year >= 1000 else self.second.isoformat()
        )
        return text + fraction + self._zone()

    def in_zone(self, utc_offset: timedelta | None) -> Moment:
        """Return the same reading of the clock with its offset from UTC stated."""
        return replace(self, utc_offset=utc_offset)

    def later(self, seconds: float) -> Moment:
        """Return the instant `seconds` later, rounded to the decimals that this one is given with."""
        unit_ns = 10 ** (9 - self.digits)
        total_ns = round((self.nanosecond + seconds * 1e9) / unit_ns) * unit_ns
        whole_s, nanosecond = divmod(total_ns, 10**9)
        return replace(self, second=self.second + timedelta(seconds=whole_s), nanosecond=nanosecond)

    def _zone(self) -> str:
        if self.utc_offset is None:
            return ""
        minutes = round(self.utc_offset.total_seconds() / 60)
        sign = "-" if minutes < 0 else "+"
        return f"{sign}{abs(minutes) // 60:02d}:{abs(minutes) % 60:02d}"

    def seconds_after(self, earlier: Moment) -> float:
        """Return the time from `earlier` to this instant of the same clock. [s]"""
        whole = (self.second - earlier.second).total_seconds()
        return whole + (self.nanosecond - earlier.nanosecond) * 1e-9


@dataclass(frozen=True, slots=True, kw_only=True)
class Clock:
    """What a record of the 2013 revision says of its clock; empty for older ones.

    Attributes
    ----------
    time_code : str
        Offset of the record's times from UTC as written, such as ``-5h30``; ``x`` when not applicable.
    local_code : str
        Offset of the recording place's local time from UTC as written.
    quality_code : int or None
        Time quality, 0 (locked) to 15 (failed).
    leap_second : {"none", "added", "subtracted", "unknown"}
        Whether a leap second fell into the record.
    """

    time_code: str = ""
    local_code: str = ""
    quality_code: int | None = None
    leap_second: Literal["none", "added", "subtracted", "unknown"] = "unknown"

    @property
    def quality(self) -> str:
        """The quality code in words (IEC 60255-24:2013, values as in IEEE C37.118; from memory)."""
        code = self.quality_code
        if code is None:
            return "not stated"
        if code == 0:
            return "locked to a reliable source"
        if code == 15:
            return "clock failed, time not reliable"
        if code == 12 or code > 12:
            return "unlocked, error not stated"
        return f"unlocked, within 10^{code - 10:d} s"
