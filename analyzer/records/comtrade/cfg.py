"""The configuration file: its grammar, as tolerant as files in the wild demand.

Layout of the lines (revision 2013; what is in brackets came with the revision named)::

    station,device[,revision: 1999]
    total,<n>A,<n>D
    An,id,phase,circuit,unit,a,b,skew,min,max[,primary,secondary,PS: 1999]      one line per analog channel
    Dn,id[,phase,circuit: 1999],normal state                                    one line per digital channel
    line frequency
    number of rates
    rate,last sample                                                            at least one line
    first sample's date,time
    trigger's date,time
    file type
    [time multiplier: 1999]
    [time code,local code: 2013]
    [time quality,leap second: 2013]
"""

from __future__ import annotations

import io
import itertools
import math
import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Literal, NoReturn

from analyzer.records.channels import AnalogChannel, DigitalChannel, Side, unique_ids
from analyzer.records.comtrade.dates import parse_moment, parse_offset
from analyzer.records.moment import Clock, Moment
from analyzer.records.problems import Problem, RecordError, Severity
from analyzer.records.text import printable

Encoding = Literal["ascii", "binary", "binary32", "float32"]
Revision = Literal[1991, 1999, 2013]

_ENCODINGS: dict[str, Encoding] = {
    "ASCII": "ascii",
    "BINARY": "binary",
    "BINARY32": "binary32",
    "FLOAT32": "float32",
}
_NAME_LIMIT = 256  # the standard allows 64 characters; files in the wild exceed it
_MAX_RATES = 100_000  # the standard allows 999
_MAX_CHANNELS = 50_000  # the largest seen have some thousand; without a limit memory is the file's to take
_MAX_FIELDS = 300
_RATE_LIMITS_HZ = (1e-6, 1e10)
_FREQUENCY_LIMIT_HZ = 1e4
_MULTIPLIER_LIMITS = (1e-9, 1e9)
_COUNTS = re.compile(r"^\s*(\d{1,7})\s*,\s*(\d{1,7})\s*[aA]\s*,\s*(\d{1,7})\s*[dD]\b")


@dataclass(frozen=True, slots=True, kw_only=True)
class Configuration:
    """What the configuration file says.

    Attributes
    ----------
    revision : {1991, 1999, 2013}
        Revision whose rules are followed.
    rates_hz, last_samples : tuple of float, tuple of int
        Sampling rates and the number (from 1) of the last sample at each; empty when only stamps tell
        the time.
    declared_samples : int or None
        Number of samples that the file claims.
    stamp_unit_s : float
        Unit of the time stamps in the data, time multiplier included. [s]
    """

    station: str
    device: str
    revision: Revision
    analog: tuple[AnalogChannel, ...]
    digital: tuple[DigitalChannel, ...]
    nominal_frequency_hz: float | None
    rates_hz: tuple[float, ...]
    last_samples: tuple[int, ...]
    declared_samples: int | None
    start: Moment | None
    trigger: Moment | None
    encoding: Encoding | None
    stamp_unit_s: float
    clock: Clock
    problems: tuple[Problem, ...]


def parse_configuration(text: str, *, shown: str) -> Configuration:
    """Return what a configuration file says.

    Parameters
    ----------
    text : str
        The file's text.
    shown : str
        Its name for messages.

    Returns
    -------
    Configuration

    Raises
    ------
    RecordError
        If the file cannot be made sense of; the error names line and field.
    """
    return _Parser(text, shown).parse()


