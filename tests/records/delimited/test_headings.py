import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.records.delimited.headings import Heading, split_heading, time_divisor, written_heading


@pytest.mark.parametrize(
    ("cell", "name", "unit"),
    [
        ("IA [A]", "IA", "A"),
        ("Ia (kA)", "Ia", "kA"),
        ("Ia / A", "Ia", "A"),
        ("Ia/A", "Ia", "A"),
        ("UL1/kV", "UL1", "kV"),
        ("Time (ms)", "Time", "ms"),
        ("t_us", "t_us", "us"),
        ("ms", "ms", "ms"),
        ("IA[]", "IA", ""),
        ("IA [furlong]", "IA", "furlong"),
        ("x [y] [A]", "x [y]", "A"),
        ("Ток (кА)", "Ток", "кА"),
        # no units, though they look a little like it
        ("Ia (L1)", "Ia (L1)", None),
        ("Bay 3/A", "Bay 3/A", None),
        ("Ia/Ib", "Ia/Ib", None),
        ("Incomer/A", "Incomer/A", None),
        ("Bay (1)", "Bay (1)", None),
        ("trip", "trip", None),
        ("'=cmd", "=cmd", None),
        ("'phase", "'phase", None),
    ],
)
def test_heading_is_split_into_name_and_unit(cell: str, name: str, unit: str | None) -> None:
    assert split_heading(cell) == Heading(name=name, unit=unit)


@pytest.mark.parametrize(
    ("unit", "divisor"),
    [
        ("s", 1.0),
        ("ms", 1e3),
        ("us", 1e6),
        ("µs", 1e6),
        ("μs", 1e6),
        ("мс", 1e3),
        ("ns", 1e9),
        ("A", None),
        ("", None),
    ],
)
def test_units_of_time(unit: str, divisor: float | None) -> None:
    assert time_divisor(unit) == divisor


@pytest.mark.parametrize(
    "name", ["=1+1", "+A", "-A", "@SUM(A1)", "\tA", "\rA", "'A", "'=A", "A", "52", "ms", "I/A"]
)
@pytest.mark.parametrize("unit", [None, "A", "", "furlong"])
def test_written_heading_reads_back_and_is_no_formula(name: str, unit: str | None) -> None:
    cell = written_heading(name, unit)
    assert not cell.startswith(("=", "+", "-", "@", "\t", "\r"))
    back = split_heading(cell)
    assert back.name == name
    assert back.unit == unit or (unit is None and back.unit == "0/1")


@settings(deadline=None, derandomize=True)
@given(
    name=st.text(st.characters(exclude_categories=["Cs", "Cc"]), min_size=1),
    unit=st.text(st.characters(exclude_categories=["Cs", "Cc"], exclude_characters="[]")),
)
def test_any_name_comes_back(name: str, unit: str) -> None:
    back = split_heading(written_heading(name, unit))
    assert (back.name, back.unit) == (name.strip(), unit.strip())
