"""Dates of configuration files: day or month first, two or four digits of the year, up to nine decimals."""

from __future__ import annotations

import re
from datetime import datetime, timedelta

from analyzer.records.moment import Moment

_DATE = re.compile(r"^\s*(\d{1,4})\s*[/.-]\s*(\d{1,2})\s*[/.-]\s*(\d{1,4})\s*$")
_TIME = re.compile(r"^\s*(\d{1,2})\s*:\s*(\d{1,2})\s*:\s*(\d{1,2})(?:[.](\d*))?\s*$")
_OFFSET = re.compile(r"^\s*([+-]?)(\d{1,2})(?:[hH:](\d{1,2}))?\s*$")


def parse_moment(line: str, *, month_first: bool) -> tuple[Moment | None, str]:
    """Return the instant that ``date,time`` states, and a remark on what was odd about it.

    Parameters
    ----------
    line : str
        As in the file.
    month_first : bool
        Whether the revision writes the month before the day (1991); the other order is taken where only
        that makes a date.

    Returns
    -------
    moment : Moment or None
        None where the text states no instant.
    remark : str
        Empty where nothing was odd.
    """
    date_text, _, time_text = line.partition(",")
    date, time = _DATE.match(date_text), _TIME.match(time_text.split(",")[0])
    if date is None or time is None:
        return None, "no date and time are given"
    remarks = []
    first, second, last = (int(group) for group in date.groups())
    year_text = date[3]
    if len(date[1]) == 4:  # ISO order
        year, month, day, year_text = first, second, last, date[1]
        remarks.append("year first")
    else:
        month, day, year = (first, second, last) if month_first else (second, first, last)
    if month > 12 >= day:
        month, day = day, month
        remarks.append("day and month stand in the other order")
    if len(year_text) <= 2:
        year += 1900 if year >= 80 else 2000
        remarks.append(f"two-digit year read as {year}")
    hour, minute, seconds = (int(time[k]) for k in (1, 2, 3))
    fraction = (time[4] or "")[:9]
    carry = timedelta(0)
    if seconds == 60:
        seconds, carry = 59, timedelta(seconds=1)
        remarks.append("second 60 read as the next minute's first")
    if hour == 24:
        hour, carry = 0, carry + timedelta(days=1)
        remarks.append("hour 24 read as the next day's first")
    try:
        moment = datetime(year, month, day, hour, minute, seconds) + carry
    except (ValueError, OverflowError):
        return None, "the date or time is not one of the calendar"
    digits = 9 if len(fraction) > 6 else 6
    return (
        Moment(second=moment, nanosecond=int(fraction.ljust(9, "0") or "0"), digits=digits),
        ", ".join(remarks),
    )


def parse_offset(code: str) -> timedelta | None:
    """Return the offset from UTC that a time code states (``-4``, ``+5h30``, ``0``); None for ``x``."""
    match = _OFFSET.match(code)
    if match is None:
        return None
    hours, minutes = int(match[2]), int(match[3] or 0)
    if hours > 14 or minutes > 59:
        return None
    offset = timedelta(hours=hours, minutes=minutes)
    return -offset if match[1] == "-" else offset
