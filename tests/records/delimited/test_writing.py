from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.records.blobs import Blob
from analyzer.records.channels import AnalogChannel, DigitalChannel
from analyzer.records.delimited import read_delimited, write_delimited
from analyzer.records.model import Origin, Record
from analyzer.records.options import ReadOptions
from analyzer.records.problems import RecordError
from analyzer.records.sources import ArraySource
from analyzer.records.timebase import TimeBase

LAYOUTS = [(",", "."), (";", "."), (";", ","), ("\t", ","), ("|", ".")]


def read_back(path: Path) -> Record:
    return read_delimited(Blob(name=path.name, shown=str(path), path=path), options=ReadOptions())


def simple(**changes: object) -> Record:
    record = Record.from_arrays(
        {"IA": ([1.5, -0.1, 1e-300, np.nan], "kA"), "UA": ([0.0, -0.0, 3.0, 1 / 3], "V")},
        sample_rate_hz=4800.0,
        digital={"trip": [0, 1, 1, 0]},
    )
    return replace(record, **changes)  # type: ignore[arg-type]


def test_what_is_written(tmp_path: Path) -> None:
    path = write_delimited(simple(), tmp_path / "out.csv")
    assert path.read_bytes().decode("utf-8") == (
        "time [s],IA [A],UA [V],trip\n"
        "0,1500,0,0\n"
        "0.00020833333333333335,-100,0,1\n"
        "0.0004166666666666667,1e-297,3,1\n"
        "0.000625,,0.3333333333333333,0\n"
    )


@pytest.mark.parametrize(("separator", "decimal"), LAYOUTS)
def test_every_layout_reads_back_the_same(tmp_path: Path, separator: str, decimal: str) -> None:
    record = simple()
    back = read_back(write_delimited(record, tmp_path / "out.csv", separator=separator, decimal=decimal))
    np.testing.assert_array_equal(back.signals(), record.signals())
    np.testing.assert_array_equal(back.times(), record.times())
    assert back.sample_rates_hz == (4800.0,)
    assert back.states("trip").tolist() == [0, 1, 1, 0]
    assert [(c.name, c.unit) for c in back.analog] == [("IA", "A"), ("UA", "V")]


@pytest.mark.parametrize(
    ("separator", "decimal"), [(",", ","), (" ", "."), (";", ";"), ("", "."), (";;", ".")]
)
def test_layouts_that_cannot_be_read_back_are_refused(tmp_path: Path, separator: str, decimal: str) -> None:
    with pytest.raises(ValueError, match="cannot write"):
        write_delimited(simple(), tmp_path / "out.csv", separator=separator, decimal=decimal)
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    "name", ["=1+2", "+IA", "-IA", "@IA", "\tIA", "\rIA", "'=IA", '=HYPERLINK("x","y")', "=a;b|c"]
)
@pytest.mark.parametrize(("separator", "decimal"), LAYOUTS)
def test_names_are_no_formulas_and_come_back(tmp_path: Path, name: str, separator: str, decimal: str) -> None:
    record = Record.from_arrays(
        {name: ([1.5, 2.5, 3.5], "A")}, sample_rate_hz=50.0, digital={f"{name}!": [0, 1, 1]}
    )
    path = write_delimited(record, tmp_path / "out.csv", separator=separator, decimal=decimal)
    heading = path.read_bytes().decode("utf-8").split("\n0" + separator)[0]
    for cell in heading.split(separator):
        assert not cell.lstrip('"').startswith(("=", "+", "-", "@", "\t", "\r"))
    back = read_back(path)
    assert back.analog[0].name == name
    assert back.digital[0].name == f"{name}!"


def test_control_codes_in_names_are_not_written(tmp_path: Path) -> None:
    record = Record.from_arrays({"I\x1b[31mA\x00": ([1.5, 2.5], "A")}, sample_rate_hz=50.0)
    path = write_delimited(record, tmp_path / "out.csv")
    assert path.read_bytes().splitlines()[0] == b"time [s],I [31mA [A]"


def test_unknown_unit_and_ratio_stay_unusable(tmp_path: Path) -> None:
    analog = (
        AnalogChannel(number=0, id="X", name="X", unit="furlong", multiplier=2.0),
        AnalogChannel(number=1, id="Y", name="Y", unit="", multiplier=1.0),
        AnalogChannel(number=2, id="Z", name="Z", unit="A", side="secondary", primary=0.0, secondary=0.0),
        AnalogChannel(number=3, id="W", name="W", unit="[sq] yd", multiplier=1.0),
    )
    source = ArraySource(np.arange(12.0).reshape(4, 3), np.empty((0, 3), dtype=np.uint8))
    timebase = TimeBase.from_rates([1000.0], [3], n_samples=3)
    record = Record(origin=Origin(path="", format="memory"), timebase=timebase, source=source, analog=analog)
    back = read_back(write_delimited(record, tmp_path / "out.csv"))
    assert [(c.name, c.unit) for c in back.analog] == [
        ("X", "furlong"), ("Y", ""), ("Z", "secondary A"), ("W", "(sq) yd")
    ]  # fmt: skip
    assert all(c.refusal is not None for c in back.analog)
    np.testing.assert_array_equal(back.as_written(), record.as_written())
    assert back.as_written(["X"])[0].tolist() == [0.0, 2.0, 4.0]