@dataclass(slots=True)
class _Parser:
    """Reads the lines one by one and remembers them and what it had to repair."""

    text: str
    shown: str
    ahead: Iterator[tuple[int, str]] = field(init=False)
    lines: list[tuple[int, str]] = field(default_factory=list)
    position: int = 0
    problems: list[Problem] = field(default_factory=list)

    def parse(self) -> Configuration:
        self.ahead = self._lines_ahead()
        station, device, stated = self._head()
        n_analog, n_digital = self._counts()
        analog_rows = [self._row("analog channel") for _ in range(n_analog)]
        revision = self._revision(stated, analog_rows)
        analog = self._analog(analog_rows, revision)
        digital = self._digital([self._row("digital channel") for _ in range(n_digital)])
        frequency_hz = self._frequency()
        rates_hz, last_samples, declared = self._rates()
        start = self._moment("first sample", revision)
        trigger = self._moment("trigger", revision)
        encoding = self._encoding()
        multiplier = self._multiplier()
        clock = self._clock() if revision == 2013 else Clock()
        offset = parse_offset(clock.time_code)
        nanoseconds = any(moment is not None and moment.digits > 6 for moment in (start, trigger))
        return Configuration(
            station=station,
            device=device,
            revision=revision,
            analog=analog,
            digital=digital,
            nominal_frequency_hz=frequency_hz,
            rates_hz=rates_hz,
            last_samples=last_samples,
            declared_samples=declared,
            start=start.in_zone(offset) if start else None,
            trigger=trigger.in_zone(offset) if trigger else None,
            encoding=encoding,
            stamp_unit_s=multiplier * (1e-9 if nanoseconds else 1e-6),
            clock=clock,
            problems=tuple(self.problems),
        )

    def _lines_ahead(self) -> Iterator[tuple[int, str]]:
        # Files made on old systems end with a run of Ctrl-Z (0x1A); some have it in the middle of a line.
        text = io.StringIO(self.text.replace("\x1a", ""), newline=None)
        n_blank, first_blank = 0, 0
        for number, line in enumerate(text, start=1):
            if not line.strip():
                n_blank, first_blank = n_blank + 1, first_blank or number
                continue
            if n_blank:
                self._note("blank-line", f"{n_blank} blank lines skipped", line=first_blank)
                n_blank, first_blank = 0, 0
            yield number, line.rstrip("\n")

    def _at_end(self) -> bool:
        if self.position == len(self.lines):
            self.lines.extend(itertools.islice(self.ahead, 1))
        return self.position == len(self.lines)

    def _head(self) -> tuple[str, str, str]:
        row = self._row("station line")
        while len(row) > 3 and not row[-1].strip():
            row.pop()
        station = printable(row[0], limit=_NAME_LIMIT)
        # A comma inside the station's name makes more fields; revision and device are the last ones.
        stated = row[-1].strip() if len(row) > 2 else ""
        if stated and not re.fullmatch(r"\d{4}", stated):
            stated = ""
        device = printable(row[-2] if len(row) > 2 else (row[1] if len(row) > 1 else ""), limit=_NAME_LIMIT)
        if len(row) > 3:
            station = printable(",".join(row[:-2]), limit=_NAME_LIMIT)
        return station, device, stated

    def _counts(self) -> tuple[int, int]:
        number, line = self._line("channel counts")
        match = _COUNTS.match(line)
        if match is None:
            self._stop(
                "bad-counts",
                f"expected the channel counts, such as 8,6A,2D, found {printable(line, limit=60)!r}",
                line=number,
                hint="this does not look like a COMTRADE configuration file",
            )
        total, n_analog, n_digital = (int(group) for group in match.groups())
        n_lines = self.text.count("\n") + self.text.count("\r") + 1
        if n_analog + n_digital > n_lines:
            self._stop(
                "bad-counts",
                f"{n_analog} analog and {n_digital} digital channels are declared, "
                f"the file has no more than {n_lines} lines",
                line=number,
                hint="the file is cut short or its counts are wrong",
            )
        if n_analog + n_digital > _MAX_CHANNELS:
            self._stop("too-many-channels", f"more than {_MAX_CHANNELS} channels are not read", line=number)
        if total != n_analog + n_digital:
            self._note("bad-total", f"total of {total} channels is not {n_analog} + {n_digital}", line=number)
        return n_analog, n_digital

    def _revision(self, stated: str, analog_rows: list[list[str]]) -> Revision:
        wide = bool(analog_rows) and min(len(row) for row in analog_rows) >= 13
        year = int(stated) if stated else 0
        revision: Revision = 1991
        if year > 1991:  # years that are no revision follow the one in force
            revision = 2013 if year >= 2013 else 1999
        elif wide:
            revision = 1999
        if revision == 1991 and wide:
            revision = 1999
        if year != revision and (year or wide):
            said = f"revision {year} does not exist" if year else "no revision is stated"
            self._note("odd-revision", f"{said}; read by the rules of {revision}", line=self.lines[0][0])
        return revision

    def _analog(self, rows: list[list[str]], revision: Revision) -> tuple[AnalogChannel, ...]:
        first_line = self.position - len(rows)
        width = 10 if revision == 1991 else 13
        fixed = [self._fit_row(row, width, 1, first_line + k) for k, row in enumerate(rows)]
        ids = unique_ids((printable(row[1], limit=_NAME_LIMIT) for row in fixed), kind="analog")
        channels = []
        for k, row in enumerate(fixed):
            line = self.lines[first_line + k][0]
            multiplier = self._number(row[5], "multiplier a", line, missing=1.0)
            if multiplier == 0.0:
                self._note("zero-multiplier", "constant, since its multiplier is 0", channel=ids[k])
            channels.append(
                AnalogChannel(
                    number=k,
                    id=ids[k],
                    name=printable(row[1], limit=_NAME_LIMIT),
                    phase=printable(row[2], limit=_NAME_LIMIT),
                    circuit=printable(row[3], limit=_NAME_LIMIT),
                    unit=printable(row[4], limit=32),
                    multiplier=multiplier,
                    addend=self._number(row[6], "addend b", line, missing=0.0),
                    skew_s=self._number(row[7], "skew", line, missing=0.0) * 1e-6,
                    stored_min=_number_or_none(row[8]),
                    stored_max=_number_or_none(row[9]),
                    primary=_number_or_none(row[10]) if width == 13 else None,
                    secondary=_number_or_none(row[11]) if width == 13 else None,
                    side=self._side(row[12], ids[k]) if width == 13 else "unstated",
                )
            )
        if revision == 1991 and channels:
            self._note(
                "side-unstated",
                "this revision does not say whether values are primary or secondary; taken as primary",
                severity="warning",
            )
        return tuple(channels)

    def _side(self, text: str, channel_id: str) -> Side:
        letter = text.strip().upper()[:1]
        if letter in ("P", "S"):
            return "primary" if letter == "P" else "secondary"
        self._note(
            "side-unstated",
            f"{printable(text, limit=12)!r} is neither P nor S; taken as primary",
            channel=channel_id,
            severity="warning",
        )
        return "unstated"

    def _digital(self, rows: list[list[str]]) -> tuple[DigitalChannel, ...]:
        # 3 fields up to 1991, 5 since; some files of either mix 3, 4 and 5.
        rows = [row[:-1] if len(row) > 5 and not row[-1].strip() else row for row in rows]
        ids = unique_ids(
            (printable(row[1] if len(row) > 1 else "", limit=_NAME_LIMIT) for row in rows), kind="digital"
        )
        channels = []
        for k, row in enumerate(rows):
            state = row[-1].strip() if len(row) > 2 else ""
            if state not in ("0", "1"):
                self._note(
                    "normal-state-unstated",
                    f"normal state {printable(state, limit=12)!r} is neither 0 nor 1",
                    channel=ids[k],
                )
            channels.append(
                DigitalChannel(
                    number=k,
                    id=ids[k],
                    name=printable(row[1], limit=_NAME_LIMIT) if len(row) > 1 else "",
                    phase=printable(row[2], limit=_NAME_LIMIT) if len(row) > 3 else "",
                    circuit=printable(row[3], limit=_NAME_LIMIT) if len(row) > 4 else "",
                    normal_state=int(state) if state in ("0", "1") else None,
                )
            )
        return tuple(channels)

    def _frequency(self) -> float | None:
        number, line = self._line("line frequency")
        value = _number_or_none(line.partition(",")[0])
        if value is None or not 0 < value <= _FREQUENCY_LIMIT_HZ:
            self._note(
                "frequency-unstated",
                f"line frequency {printable(line, limit=20)!r} is not a frequency",
                line=number,
                severity="warning",
            )
            return None
        return value

    def _rates(self) -> tuple[tuple[float, ...], tuple[int, ...], int | None]:
        number, line = self._line("number of sampling rates")
        declared = _number_or_none(line.partition(",")[0])
        if declared is None or declared != int(declared) or not 0 <= declared <= _MAX_RATES:
            self._stop(
                "bad-rates",
                f"expected the number of sampling rates, found {printable(line, limit=40)!r}",
                line=number,
            )
        count = int(declared)
        rates_hz: list[float] = []
        last_samples: list[int] = []
        last_declared: int | None = None
        only_stamps = False
        for _ in range(max(count, 1)):
            if count == 0 and not self._next_is_rate():
                break
            number, line = self._line("sampling rate")
            fields = line.split(",", 2)
            rate_hz = _number_or_none(fields[0])
            last = _number_or_none(fields[1]) if len(fields) > 1 else None
            if rate_hz is None or rate_hz < 0 or last is None or not 0 <= last < 1e15:
                self._stop(
                    "bad-rates",
                    f"expected a sampling rate and its last sample, found {printable(line, limit=40)!r}",
                    line=number,
                )
            if rate_hz > 0 and not _RATE_LIMITS_HZ[0] <= rate_hz <= _RATE_LIMITS_HZ[1]:
                self._stop("bad-rates", f"a sampling rate of {rate_hz:g} Hz is not possible", line=number)
            last_declared = max(last_declared or 0, int(last))
            if last_samples and last <= last_samples[-1]:
                self._note(
                    "empty-rate", f"no samples are left for rate line {rate_hz:g},{last:g}", line=number
                )
                continue
            only_stamps = only_stamps or rate_hz == 0 or count == 0
            rates_hz.append(rate_hz)
            last_samples.append(int(last))
        if only_stamps:  # for some samples at least
            return (), (), last_declared
        return tuple(rates_hz), tuple(last_samples), last_declared

    def _next_is_rate(self) -> bool:
        return not self._at_end() and "/" not in self.lines[self.position][1]

    def _moment(self, what: str, revision: Revision) -> Moment | None:
        number, line = self._line(f"date and time of the {what}")
        moment, remark = parse_moment(line, month_first=revision == 1991)
        if remark:
            self._note("odd-date" if moment else "date-unstated", f"{what}: {remark}", line=number)
        return moment

    def _encoding(self) -> Encoding | None:
        if self._at_end():
            self._note("type-unstated", "the data file's type is not stated; judged by its bytes")
            return None
        number, line = self._line("file type")
        word = line.partition(",")[0].strip().upper()
        if word not in _ENCODINGS:
            self._stop(
                "bad-type",
                f"file type {printable(line, limit=30)!r} is none of {', '.join(_ENCODINGS)}",
                line=number,
            )
        return _ENCODINGS[word]

    def _multiplier(self) -> float:
        if self._at_end():
            return 1.0
        number, line = self._line("time multiplier")
        value = _number_or_none(line.partition(",")[0])
        if value is None or not _MULTIPLIER_LIMITS[0] <= value <= _MULTIPLIER_LIMITS[1]:
            self._note(
                "bad-multiplier", f"time multiplier {printable(line, limit=20)!r} taken as 1", line=number
            )
            return 1.0
        return value

    def _clock(self) -> Clock:
        codes = self._optional_fields()
        quality = self._optional_fields()
        quality_text = quality[0].strip() if quality else ""
        leap_text = quality[1].strip() if len(quality) > 1 else ""
        leaps: dict[str, Literal["none", "added", "subtracted", "unknown"]] = {
            "0": "none",
            "1": "added",
            "2": "subtracted",
        }
        return Clock(
            time_code=printable(codes[0], limit=12) if codes else "",
            local_code=printable(codes[1], limit=12) if len(codes) > 1 else "",
            quality_code=int(quality_text, 16) if re.fullmatch(r"[0-9a-fA-F]", quality_text) else None,
            leap_second=leaps.get(leap_text, "unknown"),
        )

    def _optional_fields(self) -> list[str]:
        if self._at_end():
            return []
        return self._row("")

    def _fit_row(self, row: list[str], width: int, name_at: int, index: int) -> list[str]:
        """Return the row with exactly `width` fields: commas in the name joined, missing ends left blank."""
        line = self.lines[index][0]
        while len(row) > width and not row[-1].strip():
            row = row[:-1]  # a trailing comma
        if len(row) > width:
            extra = len(row) - width
            if _number_or_none(row[5]) is not None and _number_or_none(row[5 + extra]) is None:
                self._note("extra-fields", f"{extra} fields too many, left out", line=line)
                return row[:width]
            self._note("comma-in-name", f"the name holds {extra} commas", line=line)
            return [*row[:name_at], ",".join(row[name_at : name_at + extra + 1]), *row[name_at + extra + 1 :]]
        if len(row) < 7:
            self._stop(
                "short-line",
                f"an analog channel needs at least 10 fields, found {len(row)}",
                line=line,
                hint="the file is cut short or its channel counts are wrong",
            )
        if len(row) < width:
            self._note("short-line", f"{width - len(row)} fields are missing at the end", line=line)
            row = row + [""] * (width - len(row))
        return row

    def _number(self, text: str, what: str, line: int, *, missing: float) -> float:
        if not text.strip():
            if what != "skew":
                self._note(
                    "blank-field", f"{what} is blank, taken as {missing:g}", line=line, severity="warning"
                )
            return missing
        value = _number_or_none(text)
        if value is None:
            self._stop("bad-number", f"{printable(text, limit=30)!r} is not a number", line=line, where=what)
        return value

    def _row(self, what: str) -> list[str]:
        return self._line(what)[1].split(",", _MAX_FIELDS)

    def _line(self, what: str) -> tuple[int, str]:
        if self._at_end():
            self._stop(
                "cut-short",
                f"the file ends where the {what} should be",
                line=(self.lines[-1][0] + 1) if self.lines else 1,
                hint="the file is cut short or its channel counts are wrong",
            )
        self.position += 1
        return self.lines[self.position - 1]

    def _note(
        self,
        code: str,
        message: str,
        *,
        line: int | None = None,
        channel: str = "",
        severity: Severity = "note",
    ) -> None:
        where = f"channel {channel}" if channel else self.shown
        where = f"{where}, line {line}" if line is not None else where
        self.problems.append(Problem(code=code, message=message, where=where, severity=severity))

    def _stop(self, code: str, message: str, *, line: int, where: str = "", hint: str = "") -> NoReturn:
        raise RecordError(code, message, path=self.shown, line=line, field=where, hint=hint)


def _number_or_none(text: str) -> float | None:
    if "_" in text:  # Python would read 1_000
        return None
    try:
        value = float(text)
    except ValueError:
        return None
    return value if math.isfinite(value) else None
