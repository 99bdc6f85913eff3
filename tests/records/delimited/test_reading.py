import numpy as np
import pytest

from analyzer.records.problems import RecordError
from tests.records.delimited.helpers import codes, message, read, refused

# 3200 Hz printed to 10 µs, as k/3200 rounded by hand: 0, 312.5 µs, 625 µs …
ROWS = [
    ("0.00000", "1.5", "-2.25", "0"),
    ("0.00031", "2.5", "1e-3", "0"),
    ("0.00063", "-3.125", "0.5", "1"),
    ("0.00094", "4", "7.75", "1"),
    ("0.00125", "-5.5", "8", "1"),
    ("0.00156", "6.5", "9", "0"),
]
IA = [1.5, 2.5, -3.125, 4.0, -5.5, 6.5]
IB = [-2.25, 0.001, 0.5, 7.75, 8.0, 9.0]
HEADING = ("time [s]", "IA [A]", "IB [kA]", "trip")


def table(separator: str = ",", decimal: str = ".", heading: tuple[str, ...] | None = HEADING) -> str:
    lines = [separator.join(cells).replace(".", decimal) for cells in ROWS]
    above = [] if heading is None else [separator.join(heading)]
    return "\n".join([*above, *lines]) + "\n"


def test_names_units_values_states_and_rate() -> None:
    record = read(table())
    assert [(c.name, c.unit, c.quantity) for c in record.analog] == [
        ("IA", "A", "current"),
        ("IB", "kA", "current"),
    ]
    assert record.signal("IA").tolist() == IA
    assert record.as_written(["IB"])[0].tolist() == IB
    np.testing.assert_allclose(record.signal("IB"), np.array(IB) * 1000, rtol=1e-15)
    assert [c.name for c in record.digital] == ["trip"]
    assert record.states("trip").tolist() == [0, 0, 1, 1, 1, 0]
    assert record.sample_rates_hz == (3200.0,)
    assert record.times().tolist() == [k / 3200 for k in range(6)]
    assert record.origin.format == "csv"
    assert record.origin.sha256() is not None


LAYOUTS = [(separator, ".") for separator in (",", ";", "\t", "|", " ", "   ", " \t ", ", ")]
LAYOUTS += [(separator, ",") for separator in (";", "\t", "|", " ", "   ", " \t ", "; ")]


@pytest.mark.parametrize(("separator", "decimal"), LAYOUTS)
def test_every_separator_and_decimal_mark_gives_the_same(separator: str, decimal: str) -> None:
    record = read(table(separator, decimal, heading=("time[s]", "IA[A]", "IB[kA]", "trip")))
    assert record.as_written().tolist() == [IA, IB]
    assert record.states("trip").tolist() == [0, 0, 1, 1, 1, 0]
    assert record.sample_rates_hz == (3200.0,)
    assert {"separator-guessed", "decimal-guessed", "rate-guessed", "digital-guessed"} <= codes(record)


def test_quoted_decimal_commas_between_commas() -> None:
    quoted = "\n".join(",".join(f'"{cell.replace(".", ",")}"' for cell in row) for row in ROWS)
    record = read(",".join(HEADING) + "\n" + quoted)
    assert record.as_written().tolist() == [IA, IB]


def test_every_guess_is_a_note_and_every_option_removes_it() -> None:
    guessed = read(table())
    assert {p.code for p in guessed.problems if p.severity == "note"} == {
        "separator-guessed",
        "decimal-guessed",
        "time-column-guessed",
        "rate-guessed",
        "digital-guessed",
    }
    stated = read(
        table(),
        separator=",",
        decimal=".",
        time_column="time",
        time_unit="s",
        sample_rate_hz=3200.0,
        units={"trip": "1"},
    )
    assert stated.problems == ()
    assert [c.id for c in stated.analog] == ["IA", "IB", "trip"]


def test_rate_guess_states_its_deviation() -> None:
    # By hand: 312.5 µs is printed as 310, 625 as 630, 937.5 as 940: the second is the worst.
    assert "3200 Hz" in message(read(table()), "rate-guessed")
    assert "5e-06 s" in message(read(table()), "rate-guessed")


@pytest.mark.parametrize(
    ("encoding", "names"),
    [
        ("utf-8", ("Übertragung", "Größe")),
        ("utf-8-sig", ("Übertragung", "Größe")),
        ("utf-16", ("Übertragung", "Größe")),
        ("utf-16-le", ("Station", "Feeder")),
        ("utf-16-be", ("Station", "Feeder")),
        ("utf-32", ("Station", "Größe")),
        ("cp1252", ("Übertragungsleitung Süd", "Größe der Erdschlußströme")),
        ("cp1251", ("Ток фазы А линии", "Напряжение нулевой последовательности")),
        ("gbk", ("线路电流甲相", "母线电压乙相")),
    ],
)
@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
def test_text_encodings_and_line_ends(encoding: str, names: tuple[str, str], end: str) -> None:
    text = table(";", ",", heading=("t [ms]", f"{names[0]} [A]", f"{names[1]} [A]", "x"))
    record = read(text.replace("\n", end).encode(encoding))
    assert [c.name for c in record.analog] == list(names)
    assert record.as_written().tolist() == [IA, IB]