def test_repeated_names_are_written_apart(tmp_path: Path) -> None:
    channels = tuple(
        AnalogChannel(number=k, id=key, name=name, unit="A")
        for k, (key, name) in enumerate([("IA", "IA"), ("IA #2", "IA"), ("analog 3", "")])
    )
    source = ArraySource(np.ones((3, 4)), np.zeros((1, 4), dtype=np.uint8))
    record = Record(
        origin=Origin(path="", format="memory"),
        timebase=TimeBase.from_rates([1000.0], [4], n_samples=4),
        source=source,
        analog=channels,
        digital=(DigitalChannel(number=0, id="digital 1", name=" "),),
    )
    back = read_back(write_delimited(record, tmp_path / "out.csv"))
    assert [c.id for c in back.analog] == ["IA", "IA #2", "analog 3"]
    assert [c.id for c in back.digital] == ["digital 1"]


def test_part_of_a_record(tmp_path: Path) -> None:
    record = Record.from_arrays({"IA": (np.arange(100.0), "A")}, sample_rate_hz=1000.0)
    back = read_back(write_delimited(record.between(0.02, 0.03), tmp_path / "out.csv"))
    assert back.signal("IA").tolist() == list(range(20, 31))
    assert back.sample_rates_hz == (1000.0,)


def test_record_longer_than_a_block(tmp_path: Path) -> None:
    values = np.random.default_rng(3).normal(size=150_000)
    record = Record.from_arrays({"IA": (values, "A")}, sample_rate_hz=7680.0)
    back = read_back(write_delimited(record, tmp_path / "out.csv"))
    np.testing.assert_array_equal(back.signal("IA"), values)
    np.testing.assert_array_equal(back.times(), record.times())


def test_input_is_never_overwritten(tmp_path: Path) -> None:
    path = write_delimited(simple(), tmp_path / "out.csv")
    before = path.read_bytes()
    with pytest.raises(RecordError) as caught:
        write_delimited(read_back(path), path, existing="replace")
    assert caught.value.code == "would-overwrite-input"
    with pytest.raises(RecordError) as caught:
        write_delimited(simple(), path)
    assert caught.value.code == "exists"
    assert path.read_bytes() == before
    write_delimited(simple().between(0.0, 0.0003), path, existing="replace")
    assert len(path.read_bytes()) < len(before)


NAMES = (
    st.text(st.characters(exclude_categories=["Cc", "Cs"]), min_size=1, max_size=12)
    .map(str.strip)
    .filter(bool)
)
UNITS = st.sampled_from(["A", "kA", "V", "kV", "mA", "Hz", "deg", "%", "MW", "Mvar", "ohm", "s", "°C"])
VALUES = st.one_of(st.floats(min_value=-1e290, max_value=1e290), st.just(float("nan")))


@st.composite
def records(draw: st.DrawFn) -> Record:
    n = draw(st.integers(2, 12))
    column = st.lists(VALUES, min_size=n, max_size=n)
    names = draw(st.lists(NAMES, min_size=1, max_size=4, unique=True))
    analog = {name: (draw(column), draw(UNITS)) for name in names}
    state_names = draw(st.lists(NAMES, max_size=3, unique=True))
    states = {name: draw(st.lists(st.integers(0, 1), min_size=n, max_size=n)) for name in state_names}
    if draw(st.booleans()):
        rate_hz = draw(st.one_of(st.integers(50, 10**6).map(float), st.floats(50, 1e6)))
        return Record.from_arrays(analog, sample_rate_hz=rate_hz, digital=states)
    steps = draw(st.lists(st.floats(1e-7, 1.0), min_size=n - 1, max_size=n - 1))
    return Record.from_arrays(analog, times_s=np.cumsum([0.0, *steps]), digital=states)


@settings(deadline=None, derandomize=True, max_examples=150)
@given(record=records(), layout=st.sampled_from(LAYOUTS))
def test_any_record_reads_back_the_same(
    tmp_path_factory: pytest.TempPathFactory, record: Record, layout: tuple[str, str]
) -> None:
    path = tmp_path_factory.mktemp("any") / "out.csv"
    write_delimited(record, path, separator=layout[0], decimal=layout[1])
    back = read_back(path)
    assert [(c.name, c.unit) for c in back.analog] == [(c.name, c.si_unit) for c in record.analog]
    np.testing.assert_array_equal(back.signals(), record.signals())
    assert [c.name for c in back.digital] == [c.name for c in record.digital]
    for mine, theirs in zip(record.digital, back.digital, strict=True):
        np.testing.assert_array_equal(back.states(theirs.id), record.states(mine.id))
    # A constant rate found in the times may differ from the written one in the last bits.
    np.testing.assert_allclose(back.times(), record.times(), rtol=0, atol=8 * np.spacing(record.times()[-1]))
