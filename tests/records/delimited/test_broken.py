import time
from concurrent.futures import ProcessPoolExecutor
from multiprocessing import get_context
from pathlib import Path

import numpy as np
import pytest

from analyzer.records.delimited import sniff_delimited
from analyzer.records.problems import RecordError
from tests.records.delimited.helpers import codes, message, read, refused


def rows(n: int = 40, start: int = 0) -> list[str]:
    return [f"{k / 1000:.3f},{k}.5,{-k}.25" for k in range(start, start + n)]


def whole(lines: list[str]) -> str:
    return "\n".join(["time [s],IA [A],IB [A]", *lines]) + "\n"


def test_row_cut_at_the_end_of_the_file_is_left_out() -> None:
    record = read(whole(rows()) + "0.040,40.5")
    assert record.n_samples == 40
    assert "1 row" in message(record, "broken-rows")
    assert "line 42" in message(record, "broken-rows")


def test_rows_of_another_length_keep_their_time_and_lose_their_values() -> None:
    lines = rows()
    lines[10] = "0.010,10.5"
    lines[20] = "0.020,20.5,-20.25,7"
    record = read(whole(lines))
    assert record.sample_rates_hz == (1000.0,)
    assert record.n_samples == 40
    assert np.flatnonzero(np.isnan(record.signals()).any(axis=0)).tolist() == [10, 20]
    assert "2 rows" in message(record, "broken-rows")
    assert "line 12" in message(record, "broken-rows")
    assert record.signal("IB")[11] == -11.25


def test_row_cut_within_its_time_loses_that_too() -> None:
    lines = rows()
    lines[10] = "0.0"
    record = read(whole(lines))
    assert record.sample_rates_hz == (1000.0,)
    assert record.times()[10] == 0.01
    assert np.isnan(record.signal("IA")[10])


def test_separators_at_the_ends_of_some_rows_do_no_harm() -> None:
    lines = rows()
    lines[5] += ",,"
    record = read(whole(lines))
    assert record.signal("IA").tolist() == [k + 0.5 for k in range(40)]
    assert "broken-rows" not in codes(record)


def test_row_without_time_column_keeps_its_place() -> None:
    lines = [f"{k}.5,{k}.25" for k in range(30)]
    lines[7] = "7.5"
    record = read("IA [A],IB [A]\n" + "\n".join(lines) + "\n", sample_rate_hz=1000.0)
    assert record.n_samples == 30
    assert np.isnan(record.signals()[:, 7]).all()
    assert record.signal("IA")[8] == 8.5


def test_blank_lines_comments_and_repeated_headings_among_the_rows() -> None:
    lines = [*rows(20), "", "   ", "# pause", "time [s],IA [A],IB [A]", *rows(20, 20)]
    record = read(whole(lines))
    assert record.n_samples == 40
    assert record.sample_rates_hz == (1000.0,)
    assert not np.isnan(record.signals()).any()


def test_prose_among_the_rows_is_left_out() -> None:
    record = read(whole([*rows(20), "event recorded here", *rows(20, 20)]))
    assert record.n_samples == 40
    assert record.sample_rates_hz == (1000.0,)


def test_cells_that_are_no_numbers_are_missing_and_counted() -> None:
    lines = rows()
    lines[3] = "0.003,OL,-3.25"
    lines[4] = "0.004,4.5,?"
    record = read(whole(lines))
    assert np.isnan(record.signal("IA")[3])
    assert np.isnan(record.signal("IB")[4])
    assert "2 cells" in message(record, "unreadable-cells")
    assert "'OL'" in message(record, "unreadable-cells")


def test_decimal_commas_with_broken_cells() -> None:
    lines = rows()
    lines[30] = "0.030,OL,+3e1"
    record = read(whole(lines).replace(",", ";").replace(".", ","))
    assert record.signal("IA")[[29, 31]].tolist() == [29.5, 31.5]
    assert record.signal("IB")[30] == 30.0


def test_letters_of_a_code_page_in_a_broken_row() -> None:
    lines = [*rows(10), "0.010,сбой,1.5", *rows(10, 11)]
    record = read(whole(lines).encode("cp1251"))
    assert record.n_samples == 21
    assert np.isnan(record.signal("IA")[10])
    assert record.signal("IB")[10] == 1.5


def test_end_of_file_marks_and_padding() -> None:
    for tail in (b"\x1a", b"\x1a\r\n", b"\0" * 300, b"\x1a" * 128 + b"\0" * 70_000):
        record = read(whole(rows()).encode() + tail)
        assert record.n_samples == 40
        assert "broken-rows" not in codes(record)


def test_rows_of_empty_cells_at_the_end_are_left_out() -> None:
    record = read(whole([*rows(), ",,", ",,"]))
    assert record.n_samples == 40
    assert "2 rows" in message(record, "rows-after-end")


def test_most_rows_of_another_length_are_no_table() -> None:
    lines = [*rows(300), *[f"{k / 1000:.3f},1" for k in range(300, 1000)]]
    error = refused(whole(lines))
    assert error.code == "broken-table"
    assert error.line == 302


