"""``offset-mismatch`` and ``xr-mismatch``: rows that depart and have a code."""

from __future__ import annotations

import pytest

from analyzer.departures import ties_broken
from analyzer.findings import Comparison, Quantity


def row(check: str, verdict: str) -> Comparison:
    return Comparison(
        check=check,
        measured=Quantity.of(12.0, 0.5, "A"),
        theory=Quantity.of(8.0, 0.3, "A"),
        difference=4.0,
        in_sigmas=6.9,
        verdict=verdict,
        says=f"{check} says 12 against 8.",
    )


@pytest.mark.parametrize(
    ("check", "code"), [("offset-continuity", "offset-mismatch"), ("x-over-r-routes", "xr-mismatch")]
)
def test_a_row_that_departs_becomes_a_departure_in_its_words(check, code):
    (found,) = ties_broken((row(check, "departs"),))
    assert (found.code, found.severity) == (code, "warning")
    assert (found.statistic, found.threshold) == (6.9, 3.0)
    assert found.says == f"{check} says 12 against 8."


@pytest.mark.parametrize("verdict", ["agrees", "undetermined"])
def test_what_does_not_depart_is_none(verdict):
    assert ties_broken((row("offset-continuity", verdict), row("x-over-r-routes", verdict))) == ()


def test_rows_without_a_code_are_no_departure():
    assert ties_broken((row("peak", "departs"), row("source-z1-z2", "departs"))) == ()


def test_departures_come_in_the_order_of_the_rows():
    rows = (row("x-over-r-routes", "departs"), row("peak", "departs"), row("offset-continuity", "departs"))
    assert [d.code for d in ties_broken(rows)] == ["xr-mismatch", "offset-mismatch"]
