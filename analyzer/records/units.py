"""Units as recorders write them, to SI.

Only spellings whose meaning is certain are known. An unknown one is an error of its channel and never a
factor of 1; ``MV`` and ``MA`` are left out on purpose, since recorders that write in capitals mean milli.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Quantity = Literal[
    "voltage", "current", "frequency", "angle", "power", "ratio", "time", "temperature", "other"
]


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit: what it measures, its SI symbol, and the factor to SI."""

    quantity: Quantity
    si: str
    factor: float


_VOLT = Unit("voltage", "V", 1.0)
_KILOVOLT = Unit("voltage", "V", 1e3)
_MILLIVOLT = Unit("voltage", "V", 1e-3)
_MICROVOLT = Unit("voltage", "V", 1e-6)
_AMPERE = Unit("current", "A", 1.0)
_KILOAMPERE = Unit("current", "A", 1e3)
_MILLIAMPERE = Unit("current", "A", 1e-3)
_MICROAMPERE = Unit("current", "A", 1e-6)
_DEGREE = Unit("angle", "deg", 1.0)
_ONE = Unit("ratio", "1", 1.0)

# Exact spellings first, because case carries meaning in a prefix; words after, in lower case.
# The letters А, В, к, м, Г, ц of the second group are Cyrillic.
_EXACT = {
    "V": _VOLT, "v": _VOLT, "kV": _KILOVOLT, "KV": _KILOVOLT, "kv": _KILOVOLT, "Kv": _KILOVOLT,
    "mV": _MILLIVOLT, "uV": _MICROVOLT, "µV": _MICROVOLT, "μV": _MICROVOLT,
    "A": _AMPERE, "a": _AMPERE, "kA": _KILOAMPERE, "KA": _KILOAMPERE, "ka": _KILOAMPERE, "Ka": _KILOAMPERE,
    "mA": _MILLIAMPERE, "uA": _MICROAMPERE, "µA": _MICROAMPERE, "μA": _MICROAMPERE,
    "В": _VOLT, "в": _VOLT, "кВ": _KILOVOLT, "КВ": _KILOVOLT, "кв": _KILOVOLT, "мВ": _MILLIVOLT,
    "А": _AMPERE, "а": _AMPERE, "кА": _KILOAMPERE, "КА": _KILOAMPERE, "ка": _KILOAMPERE, "мА": _MILLIAMPERE,
    "kВ": _KILOVOLT, "кV": _KILOVOLT, "kА": _KILOAMPERE, "кA": _KILOAMPERE,
    "Ｖ": _VOLT, "ｋＶ": _KILOVOLT, "Ａ": _AMPERE, "ｋＡ": _KILOAMPERE,
    "Hz": Unit("frequency", "Hz", 1.0), "HZ": Unit("frequency", "Hz", 1.0),
    "hz": Unit("frequency", "Hz", 1.0),
    "Гц": Unit("frequency", "Hz", 1.0), "mHz": Unit("frequency", "Hz", 1e-3),
    "kHz": Unit("frequency", "Hz", 1e3),
    "°": _DEGREE, "º": _DEGREE, "Deg": _DEGREE, "DEG": _DEGREE,
    "rad": Unit("angle", "deg", 57.29577951308232),
    "W": Unit("power", "W", 1.0), "kW": Unit("power", "W", 1e3), "MW": Unit("power", "W", 1e6),
    "VA": Unit("power", "VA", 1.0), "kVA": Unit("power", "VA", 1e3), "MVA": Unit("power", "VA", 1e6),
    "var": Unit("power", "var", 1.0), "VAr": Unit("power", "var", 1.0), "VAR": Unit("power", "var", 1.0),
    "kvar": Unit("power", "var", 1e3), "kVAr": Unit("power", "var", 1e3), "kVAR": Unit("power", "var", 1e3),
    "Mvar": Unit("power", "var", 1e6), "MVAr": Unit("power", "var", 1e6), "MVAR": Unit("power", "var", 1e6),
    "%": Unit("ratio", "1", 1e-2), "1": _ONE, "pu": _ONE, "p.u.": _ONE, "PU": _ONE,
    "s": Unit("time", "s", 1.0), "ms": Unit("time", "s", 1e-3), "us": Unit("time", "s", 1e-6),
    "µs": Unit("time", "s", 1e-6), "ns": Unit("time", "s", 1e-9),
    "°C": Unit("temperature", "°C", 1.0),
    "Ohm": Unit("other", "ohm", 1.0), "ohm": Unit("other", "ohm", 1.0), "Ω": Unit("other", "ohm", 1.0),
}  # fmt: skip
_WORDS = {
    "volt": _VOLT, "volts": _VOLT, "kilovolt": _KILOVOLT, "kilovolts": _KILOVOLT, "millivolt": _MILLIVOLT,
    "millivolts": _MILLIVOLT, "вольт": _VOLT, "киловольт": _KILOVOLT,
    "amp": _AMPERE, "amps": _AMPERE, "ampere": _AMPERE, "amperes": _AMPERE, "ampère": _AMPERE,
    "ampères": _AMPERE, "amperios": _AMPERE, "amper": _AMPERE,
    "kiloampere": _KILOAMPERE, "kiloamperes": _KILOAMPERE, "kiloamp": _KILOAMPERE, "kiloamps": _KILOAMPERE,
    "milliampere": _MILLIAMPERE, "milliamperes": _MILLIAMPERE, "ампер": _AMPERE, "килоампер": _KILOAMPERE,
    "voltios": _VOLT, "伏": _VOLT, "安": _AMPERE, "千伏": _KILOVOLT, "千安": _KILOAMPERE,
    "hertz": Unit("frequency", "Hz", 1.0), "degree": _DEGREE, "degrees": _DEGREE, "deg": _DEGREE,
    "one": _ONE, "none": _ONE, "second": Unit("time", "s", 1.0), "seconds": Unit("time", "s", 1.0),
    "sec": Unit("time", "s", 1.0), "msec": Unit("time", "s", 1e-3), "usec": Unit("time", "s", 1e-6),
}  # fmt: skip


def parse_unit(text: str) -> Unit | None:
    """Return the unit that `text` spells, or None when it is unknown or blank.

    Parameters
    ----------
    text : str
        As the file has it; surrounding blanks and brackets do not matter.

    Returns
    -------
    Unit or None
    """
    stripped = text.strip().strip("[]()").strip()
    return _EXACT.get(stripped) or _WORDS.get(stripped.lower())
