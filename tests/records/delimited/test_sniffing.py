import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.records.delimited import sniff_delimited

NUMBERS = "".join(f"{k / 1000:.3f};{k},5;{k * k}\n" for k in range(30))


@pytest.mark.parametrize("name", ["a.csv", "A.CSV", "a.tsv", "a.txt", "a.tab"])
@pytest.mark.parametrize(
    "text",
    [
        "time [s];IA [A];IB [A]\n" + NUMBERS,
        NUMBERS,
        "# made by hand\nsome words\n\n" + NUMBERS,
        NUMBERS.replace(";", "\t"),
        NUMBERS.replace(",", ".").replace(";", ","),
        NUMBERS.replace(";", "   "),
        "".join(f"2024-05-01T12:00:00.{k:03d}Z,{k}\n" for k in range(9)),
        "time [s];IA [A]\n" + NUMBERS[:-5],
    ],
)
def test_tables_are_recognised(name: str, text: str) -> None:
    assert sniff_delimited(text.encode(), name)
    assert sniff_delimited(text.encode("utf-16"), name)


@pytest.mark.parametrize("name", ["a.cfg", "a.dat", "a", "csv", "a.csv.zip"])
def test_other_names_are_not_claimed(name: str) -> None:
    assert not sniff_delimited(NUMBERS.encode(), name)


@pytest.mark.parametrize(
    "data",
    [
        b"",
        b"Dear reader,\nplease find enclosed 3 files, 2 of 2023, 1 of 2024.\nYours\n",
        b"key,value\nvoltage,110\nname,Upper Bay\nowner,nobody\n",
        b"one,two\n1,2\n3,4\n",
        b"time\n0.1\n0.2\n0.3\n0.4\n0.5\n",
        b"[section]\na = 1\nb = 2\nc = 3\n",
        np.arange(4000, dtype="<i4").tobytes(),
        b"\0" * 4096,
    ],
)
def test_other_content_is_not_claimed(data: bytes) -> None:
    assert not sniff_delimited(data, "a.txt")


@settings(deadline=None, derandomize=True)
@given(data=st.binary(max_size=400), encoding=st.sampled_from(["", "utf-16", "csv"]))
def test_sniffing_never_raises(data: bytes, encoding: str) -> None:
    if encoding == "utf-16":
        data = b"\xff\xfe" + data
    elif encoding == "csv":
        data = bytes(b"0123456789,;.\t\n\"'-e# "[k % 21] for k in data)
    assert sniff_delimited(data, "a.csv") in (True, False)
