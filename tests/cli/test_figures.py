"""Numbers as they are shown."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.cli.figures import engineering, with_interval
from analyzer.findings import Quantity


@pytest.mark.parametrize(
    ("value", "unit", "shown"),
    [
        (12345.6, "A", "12.35 kA"),
        (-999.96, "V", "-1000 V"),
        (0.02713, "A", "27.13 mA"),
        (4.2e-5, "V", "42.00 µV"),
        (2.5e6, "W", "2.500 MW"),
        (0.0, "A", "0 A"),
        (0.1, "s", "100.0 ms"),
        (12.5, "s", "12.50 s"),
        (50.0, "Hz", "50.00 Hz"),
        (-37.25, "deg", "-37.25°"),
        (6.82, "ohm", "6.820 Ω"),
        (1.75, "1", "1.750"),
        (1e300, "A", "1.000e+294 MA"),
    ],
)
def test_four_digits_and_a_prefix(value, unit, shown):
    assert engineering(value, unit) == shown


@pytest.mark.parametrize(
    ("quantity", "shown"),
    [
        (Quantity.of(8640.0, None, "A", low=8625.0, high=8655.0), ("8.640 kA", "8.625 to 8.655 kA")),
        (Quantity.of(0.0452, None, "s", low=0.0439, high=0.0468), ("45.2 ms", "43.9 to 46.8 ms")),
        (Quantity.of(6.82, None, "ohm", low=6.72, high=6.92), ("6.82 Ω", "6.72 to 6.92 Ω")),
        (Quantity.of(-0.001, None, "deg", low=-0.9, high=0.9), ("0.00°", "-0.90 to 0.90°")),
        (Quantity.of(12.0, None, "1"), ("12.00", "")),
        (Quantity.of(12.0, None, "1", low=9.0), ("12.00", "above 9.00")),
        (Quantity.of(12.0, None, "1", high=15.0), ("12.00", "below 15.00")),
        (Quantity.of(1.0, 0.0, "A"), ("1.000 A", "1.000 to 1.000 A")),
        (Quantity.unknown("A"), ("not determined", "")),
    ],
)
def test_digits_are_those_that_the_interval_bears_out(quantity, shown):
    assert with_interval(quantity) == shown


@settings(deadline=None, derandomize=True)
@given(st.floats(-9e8, 9e8), st.floats(0, 9e8), st.sampled_from(["A", "V", "s", "ohm", "Hz", "1"]))
def test_what_is_shown_is_the_number_to_the_digits_shown(value, std, unit):
    shown, interval = with_interval(Quantity.of(value, std, unit))
    number, _, symbol = shown.partition(" ")
    factor = {"k": 1e3, "M": 1e6, "m": 1e-3, "µ": 1e-6}.get(symbol[:1], 1.0) if len(symbol) > 1 else 1.0
    if symbol == "Hz":
        factor = 1.0
    decimals = len(number.partition(".")[2])
    assert float(number) * factor == pytest.approx(value, abs=0.51 * factor * 10.0**-decimals, rel=1e-12)
    assert interval.endswith(symbol)
