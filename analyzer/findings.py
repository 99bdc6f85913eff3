"""The findings: what is said of a record, as a document that other programs may rely on.

Values are primary SI, phasors RMS, angles degrees in (-180, 180], times seconds after the record's first
sample. A field may be added to the document; none changes its name or meaning without a new version.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any, ClassVar, Literal, Self

from pydantic import Field, model_validator

from analyzer.errors import FaultassayError
from analyzer.findings_parts import (
    Clearing,
    Correlation,
    Count,
    Decay,
    Impedance,
    ImpedanceFindings,
    Inception,
    NotNegative,
    Number,
    Part,
    PathText,
    Peak,
    Phase,
    PhaseFindings,
    Positive,
    Prefault,
    Quantity,
    Seconds,
    Sentence,
    SourceImpedance,
    XOverR,
)

__all__ = [
    "SCHEMA_ID",
    "Clearing",
    "ClockInfo",
    "Comparison",
    "Decay",
    "DepartureInfo",
    "ErrorInfo",
    "Event",
    "FailedRecord",
    "FailedRecordInfo",
    "Findings",
    "Fit",
    "Impedance",
    "ImpedanceFindings",
    "Inception",
    "Peak",
    "PhaseFindings",
    "Prefault",
    "ProblemInfo",
    "Quantity",
    "RecordInfo",
    "Software",
    "SourceImpedance",
    "TerminalInfo",
    "XOverR",
    "worst_verdict",
]

SCHEMA_ID: Literal["faultassay/findings/1"] = "faultassay/findings/1"

FaultType = Literal["AG", "BG", "CG", "AB", "BC", "CA", "ABG", "BCG", "CAG", "ABC"]
Kind = Literal["fault", "energisation", "switching", "unclassified"]
Direction = Literal["forward", "reverse", "undetermined"]
EventVerdict = Literal["follows-theory", "departs", "undetermined"]
RecordVerdict = Literal["follows-theory", "departs", "undetermined", "no-fault"]
CheckVerdict = Literal["agrees", "departs", "undetermined"]
DepartureSeverity = Literal["note", "warning", "disqualifies"]
DepartureCode = Literal[
    "ct-saturation",
    "clipped-channel",
    "two-time-constants",
    "ac-decrement",
    "evolving-fault",
    "arcing",
    "frequency-excursion",
    "offset-mismatch",
    "xr-mismatch",
    "delayed-zeros",
    "restrike",
    "oscillatory-start",
    "inrush",
    "limited-source",
    "self-clearing",
    "voltage-transformer-transient",
    "filtered-record",
    "gapped-ct",
    "wiring",
    "short-window",
    "residual-structure",
]


def _software_version() -> str:
    from analyzer import __version__

    return __version__


class Software(Part):
    """The program that wrote the findings."""

    name: Literal["faultassay"] = "faultassay"
    version: str = Field(default_factory=_software_version)


class ProblemInfo(Part):
    """Something wrong in the file that was repaired or tolerated."""

    code: Sentence
    severity: Literal["note", "warning"]
    message: PathText
    where: PathText


class ClockInfo(Part):
    """What the record says of its clock: `quality` in words, the time codes as written."""

    quality: str
    time_code: str
    local_code: str
    leap_second: Literal["none", "added", "subtracted", "unknown"]


class RecordInfo(Part):
    """The record that was examined; `sha256` is of its data file, the instants are ISO 8601."""

    path: PathText
    sha256: str | None
    format: Sentence
    revision: Literal[1991, 1999, 2013] | None
    encoding: Literal["ascii", "binary", "binary32", "float32"] | None
    station: str
    device: str
    start_time: str | None
    trigger_time: str | None
    clock: ClockInfo | None
    nominal_frequency_hz: Positive | None
    sample_rates_hz: tuple[Positive, ...]
    n_samples: Count
    duration_s: NotNegative
    n_analog: Count
    n_digital: Count
    problems: tuple[ProblemInfo, ...]


class TerminalInfo(Part):
    """Channels that belong together: `channels` has the channel id of each role, `confidence` is 0 to 1."""

    name: str
    channels: dict[str, str]
    how: Literal["by-name", "by-site-file", "by-hand"]
    confidence: NotNegative = Field(le=1)


class Fit(Part):
    """Quality of the fit; numbers are None where nothing was fitted.

    ``reduced_chi_square`` divides by the noise found before inception. ``bound_ratio`` is the standard
    uncertainty of the time constant over its Cramér-Rao bound at that noise.
    """

    samples: Count
    free_parameters: Count
    noise_rms_a: NotNegative | None
    residual_rms_a: NotNegative | None
    reduced_chi_square: NotNegative | None
    lag1_autocorrelation: Correlation | None
    bound_ratio: NotNegative | None

    @classmethod
    def none(cls) -> Self:
        """Return what is said where nothing was fitted."""
        return cls(
            samples=0,
            free_parameters=0,
            noise_rms_a=None,
            residual_rms_a=None,
            reduced_chi_square=None,
            lag1_autocorrelation=None,
            bound_ratio=None,
        )


class Comparison(Part):
    """One measured value beside what theory demands of it."""

    check: Sentence
    measured: Quantity
    theory: Quantity
    difference: Number | None
    in_sigmas: Number | None
    verdict: CheckVerdict
    says: Sentence

    @model_validator(mode="after")
    def _one_unit(self) -> Self:
        if self.measured.unit != self.theory.unit:
            raise ValueError("measured and theory are in one unit")
        return self


class DepartureInfo(Part):
    """Something that a single RL circuit does not explain; `time_s` is None for the whole record."""

    code: DepartureCode
    severity: DepartureSeverity
    time_s: Number | None
    channels: tuple[str, ...]
    statistic: Number | None
    threshold: Number | None
    says: Sentence


class Event(Part):
    """Something that happened at one terminal.

    ``phases`` holds the faulted phases only; ``window_s`` is the stretch that the fit used.
    """

    terminal: str
    kind: Kind
    fault_type: FaultType | None
    direction: Direction
    inception: Inception
    clearing: Clearing | None
    duration_s: Seconds | None
    window_s: tuple[Number, Number]
    prefault: Prefault
    phases: dict[Phase, PhaseFindings]
    decay: tuple[Decay, ...]
    x_over_r: XOverR
    impedance: ImpedanceFindings
    fit: Fit
    comparison: tuple[Comparison, ...]
    departures: tuple[DepartureInfo, ...]
    verdict: EventVerdict

    @model_validator(mode="after")
    def _consistent(self) -> Self:
        if self.window_s[0] > self.window_s[1]:
            raise ValueError("window_s ends before it starts")
        if self.fault_type is not None:
            if self.kind != "fault":
                raise ValueError("only a fault has a fault_type")
            if not set(self.phases) <= set(self.fault_type):
                raise ValueError(f"phases of a fault {self.fault_type} are its faulted ones only")
        return self


def worst_verdict(events: Iterable[Event]) -> RecordVerdict:
    """Return the verdict of a record: the worst of its events'.

    From worst to best: ``departs``, ``undetermined``, ``follows-theory``. It is ``no-fault`` when nothing
    happened that is, or may be, a fault; an unclassified event may be one.
    """
    events = tuple(events)
    if not any(event.kind in ("fault", "unclassified") for event in events):
        return "no-fault"
    found = {event.verdict for event in events}
    order: tuple[EventVerdict, ...] = ("departs", "undetermined", "follows-theory")
    return next(verdict for verdict in order if verdict in found)


class Findings(Part):
    """All that is said of one record; without a terminal nothing was examined, and nothing is determined."""

    schema_id: Literal["faultassay/findings/1"] = Field(default=SCHEMA_ID, alias="schema")
    software: Software = Field(default_factory=Software)
    record: RecordInfo
    terminals: tuple[TerminalInfo, ...]
    events: tuple[Event, ...]
    verdict: RecordVerdict
    summary: Sentence
    elapsed_ms: NotNegative

    @model_validator(mode="after")
    def _consistent(self) -> Self:
        expected = worst_verdict(self.events) if self.terminals else "undetermined"
        if self.verdict != expected:
            raise ValueError(f"the verdict of these events is {expected}")
        times = [event.inception.time_s.value for event in self.events]
        known = [time for time in times if time is not None]
        if known != sorted(known):
            raise ValueError("events are in order of time")
        return self

    def to_dict(self) -> dict[str, Any]:
        """Return the document as plain dictionaries, lists, numbers, strings and None."""
        return self.model_dump(mode="json", by_alias=True)

    def to_json(self, *, indent: int | None = None) -> str:
        """Return the document as JSON text."""
        return self.model_dump_json(by_alias=True, indent=indent)

    @classmethod
    def json_schema(cls) -> dict[str, Any]:
        """Return the JSON Schema (draft 2020-12) of the document."""
        return {
            "$schema": "https://json-schema.org/draft/2020-12/schema",
            "$id": SCHEMA_ID,
            **cls.model_json_schema(by_alias=True),
        }


class ErrorInfo(Part):
    """Why a record could not be read or examined."""

    code: Sentence
    message: PathText
    where: PathText
    hint: str


class FailedRecordInfo(Part):
    """What is known of a record that could not be read; what is not known is absent."""

    may_be_absent: ClassVar[frozenset[str]] = frozenset({"sha256", "format"})

    path: PathText
    sha256: str | None = None
    format: str | None = None


class FailedRecord(Part):
    """The document in place of findings for a record that could not be read, so that none is lost."""

    schema_id: Literal["faultassay/findings/1"] = Field(default=SCHEMA_ID, alias="schema")
    software: Software = Field(default_factory=Software)
    record: FailedRecordInfo
    error: ErrorInfo

    @classmethod
    def of(
        cls, path: str, error: FaultassayError, *, sha256: str | None = None, format: str | None = None
    ) -> Self:
        """Return the document for `error`, which came up with the record at `path`."""
        return cls(
            record=FailedRecordInfo(path=path, sha256=sha256, format=format),
            error=ErrorInfo(code=error.code, message=error.message, where=error.where, hint=error.hint),
        )

    def to_dict(self) -> dict[str, Any]:
        """Return the document as plain dictionaries and strings."""
        return self.model_dump(mode="json", by_alias=True, exclude_none=True)

    def to_json(self, *, indent: int | None = None) -> str:
        """Return the document as JSON text."""
        return self.model_dump_json(by_alias=True, exclude_none=True, indent=indent)
