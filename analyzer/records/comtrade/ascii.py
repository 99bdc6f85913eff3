"""ASCII data files: one line per sample, read by a compiled parser, mended line by line where that fails."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from analyzer.records.channels import AnalogChannel
from analyzer.records.comtrade.cfg import Revision
from analyzer.records.problems import Problem, RecordError
from analyzer.records.sources import ArraySource
from analyzer.records.text import printable

if TYPE_CHECKING:
    import pyarrow as pa

# The number that stands for a missing sample (C37.111-1991 6.3.4, -1999 6.3); since 2013 the field is empty.
_MISSING_CODE: dict[Revision, float | None] = {1991: 999_999.0, 1999: 99_999.0, 2013: None}
_CODES = (99_999.0, 999_999.0)
_PART_BYTES = 1 << 21  # parsed in one go
_BLOCK_BYTES = 1 << 22  # no line is longer
_LINE_BYTES = 1 << 12
_LIMIT = 3.4028234e38  # the largest value that the standard allows; its negative stands for a missing one
_PADDED_BYTES = 1 << 24


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class AsciiData:
    """Samples of an ASCII data file: source, sample numbers and stamps (NaN where missing)."""

    source: ArraySource
    numbers: NDArray[np.float64]
    stamps: NDArray[np.float64]


def read_ascii(
    data: memoryview,
    *,
    analog: tuple[AnalogChannel, ...],
    n_digital: int,
    revision: Revision,
    shown: str,
) -> AsciiData:
    """Return the samples of an ASCII data file.

    Parameters
    ----------
    data : memoryview
        The file's bytes.
    analog : tuple of AnalogChannel
        Their declared ranges tell missing codes of other revisions from values.
    n_digital : int
        Number of digital channels.
    revision : {1991, 1999, 2013}
        Decides the code of a missing sample.
    shown : str
        Name of the file for messages.

    Returns
    -------
    AsciiData

    Raises
    ------
    RecordError
        If there are no samples, or the file is not one of numbers (codes ``no-samples``, ``bad-data``).
    """
    n_analog = len(analog)
    content = _without_tail(data)
    n_parts = -(-len(content) // _PART_BYTES)
    problems: list[Problem] = []
    try:
        samples = _gather(_parse(content, n_analog, n_digital), n_analog, n_digital, n_parts=n_parts)
    except ValueError:  # pyarrow's ArrowInvalid is one
        mended, problems = _mend(content, 2 + n_analog + n_digital, shown)
        tables = _parse_as_text(mended, n_analog, n_digital, shown, problems)
        samples = _gather(tables, n_analog, n_digital, n_parts=len(tables))
    if samples.n == 0:
        raise RecordError("no-samples", "the data file holds no samples", path=shown)
    stored, states = samples.numbers[2:, : samples.n], samples.states[:, : samples.n]
    for k, channel in enumerate(analog):
        if not (samples.low[2 + k] > -_LIMIT and samples.high[2 + k] < min(_CODES)):
            problems += _mark_missing(stored[k], channel, revision)
    problems += [_odd_states(k, int(n_odd), shown) for k, n_odd in enumerate(samples.n_odd) if n_odd]
    for array in (stored, states):
        array.setflags(write=False)
    numbers, stamps = samples.numbers[:2, : samples.n]
    return AsciiData(source=ArraySource(stored, states, tuple(problems)), numbers=numbers, stamps=stamps)


def _without_tail(data: memoryview) -> memoryview:
    end = len(data)
    while end and data[end - 1] in b"\x1a\x00 \t\r\n":
        end -= 1
    return data[:end]


def _parse(content: memoryview, n_analog: int, n_digital: int) -> Iterator[pa.Table]:
    """Parse part after part, as many at once as pyarrow may use processors."""
    import pyarrow as pa

    def parse(part: memoryview) -> pa.Table:
        if _may_be_whole(part):  # in the narrowest types and forms that are usual, which are parsed fastest
            types = [pa.uint32()] * 2 + [pa.int32()] * n_analog + [pa.uint8()] * n_digital
            try:
                return _read_csv(part, types, blanks=("",))
            except ValueError:
                pass
        return _read_csv(part, [pa.float64()] * (2 + n_analog) + [pa.int8()] * n_digital)

    with ThreadPoolExecutor(pa.cpu_count()) as pool:
        yield from pool.map(parse, _parts(content))


def _parts(content: memoryview) -> Iterator[memoryview]:
    """Cut at the ends of lines."""
    first = 0
    while first < len(content):
        stop = min(first + _PART_BYTES, len(content))
        while stop < len(content):
            end = bytes(content[stop : stop + _LINE_BYTES]).find(b"\n")
            stop = min(stop + (end + 1 or _LINE_BYTES), len(content))
            if end >= 0:
                break
        yield content[first:stop]
        first = stop


def _may_be_whole(part: memoryview) -> bool:
    """Whether the numbers may all be whole.

    Letters rule it out, since pyarrow takes 0x1F for a whole number.
    """
    if b"." in bytes(part[:_LINE_BYTES]):
        return False
    return int(np.frombuffer(part, dtype=np.uint8).max()) <= ord("9")


def _read_csv(
    content: memoryview | bytes, types: list[Any], *, blanks: tuple[str, ...] = ("", " ", "  ")
) -> pa.Table:
    import pyarrow as pa
    from pyarrow import csv

    names = [str(k) for k in range(len(types))]
    return csv.read_csv(
        pa.BufferReader(pa.py_buffer(content)),
        read_options=csv.ReadOptions(column_names=names, block_size=_BLOCK_BYTES, use_threads=False),
        parse_options=csv.ParseOptions(quote_char=False),
        convert_options=csv.ConvertOptions(
            column_types=dict(zip(names, types, strict=True)),
            null_values=list(blanks),
            strings_can_be_null=False,
            check_utf8=False,
        ),
    )


def _mend(content: memoryview, width: int, shown: str) -> tuple[bytes, list[Problem]]:
    """Return the lines with exactly `width` fields each, those that hold no numbers left out."""
    kept, n_left_out, first_bad = [], 0, 0
    room = max(_PADDED_BYTES, 4 * len(content))
    n_short = n_long = 0
    for number, line in enumerate(bytes(content).replace(b"\x1a", b"").splitlines(), start=1):
        if not line.strip():
            continue
        fields = line.split(b",")
        if not _begins_like_a_sample(fields):
            n_left_out += 1
            first_bad = first_bad or number
            continue
        if len(fields) > width:
            n_long += any(field.strip() for field in fields[width:])
            fields = fields[:width]
        elif len(fields) < width:
            n_short += 1
            room -= width - len(fields)
            if room < 0:  # before memory is spent on fields that are not there
                raise RecordError(
                    "bad-data",
                    f"lines of {len(fields)} fields where {width} are expected",
                    path=shown,
                    line=number,
                    hint="check that configuration and data belong together",
                )
            fields += [b""] * (width - len(fields))
        kept.append(b",".join(fields))
    if n_left_out > len(kept):
        raise RecordError(
            "bad-data",
            f"{n_left_out} of {n_left_out + len(kept)} lines hold no samples",
            path=shown,
            line=first_bad,
            hint="the configuration says ASCII; this file is something else",
        )
    problems = []
    for count, code, what in (
        (n_left_out, "lines-left-out", f"lines without samples left out, the first is line {first_bad}"),
        (n_short, "lines-short", "lines are cut short; what is not there reads as missing"),
        (n_long, "lines-long", "lines have more fields than channels; the rest is left out"),
    ):
        if count:
            problems.append(Problem(code=code, severity="warning", message=f"{count} {what}", where=shown))
    return b"\n".join(kept), problems


def _begins_like_a_sample(fields: list[bytes]) -> bool:
    try:
        return len(fields) > 2 and float(fields[0]) >= 0
    except ValueError:
        return False


def _parse_as_text(
    content: bytes, n_analog: int, n_digital: int, shown: str, problems: list[Problem]
) -> list[pa.Table]:
    """Parse mended lines; a cell that is no number becomes a missing one."""
    import pandas as pd
    import pyarrow as pa

    try:
        return list(_parse(memoryview(content), n_analog, n_digital))
    except ValueError:
        pass
    width = 2 + n_analog + n_digital
    try:
        table = _read_csv(content, [pa.binary()] * width)
    except ValueError as error:
        raise RecordError(
            "bad-data",
            "the lines cannot be taken apart",
            path=shown,
            hint="the configuration says ASCII; this file is something else",
        ) from error
    columns: list[Any] = []
    n_odd = 0
    for k in range(width):
        cells = [cell.decode("latin-1").strip() for cell in table.column(k).to_pylist()]
        numbers = pd.to_numeric(pd.Series(cells, dtype=object), errors="coerce").to_numpy(np.float64)
        n_odd += int(np.sum(np.isnan(numbers) & np.array([bool(cell) for cell in cells], dtype=bool)))
        columns.append(pa.array(numbers, from_pandas=True))
    if n_odd > table.num_rows * width // 2:
        raise RecordError(
            "bad-data", f"{n_odd} of {table.num_rows * width} fields are not numbers", path=shown
        )
    if n_odd:
        problems.append(
            Problem(
                code="fields-not-numbers",
                severity="warning",
                message=f"{n_odd} fields are not numbers and read as missing",
                where=shown,
            )
        )
    return [pa.table({str(k): column for k, column in enumerate(columns)})]


@dataclass(slots=True, kw_only=True, eq=False)
class _Samples:
    """Columns with room for more samples than the `n` that are there."""

    numbers: NDArray[np.float64]  # sample numbers, stamps, analog channels; NaN where a field is empty
    states: NDArray[np.uint8]
    low: NDArray[np.float64]  # extremes of each column of numbers, NaN where one of them is
    high: NDArray[np.float64]
    n_odd: NDArray[np.int64]  # states of each channel that are blank or neither 0 nor 1
    n: int = 0

    def add(self, table: pa.Table) -> None:
        """Put the rows of `table` behind the others, for which there is room."""
        part = slice(self.n, self.n + table.num_rows)
        n_numbers = len(self.numbers)
        for k, row in enumerate(self.numbers[:, part]):
            row[:] = table.column(k).to_numpy()
            self.low[k] = np.minimum(self.low[k], row.min())
            self.high[k] = np.maximum(self.high[k], row.max())
        for k, row in enumerate(self.states[:, part]):
            column = table.column(n_numbers + k)
            states = (column.fill_null(0) if column.null_count else column).to_numpy()
            np.not_equal(states, 0, out=row, casting="unsafe")
            self.n_odd[k] += column.null_count + np.count_nonzero(states != row)
        self.n += table.num_rows

    def make_room(self, n: int) -> None:
        """Make room for `n` samples in all."""
        numbers, states = np.empty((len(self.numbers), n)), np.empty((len(self.states), n), dtype=np.uint8)
        numbers[:, : self.n], states[:, : self.n] = self.numbers[:, : self.n], self.states[:, : self.n]
        self.numbers, self.states = numbers, states


def _gather(tables: Iterable[pa.Table], n_analog: int, n_digital: int, *, n_parts: int) -> _Samples:
    """Put tables below each other as they come, while the next are being parsed."""
    samples = _Samples(
        numbers=np.empty((2 + n_analog, 0)),
        states=np.empty((n_digital, 0), dtype=np.uint8),
        low=np.full(2 + n_analog, np.inf),
        high=np.full(2 + n_analog, -np.inf),
        n_odd=np.zeros(n_digital, dtype=np.int64),
    )
    for table in tables:
        n = samples.n + table.num_rows
        if n > samples.numbers.shape[1]:  # parts are alike, but the lines of some may be a little shorter
            samples.make_room(n if n_parts == 1 else max(2 * samples.n, int(1.1 * n_parts * n)))
        if table.num_rows:
            samples.add(table)
    return samples


def _odd_states(k: int, n_odd: int, shown: str) -> Problem:
    return Problem(
        code="states-odd",
        severity="warning",
        message=f"{n_odd} states of digital channel {k + 1} are blank or neither 0 nor 1; "
        "blank reads as 0, others as 1",
        where=shown,
    )


def _mark_missing(stored: NDArray[np.float64], channel: AnalogChannel, revision: Revision) -> list[Problem]:
    """Put NaN for the codes of missing samples, in place; note a code of another revision."""
    own = _MISSING_CODE[revision]
    if own is not None:
        stored[stored == own] = np.nan
    stored[~(np.abs(stored) < _LIMIT)] = np.nan
    problems = []
    for code in _CODES:
        marked = stored == code
        n_marked = int(marked.sum())
        if code == own or not n_marked:
            continue
        outside = channel.stored_max is not None and code > channel.stored_max
        if outside:
            stored[marked] = np.nan
        problems.append(
            Problem(
                code="foreign-missing-code",
                severity="warning" if outside else "note",
                message=f"{n_marked} samples are {code:.0f}, another revision's code for a missing sample; "
                + ("outside the declared range, read as missing" if outside else "kept as values"),
                where=f"channel {printable(channel.id)}",
            )
        )
    return problems