def test_stated_encoding_goes_before_the_guess() -> None:
    data = table(heading=("t [s]", "Tür [A]", "IB [A]", "x")).encode("cp1252")
    assert "encoding-guessed" in codes(read(data))
    stated = read(data, text_encoding="cp1252")
    assert stated.analog[0].name == "Tür"
    assert "encoding-guessed" not in codes(stated)
    assert refused(data, text_encoding="klingon").code == "unknown-encoding"


def test_without_heading_channels_have_no_unit_until_one_is_stated() -> None:
    record = read(table(heading=None))
    assert [(c.id, c.unit) for c in record.analog] == [("column 2", ""), ("column 3", ""), ("column 4", "")]
    assert record.digital == ()
    assert {"no-heading", "time-column-guessed", "time-unit-guessed"} <= codes(record)
    with pytest.raises(RecordError, match="no unit"):
        record.signal("column 2")
    assert read(table(heading=None), units={"column 2": "A"}).signal("column 2").tolist() == IA


def test_unknown_unit_is_kept_and_refused() -> None:
    record = read(table(heading=("t [s]", "IA [furlong]", "IB", "x")))
    assert [c.unit for c in record.analog] == ["furlong", ""]
    for key in ("IA", "IB"):
        with pytest.raises(RecordError) as caught:
            record.signal(key)
        assert caught.value.code == "unknown-unit"


def test_units_on_a_line_of_their_own_below_preamble_and_comments() -> None:
    text = "Recorder of Bay 7\nRate;3200\n# made by hand\n\nTime;IA;IB;trip\ns;A;kA;\n"
    record = read(text + table(";", heading=None))
    assert [(c.name, c.unit) for c in record.analog] == [("IA", "A"), ("IB", "kA")]
    assert [c.name for c in record.digital] == ["trip"]
    assert "Recorder of Bay 7" in record.origin.header_text
    assert "made by hand" in record.origin.header_text


def test_channels_named_like_units_above_a_line_of_units() -> None:
    record = read("t,A,B,C\ns,A,A,A\n" + table(heading=None))
    assert [(c.name, c.unit) for c in record.analog] == [("A", "A"), ("B", "A"), ("C", "A")]


def test_heading_behind_a_comment_mark() -> None:
    record = read("# time [s], IA [A], IB [kA], trip\n" + table(heading=None))
    assert [c.name for c in record.analog] == ["IA", "IB"]


def test_heading_with_blanks_over_columns_of_blanks() -> None:
    for line in (
        "  Time (ms)  Ia (kA)   Ib (kA)  trip",
        "Time (ms) Ia (kA) Ib (kA) trip",
        "Time / s Ia / A Ib / A x",
    ):
        record = read(line + "\n" + table("   ", heading=None))
        assert [c.name for c in record.analog] == ["Ia", "Ib"], line


def test_heading_of_another_length_is_not_used() -> None:
    record = read(table(heading=("time [s]", "IA [A]", "IB [A]")))
    assert [(c.name, c.unit) for c in record.analog][:1] == [("column 2", "")]
    assert "3200" in message(record, "rate-guessed")
    assert "heading-not-used" in codes(record)


def test_quoted_heading_with_line_end_and_separator_inside() -> None:
    heading = '"time\n[s]","Bay 1, phase A [A]","say ""B"" [A]",trip\n'
    record = read(heading + table(heading=None))
    assert [c.name for c in record.analog] == ["Bay 1, phase A", 'say "B"']


def test_line_that_states_the_separator() -> None:
    record = read("sep=;\r\n" + table(";", ",").replace("\n", "\r\n"))
    assert record.as_written().tolist() == [IA, IB]
    assert "separator-guessed" not in codes(record)


def test_separators_at_the_ends_of_lines() -> None:
    trailing = table(";").replace("\n", ";\n")
    for text in (trailing, trailing.replace("trip;", "trip"), trailing.replace(";\n", ";;;\n")):
        record = read(text)
        assert [c.name for c in record.analog] == ["IA", "IB"]
        assert [c.name for c in record.digital] == ["trip"]


def test_missing_cells_are_not_a_number_and_counted() -> None:
    text = table().replace("-3.125", "").replace("7.75", "NaN").replace("-5.5", "--").replace("6.5", "inf")
    record = read(text)
    np.testing.assert_array_equal(
        record.as_written(), [[1.5, 2.5, np.nan, 4, np.nan, np.nan], [*IB[:3], np.nan, 8, 9]]
    )
    assert "3 of 6" in message(record.survey(), "missing-samples")