BROKEN: list[tuple[bytes, str]] = [
    (b"", "empty-file"),
    (b"\r\n \n\x1a", "empty-file"),
    (b"\xef\xbb\xbf", "empty-file"),
    (b"\xff\xfe", "empty-file"),
    (bytes(range(256)) * 40, "not-text"),
    (b"PK\x03\x04" + b"\x00\x05" * 500, "not-text"),
    (np.random.default_rng(5).bytes(200_000), "not-text"),
    (np.arange(5000, dtype="<i2").tobytes(), "not-text"),
    (b"no numbers in here\nnor here\n", "not-a-table"),
    (b"<html><body><table><tr><td>1</td></tr></table></body></html>\n" * 50, "not-a-table"),
    (b'{"time": [0, 1, 2], "ia": [1.5, 2.5, 3.5]}\n', "not-a-table"),
    (b"time [s],IA [A]\n", "not-a-table"),
    (b"time [s],IA [A]\n0.0,1.0\n", "no-rows"),
    (b"time,state\n2024-05-01T00:00:00,7\n2024-05-01T00:00:01,on\n2024-05-01T00:00:02,off\n", "not-a-table"),
    (b"1,234.5\n2,345.5\n3,456.5\n", "no-times"),
    (b"time [s],state\n0.0,on\n0.1,off\n0.2,off\n", "no-rows"),
    (b"time [s],IA [A]\n0.0," + b"1" * 2_000_000, "not-a-table"),
    (b"1" * 3_000_000, "line-too-long"),
    (b"x" * 70_000 + b"\n0.0,1.5\n0.1,1.5\n0.2,1.5\n", "line-too-long"),
    (b",".join([b"1.5"] * 20_001) + b"\n" + b",".join([b"1.5"] * 20_001), "too-many-columns"),
    (b"," * 900_000 + b"\n" + b"1," * 40_000 + b"\n", "too-many-columns"),
    (b"t;a\n0,001;1.234,5\n0,002;1.234,5\n", "thousands-marks"),
    (b"t;a\n0.001;1,234.5\n0.002;1,234.5\n", "thousands-marks"),
    (b"t;a\n0,001;1 234,5\n0,002;1 234,5\n", "thousands-marks"),
    (b't,a\n0.001,"1,234.5"\n0.002,"1,234.5"\n', "thousands-marks"),
    (b"t;a\n0.001;0.5\n" + b"0.002;0.5\n" * 400 + b"0.003;1,234.5\n", "thousands-marks"),
    (b"t;a\n1;1,234\n2;1,235\n3;2,345\n", "ambiguous-decimal"),
    (b"a,b\n0,1,0,2\n0,2,0,3\n0,3,0,4\n", "ambiguous-decimal"),
    (b'"' * 5000 + b"\n" + b'"' * 5001, "not-a-table"),
    (b"time [s],IA [A]\n0.2,1\n0.1,1\n0.0,1\n", "time-not-rising"),
    (b"time [s],IA [A]\n0.1,1\n0.1,1\n0.1,1\n", "time-too-coarse"),
    (b"\xff\xfe" + "words\n".encode("utf-16-le") * 99, "not-a-table"),
    (b"\xff\xfe\x00\xd8\x00\xd8\n", "not-a-table"),
    (b"#\n" * 5000, "not-a-table"),
    (b"sep=\n", "not-a-table"),
    (b"sep=;\n", "empty-file"),
]


@pytest.mark.parametrize(("content", "code"), BROKEN)
def test_broken_files_are_one_clear_error_at_once(content: bytes, code: str) -> None:
    began = time.process_time()
    error = refused(content)
    assert error.code == code
    assert time.process_time() - began < 2.0


def test_broken_files_take_little_memory() -> None:
    with ProcessPoolExecutor(1, mp_context=get_context("spawn")) as pool:
        peak_bytes = pool.submit(peak_memory_of_broken_files).result()
    assert peak_bytes < 300e6


def peak_memory_of_broken_files() -> int:
    """Read all of them in this process, and return the most memory that it ever held, libraries included."""
    for content, _ in BROKEN:
        refused(content)
    status = Path("/proc/self/status")
    if status.exists():  # unlike getrusage, it does not count what the parent held when it forked
        line = next(
            line for line in status.read_text(encoding="utf-8").splitlines() if line.startswith("VmHWM")
        )
        return int(line.split()[1]) * 1024
    import psutil

    memory = psutil.Process().memory_info()
    return int(getattr(memory, "peak_wset", memory.rss))


def test_ambiguity_ends_where_the_decimal_mark_is_stated() -> None:
    record = read(b"t [s];a [A]\n1;1,234\n2;1,235\n3;2,345\n", decimal=",")
    assert record.signal("a").tolist() == [1.234, 1.235, 2.345]


@pytest.mark.parametrize("seed", range(40))
def test_damaged_files_read_or_are_one_clear_error(seed: int) -> None:
    rng = np.random.default_rng(seed)
    data = bytearray(whole(rows(200)).encode())
    n_damages = int(rng.integers(1, 60))
    for _ in range(n_damages):
        at = int(rng.integers(0, len(data)))
        kind = rng.integers(0, 3)
        if kind == 0:
            data[at] = int(rng.integers(0, 256))
        elif kind == 1:
            del data[at : at + int(rng.integers(1, 40))]
        else:
            data[at:at] = rng.choice([b",", b"\n", b'"', b"\0", b"\r", b"\xff", b"e", b"-"]).item()
    sniff_delimited(bytes(data), "a.csv")
    try:
        record = read(bytes(data))
    except RecordError:
        return
    assert np.all(np.diff(record.times()) > 0)
    if len(record.analog) == 2:
        # Forty bytes are parts of four rows at most; what was not touched must be there unchanged.
        found = set(map(tuple, record.as_written().T.tolist()))
        untouched = found & {(k + 0.5, -k - 0.25) for k in range(200)}
        assert len(untouched) >= 200 - 4 * n_damages
