"""From the members of a COMTRADE record to a Record."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from analyzer.records.blobs import Blob, Shelf
from analyzer.records.comtrade.ascii import read_ascii
from analyzer.records.comtrade.binary import BinarySource, row_type
from analyzer.records.comtrade.cfg import Configuration, Encoding, parse_configuration
from analyzer.records.comtrade.members import Members, collect_members
from analyzer.records.comtrade.stamps import (
    check_numbers,
    compare_with_rates,
    own_step_first,
    present_stamps,
    times_from_stamps,
)
from analyzer.records.model import Origin, Record
from analyzer.records.options import ReadOptions
from analyzer.records.problems import Problem, RecordError, gathered
from analyzer.records.sources import SampleSource
from analyzer.records.text import decode_text
from analyzer.records.timebase import TimeBase

_HEAD_BYTES = 1 << 16
_TEXT_BYTES = frozenset(b"0123456789+-.,eE \t\r\n\x1aNnAaIiFf;")


def read_comtrade(shelf: Shelf, name: str, *, options: ReadOptions) -> Record:
    """Return the record that a COMTRADE member belongs to.

    Parameters
    ----------
    shelf : Shelf
        Folder or archive that holds the members.
    name : str
        Any member's name, or the stem that all share.
    options : ReadOptions
        Text encoding, units and nominal frequency where the file is wrong.

    Returns
    -------
    Record
        Binary samples stay on disk until asked for.

    Raises
    ------
    RecordError
        If it cannot be read; names file, line and field.
    """
    members = collect_members(shelf, name)
    text, text_encoding = _decoded(members, options)
    configuration = parse_configuration(text, shown=members.configuration_shown)
    problems = [*members.problems, *configuration.problems]
    if text_encoding not in ("utf-8", "utf-8-sig") and options.text_encoding is None:
        problems.append(
            Problem(
                code="text-encoding",
                message=f"text read as {text_encoding}",
                where=members.configuration_shown,
            )
        )
    encoding = _encoding(members.data, configuration, problems)
    if encoding == "ascii":
        source, timebase = _open_ascii(members.data, configuration, problems)
    else:
        source, timebase = _open_binary(members.data, configuration, encoding, problems)
    declared = configuration.declared_samples
    if declared is not None and declared not in (source.n_samples, source.n_samples - 1):
        problems.append(
            Problem(
                code="sample-count",
                severity="warning" if declared > source.n_samples else "note",
                message=f"{declared} samples are declared, {source.n_samples} are there",
                where=members.data.shown,
            )
        )
    problems.extend(_check_trigger(configuration, timebase, members.configuration_shown))
    analog = configuration.analog
    if options.units:
        analog = tuple(replace(c, unit=options.units.get(c.id, c.unit)) for c in analog)
    return Record(
        origin=Origin(
            path=members.origin.shown,
            format="comtrade",
            revision=configuration.revision,
            encoding=encoding,
            data=members.origin,
            header_text=decode_text(members.header)[0],
            information_text=decode_text(members.information)[0],
        ),
        timebase=timebase,
        source=source,
        analog=analog,
        digital=configuration.digital,
        station=configuration.station,
        device=configuration.device,
        nominal_frequency_hz=options.nominal_frequency_hz or configuration.nominal_frequency_hz,
        start=configuration.start,
        trigger=configuration.trigger,
        clock=configuration.clock,
        problems=gathered(problems),
    )


def _decoded(members: Members, options: ReadOptions) -> tuple[str, str]:
    try:
        return decode_text(members.configuration, encoding=options.text_encoding)
    except (LookupError, ValueError) as error:  # some of Python's encodings know no replacement
        raise RecordError(
            "unknown-encoding",
            f"text cannot be read as {options.text_encoding!r}",
            path=members.configuration_shown,
            hint="name it as Python does, such as cp1251 or utf-8",
        ) from error


def _open_ascii(
    data: Blob, configuration: Configuration, problems: list[Problem]
) -> tuple[SampleSource, TimeBase]:
    parsed = read_ascii(
        data.view(),
        analog=configuration.analog,
        n_digital=len(configuration.digital),
        revision=configuration.revision,
        shown=data.shown,
    )
    timebase = _timebase(configuration, parsed.numbers[:1], parsed.stamps, data.shown, problems)
    problems.extend(check_numbers(parsed.numbers, shown=data.shown))
    if timebase.stamps_s is None:
        stamps_s = present_stamps(parsed.stamps) * configuration.stamp_unit_s
        problems.extend(
            compare_with_rates(lambda first, stop: stamps_s[first:stop], timebase, shown=data.shown)
        )
    problems.extend(parsed.source.problems)
    return replace(parsed.source, problems=()), timebase


def _open_binary(
    data: Blob, configuration: Configuration, encoding: Encoding, problems: list[Problem]
) -> tuple[SampleSource, TimeBase]:
    layout = row_type(encoding, len(configuration.analog), len(configuration.digital))
    view = data.view()
    n_samples, over = divmod(len(view), layout.itemsize)
    if n_samples == 0:
        raise RecordError(
            "no-samples",
            f"{len(view)} bytes of data are less than one sample ({layout.itemsize} bytes)",
            path=data.shown,
        )
    if over:
        problems.append(
            Problem(
                code="data-cut-short",
                severity="warning",
                message=f"{over} bytes after the last whole sample are left out",
                where=data.shown,
            )
        )
    rows: NDArray[Any] = np.frombuffer(view, dtype=layout, count=n_samples)
    timebase = _timebase(configuration, rows["number"][:1], rows["stamp"], data.shown, problems)
    source = BinarySource(
        rows=rows,
        encoding=encoding,
        revision=configuration.revision,
        timebase=timebase,
        stamp_unit_s=configuration.stamp_unit_s,
        shown=data.shown,
    )
    return source, timebase


def _timebase(
    configuration: Configuration,
    first_number: NDArray[Any],
    stamps: NDArray[Any],
    shown: str,
    problems: list[Problem],
) -> TimeBase:
    if not configuration.rates_hz:
        timebase, mended = times_from_stamps(
            present_stamps(stamps), unit_s=configuration.stamp_unit_s, shown=shown
        )
        problems.append(
            Problem(
                code="times-from-stamps",
                message="no sampling rate is stated; times are the stamps'",
                where=shown,
            )
        )
        problems.extend(mended)
        return timebase
    counts_from_zero = first_number.size > 0 and first_number[0] == 0
    if counts_from_zero:
        problems.append(Problem(code="counts-from-zero", message="sample numbers start at 0", where=shown))
    stops = [last + bool(counts_from_zero) for last in configuration.last_samples]
    own_step = own_step_first(stamps, configuration.rates_hz, stops, unit_s=configuration.stamp_unit_s)
    return TimeBase.from_rates(configuration.rates_hz, stops, n_samples=len(stamps), own_step_first=own_step)


def _check_trigger(configuration: Configuration, timebase: TimeBase, shown: str) -> list[Problem]:
    if configuration.start is None or configuration.trigger is None:
        return []
    trigger_s = configuration.trigger.seconds_after(configuration.start)
    if 0.0 <= trigger_s <= timebase.duration_s + 1e-6:
        return []
    message = f"the trigger is {trigger_s:.6g} s after the first sample, outside the record"
    return [Problem(code="trigger-outside", message=message, where=shown)]


def _encoding(data: Blob, configuration: Configuration, problems: list[Problem]) -> Encoding:
    """Return the encoding that the data have: the declared one unless the bytes plainly say another."""
    head = data.head(_HEAD_BYTES)
    if not head:
        raise RecordError("no-samples", "the data file is empty", path=data.shown)
    declared = configuration.encoding
    text = head[:4096].rstrip(b"\0\x1a")  # some pad the end of the file
    is_text = all(byte in _TEXT_BYTES for byte in text) and b"," in text
    if is_text:
        seen: Encoding | None = "ascii"
    elif declared not in (None, "ascii"):
        seen = declared if _numbers_follow(head, declared, configuration) else None
    else:
        seen = None
    candidates: tuple[Encoding, ...] = ("binary", "binary32", "float32")
    if seen is None and (declared != "ascii" or b"\0" in head):
        seen = next((kind for kind in candidates if _numbers_follow(head, kind, configuration)), None)
        if seen == "binary32" and _holds_reals(head, configuration):
            seen = "float32"
    if seen is None:
        if declared is None or (declared == "ascii" and b"\0" in head):
            raise RecordError(
                "bad-data",
                "the data are neither text nor binary samples of the declared channels",
                path=data.shown,
                hint="check that configuration and data belong together",
            )
        return declared
    if declared is not None and seen != declared:
        problems.append(
            Problem(
                code="type-mismatch",
                severity="warning",
                message=f"file type {declared.upper()} is declared, the data are {seen.upper()} and read so",
                where=data.shown,
            )
        )
    return seen


def _holds_reals(head: bytes, configuration: Configuration) -> bool:
    """Whether samples of four bytes are real numbers: whole ones make none of everyday size, unless large."""
    layout = row_type("float32", len(configuration.analog), len(configuration.digital))
    rows = np.frombuffer(head, dtype=layout, count=len(head) // layout.itemsize)
    if any(1 << 23 <= (channel.stored_max or 0.0) < 1 << 31 for channel in configuration.analog):
        return False
    sizes = np.abs(rows["analog"][rows["analog"] != 0].astype(np.float64))
    return sizes.size > 0 and bool(np.mean((sizes > 1e-20) & (sizes < 1e20)) > 0.5)


def _numbers_follow(head: bytes, encoding: Encoding | None, configuration: Configuration) -> bool:
    if encoding is None or encoding == "ascii":
        return False
    layout = row_type(encoding, len(configuration.analog), len(configuration.digital))
    count = min(len(head) // layout.itemsize, 8)
    if count < 2:
        return count == 1 and encoding == configuration.encoding
    numbers = np.frombuffer(head, dtype=layout, count=count)["number"].astype(np.int64)
    return bool(np.all(np.diff(numbers) == 1))
