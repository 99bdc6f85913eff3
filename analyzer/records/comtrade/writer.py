"""From a Record to COMTRADE files of any revision and encoding."""

from __future__ import annotations

from contextlib import ExitStack
from dataclasses import replace
from pathlib import Path
from typing import Literal

from analyzer.records.channels import AnalogChannel
from analyzer.records.comtrade.cfg import Encoding, Revision
from analyzer.records.comtrade.encode import (
    StoredScale,
    analog_scales,
    ascii_rows,
    binary_rows,
    stamp_clock,
)
from analyzer.records.model import Record
from analyzer.records.moment import Moment
from analyzer.records.output import input_files, written_beside
from analyzer.records.problems import RecordError

_LEAP_CODES = {"none": "0", "added": "1", "subtracted": "2", "unknown": "3"}
_DECLARED_RANGE: dict[Encoding, tuple[str, str]] = {
    "ascii": ("-99998", "99998"),
    "binary": ("-32767", "32767"),
    "binary32": ("-2147483647", "2147483647"),
    "float32": ("-3.4028235E38", "3.4028235E38"),
}


def write_comtrade(
    record: Record,
    target: Path,
    *,
    revision: Revision = 2013,
    encoding: Encoding = "float32",
    existing: Literal["refuse", "replace"] = "refuse",
) -> tuple[Path, ...]:
    """Write a record as COMTRADE.

    Numbers as the record holds them are passed through with their scaling where the encoding can hold them,
    so that nothing is lost: whole numbers within its range, and in ASCII of 2013 and FLOAT32 real ones too.
    Others are scaled to the encoding's full range. BINARY of 1991 has no -1, its code of a missing sample:
    -2 is written; a missing sample between small ones reads back as -1.

    Parameters
    ----------
    record : Record
    target : Path
        Name of the configuration file with the suffix ``.cfg``, or of the combined file with ``.cff`` (2013
        only).
    revision : {1991, 1999, 2013}
    encoding : {"ascii", "binary", "binary32", "float32"}
        The last two came with 2013.
    existing : {"refuse", "replace"}
        What to do about files of these names.

    Returns
    -------
    tuple of Path
        The files written; they appear only when all are complete, the configuration last.

    Raises
    ------
    RecordError
        If the revision does not know the encoding (``no-such-encoding``) or cannot say that a channel's
        values are secondary (``unknown-ratio``), there is no sample (``no-samples``), the suffix is another
        (``bad-suffix``), a file exists (``exists``) or is the record's own (``would-overwrite-input``).
    """
    if target.suffix.lower() not in (".cfg", ".cff"):
        raise RecordError(
            "bad-suffix", "the name must end in .cfg, or in .cff for all in one file", path=str(target)
        )
    if record.n_samples == 0:
        raise RecordError("no-samples", "there is no sample to write", path=str(target))
    combined = target.suffix.lower() == ".cff"
    if revision != 2013 and (combined or encoding in ("binary32", "float32")):
        raise RecordError(
            "no-such-encoding",
            f"{'combined files' if combined else encoding.upper()} came with revision 2013, not {revision}",
            path=str(target),
            hint="write revision 2013, or encoding ascii or binary",
        )
    if revision == 1991:
        record = _on_primary_side(record, target)
    record = replace(record, start=_start(record))
    scales = analog_scales(record, revision=revision, encoding=encoding)
    configuration = _configuration(record, scales, revision=revision, encoding=encoding).encode("utf-8")
    if encoding == "ascii":
        rows = ascii_rows(record, scales, revision=revision)
    else:
        rows = binary_rows(record, scales, revision=revision, encoding=encoding)
    header = record.origin.header_text.encode("utf-8")
    information = record.origin.information_text.encode("utf-8")
    inputs = input_files(record.origin)
    if combined:
        with (
            written_beside(target, existing=existing, inputs=inputs) as temporary,
            temporary.open("wb") as file,
        ):
            for kind, content in (("CFG", configuration), ("INF", information), ("HDR", header)):
                file.write(f"--- file type: {kind} ---\r\n".encode())
                file.write(content if content.endswith(b"\n") else content + b"\r\n")
            n_bytes = "" if encoding == "ascii" else f": {_row_bytes(record, encoding) * record.n_samples}"
            mark = "ASCII" if encoding == "ascii" else encoding.upper()
            file.write(f"--- file type: DAT {mark}{n_bytes} ---\r\n".encode())
            for block in rows:
                file.write(block)
        return (target,)
    suffixes = {"data": ".dat", "header": ".hdr", "information": ".inf"}
    if target.suffix.isupper():
        suffixes = {kind: suffix.upper() for kind, suffix in suffixes.items()}
    names = [target.with_suffix(suffixes["data"])]
    texts = [(suffixes["header"], header), (suffixes["information"], information)]
    with ExitStack() as stack:
        # Left in reverse order: the configuration is entered first and appears last.
        temporary = stack.enter_context(written_beside(target, existing=existing, inputs=inputs))
        temporary.write_bytes(configuration)
        for suffix, text in texts:
            if text:
                names.append(target.with_suffix(suffix))
                temporary = stack.enter_context(written_beside(names[-1], existing=existing, inputs=inputs))
                temporary.write_bytes(text)
        temporary = stack.enter_context(written_beside(names[0], existing=existing, inputs=inputs))
        with temporary.open("wb") as file:
            for block in rows:
                file.write(block)
    return (target, *names)