def test_missing_state_is_the_one_before() -> None:
    record = read(table().replace("1e-3,0", "1e-3,").replace("8,1", "8,"))
    assert record.states("trip").tolist() == [0, 0, 1, 1, 1, 0]
    assert "2 missing states" in message(record, "states-filled")


def test_text_columns_are_left_out_with_a_note() -> None:
    record = read("time [s],state,IA [A]\n0,CLOSED,1\n0.001,CLOSED,2\n0.002,OPEN,3\n")
    assert [c.name for c in record.analog] == ["IA"]
    assert "'state'" in message(record, "column-not-used")


def test_column_that_counts_the_rows_is_no_channel() -> None:
    record = read("n,time [s],IA [A]\n1,0,5\n2,0.001,5\n3,0.002,5\n")
    assert [c.name for c in record.analog] == ["IA"]
    assert "column-not-used" in codes(record)


@pytest.mark.parametrize(
    ("cells", "digital"),
    [
        (("0", "1", "0"), True),
        (("0", "0", "0"), True),
        (("0.0", "1.0", "0.0"), False),
        (("0", "1", "2"), False),
    ],
)
def test_only_bare_zeros_and_ones_are_digital(cells: tuple[str, ...], digital: bool) -> None:
    rows = "".join(f"0.00{k},5,{cell}\n" for k, cell in enumerate(cells))
    record = read("time [s],IA [A],X\n" + rows)
    assert [c.name for c in record.digital] == (["X"] if digital else [])


def test_blank_and_repeated_names_are_told_apart() -> None:
    record = read("time [s],IA [A],IA [A],\n" + "".join(f"0.00{k},1.5,2.5,3.5\n" for k in range(4)))
    assert [c.id for c in record.analog] == ["IA", "IA #2", "column 4"]


def test_values_come_to_the_last_bit() -> None:
    numbers = ["0.1", "123456789.12345679", "5e-324", "1.7976931348623157e308", "-2.2250738585072014E-308"]
    rows = "".join(f"0.00{k},{number}\n" for k, number in enumerate(numbers))
    assert read("time [s],IA [A]\n" + rows).signal("IA").tolist() == [float(number) for number in numbers]


def test_rate_alone_makes_the_times() -> None:
    text = "IA [A],IB [A]\n" + "".join(f"{k}.5,{k * k}\n" for k in range(5))
    record = read(text, sample_rate_hz=1000.0)
    assert record.times().tolist() == [0, 0.001, 0.002, 0.003, 0.004]
    assert record.signal("IA").tolist() == [0.5, 1.5, 2.5, 3.5, 4.5]
    error = refused("IA [A],IB [A]\n1.5,2\n1.5,3\n1.5,4\n")
    assert (error.code, error.line) == ("no-times", 2)
    assert "sampling rate" in error.hint


def test_single_column_with_a_rate() -> None:
    record = read("IA [A]\n1.5\n2.5\n\n3.5\n", sample_rate_hz=50.0)
    assert record.signal("IA").tolist() == [1.5, 2.5, 3.5]


def test_stated_rate_goes_before_the_times_and_says_when_they_disagree() -> None:
    record = read(table(), sample_rate_hz=1000.0)
    assert record.sample_rates_hz == (1000.0,)
    assert [c.name for c in record.analog] == ["IA", "IB"]
    text = "time [s],IA [A]\n" + "".join(f"{k / 1000},1\n" for k in range(100))
    assert "rate-disagrees" in codes(read(text, sample_rate_hz=4000.0))
    assert "rate-disagrees" not in codes(read(text, sample_rate_hz=1000.0))


def test_stated_time_column_and_unit() -> None:
    text = "a,b,IA [A]\n" + "".join(f"{k * 7 % 5},{k / 4},{k}\n" for k in range(12))
    record = read(text, time_column="b", time_unit="ms")
    assert record.sample_rates_hz == (4000.0,)
    assert [c.name for c in record.analog] == ["a", "IA"]
    error = refused(text, time_column="zeit")
    assert error.code == "no-such-column"
    assert "a, b, IA" in error.hint


@pytest.mark.parametrize(
    "stated",
    [
        {"separator": ";;"},
        {"separator": ""},
        {"separator": "x"},
        {"separator": "é"},
        {"decimal": "'"},
        {"time_unit": "fortnight"},
        {"sample_rate_hz": 0.0},
    ],
)
def test_options_without_meaning_are_wrong_arguments(stated: dict[str, object]) -> None:
    with pytest.raises(ValueError, match="must be"):
        read(table(), **stated)


def test_nominal_frequency_is_passed_on() -> None:
    assert read(table(), nominal_frequency_hz=60.0).nominal_frequency_hz == 60.0
