"""Numbers as an engineer reads them: prefixed units, digits that the uncertainty bears out."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from analyzer.findings import Quantity

NOT_DETERMINED = "not determined"
_SIGNIFICANT = 4
_SIGNIFICANT_OF_UNCERTAINTY = 2
_MOST_DECIMALS = 6
_SYMBOLS = {"ohm": "Ω", "deg": "°", "1": ""}
_PREFIXES = ((1e6, "M"), (1e3, "k"), (1.0, ""), (1e-3, "m"), (1e-6, "µ"))
_PREFIXED = {"V", "A", "W", "VA", "var", "H"}


def engineering(value: float, unit: str) -> str:
    """Return a value with four significant digits and its unit, such as ``12.35 kA``.

    Parameters
    ----------
    value : float
    unit : str
        SI symbol; ``deg``, ``ohm`` and ``1`` as in the findings.
    """
    factor, symbol = _scale(unit, abs(value))
    return _joined(plain_number(value / factor, _decimals_of_size(abs(value / factor))), symbol)


def with_interval(quantity: Quantity) -> tuple[str, str]:
    """Return a quantity and its 95 % interval, in one unit and with as many decimals.

    Returns
    -------
    value : str
        ``not determined`` where the record does not determine it.
    interval : str
        Empty where none can be stated.
    """
    known = [abs(x) for x in (quantity.value, quantity.low, quantity.high) if x is not None]
    factor, symbol = _scale(quantity.unit, known[0] if known else 0.0)
    low, high = (None if end is None else end / factor for end in (quantity.low, quantity.high))
    if low is not None and high is not None and high > low:
        decimals = _decimals_of_width((high - low) / 2)
    else:
        decimals = _decimals_of_size(max(known, default=0.0) / factor)
    value = quantity.value
    shown = NOT_DETERMINED if value is None else _joined(plain_number(value / factor, decimals), symbol)
    if low is not None and high is not None:
        return shown, f"{plain_number(low, decimals)} to {_joined(plain_number(high, decimals), symbol)}"
    if low is not None:
        return shown, f"above {_joined(plain_number(low, decimals), symbol)}"
    if high is not None:
        return shown, f"below {_joined(plain_number(high, decimals), symbol)}"
    return shown, ""


def _scale(unit: str, size: float) -> tuple[float, str]:
    if unit == "s" and size < 10.0:  # times within a record are all read in one unit
        return 1e-3, "ms"
    if unit in _PREFIXED and size > 0:
        factor, prefix = next((pair for pair in _PREFIXES if size >= pair[0]), _PREFIXES[-1])
        return factor, prefix + unit
    return 1.0, _SYMBOLS.get(unit, unit)


def _decimals_of_size(size: float) -> int:
    return _decimals(size, _SIGNIFICANT) if size > 0 else 0


def _decimals_of_width(half_width: float) -> int:
    return _decimals(half_width, _SIGNIFICANT_OF_UNCERTAINTY)


def _decimals(size: float, digits: int) -> int:
    exponent = int(f"{size:.{digits - 1}e}".partition("e")[2])  # of the rounded number: 0.0996 is 0.10
    return min(max(digits - 1 - exponent, 0), _MOST_DECIMALS)


def plain_number(value: float, decimals: int) -> str:
    """Return a number with so many decimals, never a zero with a minus."""
    text = f"{value:.{decimals}f}" if abs(value) < 1e9 else f"{value:.3e}"
    return text[1:] if text.startswith("-") and not text.strip("-0.") else text


def _joined(number: str, symbol: str) -> str:
    if not symbol:
        return number
    return f"{number}{symbol}" if symbol == "°" else f"{number} {symbol}"
