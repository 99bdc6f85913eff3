"""What is in a record, as plain data: the document of ``describe --json``.

The document, version 1 (a field may be added, none changes its meaning)::

    {"schema": "faultassay/description/1",
     "software": {"name", "version"},
     "record": {
       "path", "format", "revision", "encoding", "station", "device",
       "start_time", "trigger_time",            ISO 8601 or null
       "trigger_s",                             after the first sample, or null
       "clock": {"quality", "time_code", "local_code", "leap_second"},
       "nominal_frequency_hz", "n_samples", "duration_s",
       "rates": [{"rate_hz", "start_s", "first_sample", "n_samples"}],
       "analog": [{"id", "name", "phase", "circuit", "unit", "side", "rated_primary", "rated_secondary",
                   "skew_s", "si_unit", "minimum", "maximum", "missing"}],
       "digital": [{"id", "name", "phase", "circuit", "normal_state", "initial_state", "n_changes",
                    "changes": [{"time_s", "state"}]}],
       "problems": [{"code", "severity", "message", "where"}]}}

``minimum`` and ``maximum`` are primary SI values in ``si_unit``, null where the channel's unit or ratio is
not known or no sample is a finite number. ``changes`` holds the first 1000 at most. A record that could not
be read has ``{"schema", "software", "record": {"path"}, "error": {"code", "message", "where", "hint"}}``.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from analyzer import __version__
from analyzer.errors import FaultassayError
from analyzer.records.channels import AnalogChannel, DigitalChannel
from analyzer.records.model import Record

SCHEMA_ID = "faultassay/description/1"
MOST_CHANGES = 1000
_BLOCK_VALUES = 1 << 22


def description(record: Record) -> dict[str, Any]:
    """Return the document; reads every sample, a stretch at a time.

    Raises
    ------
    RecordError
        If the samples cannot be read.
    """
    record = record.survey()
    survey = _Survey.of(record)
    origin = record.origin
    return {
        **_head(),
        "record": {
            "path": unicode_path(origin.path),
            "format": origin.format,
            "revision": origin.revision,
            "encoding": origin.encoding,
            "station": record.station,
            "device": record.device,
            "start_time": record.start.isoformat() if record.start else None,
            "trigger_time": record.trigger.isoformat() if record.trigger else None,
            "trigger_s": record.trigger_s,
            "clock": {
                "quality": record.clock.quality,
                "time_code": record.clock.time_code,
                "local_code": record.clock.local_code,
                "leap_second": record.clock.leap_second,
            },
            "nominal_frequency_hz": record.nominal_frequency_hz,
            "n_samples": record.n_samples,
            "duration_s": record.duration_s,
            "rates": [
                {
                    "rate_hz": segment.rate_hz,
                    "start_s": segment.start_s,
                    "first_sample": segment.first,
                    "n_samples": segment.stop - segment.first,
                }
                for segment in record.segments
            ],
            "analog": [_analog(channel, survey, k) for k, channel in enumerate(record.analog)],
            "digital": [_digital(channel, survey.digital[k]) for k, channel in enumerate(record.digital)],
            "problems": [
                {
                    "code": problem.code,
                    "severity": problem.severity,
                    "message": problem.message,
                    "where": unicode_path(problem.where),
                }
                for problem in record.problems
            ],
        },
    }


def failed_description(path: str, error: FaultassayError) -> dict[str, Any]:
    """Return the document in place of a description for a record that could not be read."""
    return {
        **_head(),
        "record": {"path": unicode_path(path)},
        "error": {
            "code": error.code,
            "message": error.message,
            "where": unicode_path(error.where),
            "hint": error.hint,
        },
    }


def unicode_path(path: str) -> str:
    """Return a path with the bytes that are no text in its code page spelled out."""
    return path.encode("utf-8", errors="backslashreplace").decode("utf-8")


def _head() -> dict[str, Any]:
    return {"schema": SCHEMA_ID, "software": {"name": "faultassay", "version": __version__}}


@dataclass(slots=True)
class _Changes:
    initial: int | None = None
    n: int = 0
    first: list[tuple[float, int]] = field(default_factory=list)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Survey:
    """Lowest and highest stored number and missing samples of each analog channel, changes of the digital."""

    lowest: NDArray[np.float64]
    highest: NDArray[np.float64]
    missing: NDArray[np.int64]
    digital: tuple[_Changes, ...]

    @classmethod
    def of(cls, record: Record) -> _Survey:
        numbers = [channel.number for channel in record.analog]
        digital_numbers = [channel.number for channel in record.digital]
        ones, zeros = np.ones(len(numbers)), np.zeros(len(numbers))
        lowest, highest = np.full(len(numbers), np.nan), np.full(len(numbers), np.nan)
        missing = np.zeros(len(numbers), dtype=np.int64)
        changes = tuple(_Changes() for _ in digital_numbers)
        before = np.zeros((len(digital_numbers), 0), dtype=np.uint8)
        first, end = record.first, record.first + record.n_samples
        step = max(1, _BLOCK_VALUES // max(1, len(numbers) + len(digital_numbers)))
        for start in range(first, end, step):
            stop = min(start + step, end)
            if numbers:
                stored = record.source.analog(numbers, start, stop, ones, zeros)
                lowest = np.fmin(lowest, np.fmin.reduce(stored, axis=1))
                highest = np.fmax(highest, np.fmax.reduce(stored, axis=1))
                missing += np.isnan(stored).sum(axis=1)
            if digital_numbers:
                states = record.source.digital(digital_numbers, start, stop)
                part = replace(record, first=start, stop=stop)
                _note_changes(changes, np.hstack([before, states]), part, overlap=before.shape[1])
                before = states[:, -1:]
        return cls(lowest=lowest, highest=highest, missing=missing, digital=changes)


def _note_changes(
    changes: tuple[_Changes, ...], states: NDArray[np.uint8], part: Record, *, overlap: int
) -> None:
    rows, columns = np.nonzero(states[:, 1:] != states[:, :-1])
    times = part.times() if rows.size else np.empty(0)
    for row, counted in enumerate(np.bincount(rows, minlength=len(changes))):
        change = changes[row]
        if change.initial is None:
            change.initial = int(states[row, 0])
        change.n += int(counted)
        room = MOST_CHANGES - len(change.first)
        if counted and room > 0:
            after = columns[rows == row][:room] + 1
            change.first += [(float(times[k - overlap]), int(states[row, k])) for k in after]


def _analog(channel: AnalogChannel, survey: _Survey, k: int) -> dict[str, Any]:
    unit, ratio = channel.known_unit, channel.ratio
    minimum = maximum = None
    if unit is not None and ratio is not None:
        gain = channel.multiplier * unit.factor * ratio
        offset = channel.addend * unit.factor * ratio
        ends = sorted(gain * float(stored[k]) + offset for stored in (survey.lowest, survey.highest))
        minimum, maximum = (end if math.isfinite(end) else None for end in ends)
    return {
        "id": channel.id,
        "name": channel.name,
        "phase": channel.phase,
        "circuit": channel.circuit,
        "unit": channel.unit,
        "side": channel.side,
        "rated_primary": _finite(channel.primary),
        "rated_secondary": _finite(channel.secondary),
        "skew_s": channel.skew_s,
        "si_unit": channel.si_unit or None,
        "minimum": minimum,
        "maximum": maximum,
        "missing": int(survey.missing[k]),
    }


def _finite(value: float | None) -> float | None:
    return value if value is not None and math.isfinite(value) else None


def _digital(channel: DigitalChannel, changes: _Changes) -> dict[str, Any]:
    return {
        "id": channel.id,
        "name": channel.name,
        "phase": channel.phase,
        "circuit": channel.circuit,
        "normal_state": channel.normal_state,
        "initial_state": changes.initial,
        "n_changes": changes.n,
        "changes": [{"time_s": time_s, "state": state} for time_s, state in changes.first],
    }