def _start(record: Record) -> Moment | None:
    """Return the instant of the first sample, which in a part of a record is not the record's start."""
    if record.start is None:
        return None
    start = replace(record.start, digits=max(record.start.digits, 6))
    return start.later(float(record.times()[0])) if record.first else start


def _on_primary_side(record: Record, target: Path) -> Record:
    """The oldest revision cannot say that values are secondary: their scaling takes the ratio up."""
    for channel in record.analog:
        if channel.side == "secondary" and channel.ratio is None:
            raise RecordError(
                "unknown-ratio",
                f"channel {channel.id} is secondary without a ratio, which revision 1991 cannot say",
                path=str(target),
                hint="write revision 1999 or 2013, or leave the channel out",
            )
    analog = tuple(
        replace(
            channel,
            multiplier=channel.multiplier * channel.ratio,
            addend=channel.addend * channel.ratio,
            side="primary",
        )
        if channel.side == "secondary" and channel.ratio is not None  # for the type checker
        else channel
        for channel in record.analog
    )
    return replace(record, analog=analog)


def _configuration(
    record: Record, scales: list[StoredScale], *, revision: Revision, encoding: Encoding
) -> str:
    lines = [
        f"{_plain(record.station)},{_plain(record.device)}" + (f",{revision}" if revision > 1991 else "")
    ]
    n_analog, n_digital = len(record.analog), len(record.digital)
    lines.append(f"{n_analog + n_digital},{n_analog}A,{n_digital}D")
    for number, (channel, scale) in enumerate(zip(record.analog, scales, strict=True), start=1):
        lines.append(_analog_line(number, channel, scale, revision, encoding))
    for number, digital in enumerate(record.digital, start=1):
        place = "" if revision == 1991 else f",{_plain(digital.phase)},{_plain(digital.circuit)}"
        lines.append(f"{number},{_plain(digital.id)}{place},{digital.normal_state or 0}")
    lines.append(f"{record.nominal_frequency_hz or 0:.10g}")
    if record.timebase.stamps_s is None:
        segments = record.segments
        lines.append(f"{len(segments)}")
        lines.extend(f"{segment.rate_hz!r},{segment.stop}" for segment in segments)
    else:
        lines.extend(["0", f"0,{record.n_samples}"])
    lines.extend([_moment(record.start, revision), _moment(record.trigger or record.start, revision)])
    lines.append(encoding.upper())
    if revision > 1991:
        lines.append(f"{stamp_clock(record, revision=revision).multiplier:.10g}")
    if revision == 2013:
        clock = record.clock
        lines.append(f"{_plain(clock.time_code) or 'x'},{_plain(clock.local_code) or 'x'}")
        quality = "F" if clock.quality_code is None else f"{clock.quality_code:X}"
        lines.append(f"{quality},{_LEAP_CODES[clock.leap_second]}")
    return "\r\n".join(lines) + "\r\n"


def _analog_line(
    number: int, channel: AnalogChannel, scale: StoredScale, revision: Revision, encoding: Encoding
) -> str:
    low, high = _DECLARED_RANGE[encoding]
    if encoding == "ascii" and revision == 2013:
        low, high = _DECLARED_RANGE["float32"]
    fields = [
        str(number),
        _plain(channel.id),
        _plain(channel.phase),
        _plain(channel.circuit),
        _plain(channel.unit),
        repr(scale.multiplier),
        repr(scale.addend),
        f"{channel.skew_s * 1e6:.9g}",
        low,
        high,
    ]
    if revision > 1991:
        primary, secondary = channel.primary or 1.0, channel.secondary or 1.0
        if channel.side == "secondary" and channel.ratio is None:
            primary = secondary = 0.0  # as it was read: the ratio is not known
        fields += [f"{primary!r}", f"{secondary!r}", "S" if channel.side == "secondary" else "P"]
    return ",".join(fields)


def _moment(moment: Moment | None, revision: Revision) -> str:
    if moment is None:
        return ","
    day = moment.second
    date = f"{day.day:02d}/{day.month:02d}/{day.year:04d}"
    if revision == 1991:  # two digits of the year where they are read back as the same year
        year = f"{day.year % 100:02d}" if 1980 <= day.year < 2080 else f"{day.year:04d}"
        date = f"{day.month:02d}/{day.day:02d}/{year}"
    digits = max(moment.digits, 6) if revision == 2013 else 6
    return f"{date},{day:%H:%M:%S}." + f"{moment.nanosecond:09d}"[:digits]


def _plain(text: str) -> str:
    """A field: the format has no quoting, so a comma or a line's end inside would break the line."""
    return "".join(" " if c == "," or not c.isprintable() else c for c in text).strip()


def _row_bytes(record: Record, encoding: Encoding) -> int:
    width = 2 if encoding == "binary" else 4
    return 8 + width * len(record.analog) + 2 * ((len(record.digital) + 15) // 16)
