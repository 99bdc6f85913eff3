"""What a reader may be told about a file, where the file itself is silent or wrong."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field


@dataclass(frozen=True, slots=True, kw_only=True)
class ReadOptions:
    """Statements about a file that go before what the reader would find out.

    Attributes
    ----------
    text_encoding : str or None
        Encoding of names and text, as Python calls it.
    units : mapping of str to str
        Unit of a channel by its id.
    nominal_frequency_hz : float or None
        Nominal power frequency. [Hz]
    sample_rate_hz : float or None
        Sampling rate of delimited text without a time column. [Hz]
    separator, decimal : str or None
        Field separator and decimal mark of delimited text.
    time_column, time_unit : str or None
        Name of the time column of delimited text, and its unit (``s``, ``ms``, ``us``, ``ns``).
    """

    text_encoding: str | None = None
    units: Mapping[str, str] = field(default_factory=dict)
    nominal_frequency_hz: float | None = None
    sample_rate_hz: float | None = None
    separator: str | None = None
    decimal: str | None = None
    time_column: str | None = None
    time_unit: str | None = None
