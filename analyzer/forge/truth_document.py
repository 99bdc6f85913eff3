"""What is true of a forged record, as the JSON document beside it, in the terms of the findings.

Values are primary SI, phasors RMS, angles degrees in (-180, 180], times seconds after the record's first
sample. Instants are those in the network; the recorded waveform is later by `instruments.delay_s`, which
nothing in a record shows. Null is what does not exist: the time constant of what nothing damps, the
angle of a dead voltage.
"""

from __future__ import annotations

from typing import Any, Literal

from pydantic import Field

from analyzer.findings import DepartureCode, FaultType
from analyzer.findings_parts import (
    Count,
    DecayLoop,
    NotNegative,
    Number,
    Part,
    Phase,
    Positive,
    ReferenceLoop,
    Sentence,
)
from analyzer.forge.scenario_instruments import Role

TRUTH_SCHEMA_ID: Literal["faultassay/truth/1"] = "faultassay/truth/1"


class TrueImpedance(Part):
    """An impedance at power frequency; `x_over_r` is null without resistance."""

    r_ohm: Number
    x_ohm: Number
    magnitude_ohm: NotNegative
    angle_deg: Number
    x_over_r: Number | None


class TrueRecord(Part):
    """The record: `channels` has the written name of each recorded quantity, `seed` and `index` its draw."""

    name: Sentence
    title: str
    station: str
    device: str
    start_time: str | None
    nominal_frequency_hz: Positive
    sample_rate_hz: Positive
    n_samples: Count
    duration_s: NotNegative
    channels: dict[Role, str]
    seed: Count
    index: Count


class Gain(Part):
    """A complex gain at nominal frequency."""

    magnitude: NotNegative
    angle_deg: Number


class TrueError(Part):
    """Ratio error per unit and leading phase displacement of one phase's transformer."""

    ratio_pu: Number
    phase_minutes: Number


class PhaseSaturation(Part):
    """One core: first passing of the knee flux, share of the record beyond it, largest values."""

    first_crossing_s: Number | None
    saturated_fraction: NotNegative
    peak_flux_pu: NotNegative
    peak_magnetising_a: NotNegative


class TrueInstruments(Part):
    """What the instruments did.

    Attributes
    ----------
    delay_s, delay_at_zero_s : float
        Of the anti-alias filter at nominal frequency, and of slow signals. [s]
    filter_gain, relay_filter_gain : Gain
        At nominal frequency.
    ct_time_constant_s : float or None
        Secondary time constant; null for ideal transformers. [s]
    ct_errors, vt_errors : mapping of phase to TrueError
        Empty where there are none.
    saturation : mapping of phase to PhaseSaturation, or None
        Null for a core without knee.
    skew_s, noise_rms, value_per_count, clipped_samples : mapping of channel
        In primary units; `value_per_count` is empty without a converter.
    solver_error_a : float
        How far currents may be off because a saturating core is solved numerically. [A]
    """

    delay_s: NotNegative
    delay_at_zero_s: NotNegative
    filter_gain: Gain
    relay_filter_gain: Gain
    ct_time_constant_s: Positive | None
    ct_errors: dict[Phase, TrueError]
    vt_errors: dict[Phase, TrueError]
    saturation: dict[Phase, PhaseSaturation] | None
    skew_s: dict[Role, Number]
    noise_rms: dict[Role, NotNegative]
    value_per_count: dict[Role, Positive]
    clipped_samples: dict[Role, Count]
    solver_error_a: NotNegative


class TrueDeparture(Part):
    """A departure that was put in; `unit` is null where `says` has it, `channels` empty for the network's."""

    code: DepartureCode
    time_s: Number | None
    channels: tuple[Role, ...]
    strength: Number
    unit: str | None
    says: Sentence


class TrueInception(Part):
    """Start in the network; in the record it appears `delay_s` later."""

    time_s: Number
    delay_s: NotNegative
    voltage_angle_deg: Number | None
    reference: ReferenceLoop


class TrueClearing(Part):
    """Interruption of the last faulted phase, null if it was not, and of each that was."""

    time_s: Number | None
    by_phase_s: dict[Phase, Number]


class TruePrefault(Part):
    """Before inception; angles are against the reference loop's voltage, null where that was dead."""

    frequency_hz: Positive
    voltage_rms_v: dict[Phase, NotNegative]
    voltage_angle_deg: dict[Phase, Number | None]
    current_rms_a: dict[Phase, NotNegative]
    current_angle_deg: dict[Phase, Number | None]


class TruePeak(Part):
    """Largest instantaneous magnitude of the primary current, and what it is of the symmetrical peak."""

    value_a: NotNegative
    time_s: Number
    ratio: NotNegative | None


class TruePhase(Part):
    """One phase's current: at inception, settled, its offset; null where the event is no fault."""

    symmetrical_rms_a: NotNegative | None
    angle_deg: Number | None
    steady_rms_a: NotNegative | None
    dc_initial_a: Number | None
    peak: TruePeak


class TrueMode(Part):
    """One exponential of the line currents; `frequency_hz` above zero is a ringing, its amplitude a size."""

    time_constant_s: Positive | None
    frequency_hz: NotNegative
    amplitude_a: dict[Phase, Number]


class TrueDecay(Part):
    """Decay of a loop's offset; `exact` where the network has just this exponential for it."""

    loop: DecayLoop
    time_constant_s: Positive | None
    x_over_r: Number | None
    exact: bool


class TrueLoop(Part):
    """Impedances of one driven loop.

    Attributes
    ----------
    circuit : TrueImpedance or None
        Sum of what lies behind the terminal, the line to the fault and the fault's resistances; null where
        the fault is not fed through the terminal from behind it.
    total : TrueImpedance or None
        Loop voltage at the bus before inception over the loop's fault current: the same without load
        and remote infeed.
    faulted_loop : TrueImpedance or None
        Loop voltage over loop current at the terminal during the fault.
    """

    loop: DecayLoop
    circuit: TrueImpedance | None
    total: TrueImpedance | None
    faulted_loop: TrueImpedance | None


class TrueSource(Part):
    """Behind the terminal, loads at the bus included; null where nothing conducts."""

    z1: TrueImpedance | None
    z2: TrueImpedance | None
    z0: TrueImpedance | None


class TrueImpedances(Part):
    """As in the findings; `total` and `faulted_loop` are those of the first loop."""

    source: TrueSource
    faulted_loop: TrueImpedance | None
    faulted: TrueImpedance
    total: TrueImpedance | None
    loops: tuple[TrueLoop, ...]


class TrueSegment(Part):
    """A stretch of an evolving fault: from when, and of which type."""

    time_s: Number
    fault_type: FaultType


class TrueEvent(Part):
    """One event.

    `phases` holds the faulted phases of a fault and all three otherwise; `x_over_r` is that of the first
    loop's `circuit`.
    """

    kind: Literal["fault", "energisation", "switching"]
    fault_type: FaultType | None
    direction: Literal["forward", "reverse"] | None
    inception: TrueInception
    clearing: TrueClearing | None
    duration_s: NotNegative | None
    prefault: TruePrefault
    phases: dict[Phase, TruePhase]
    segments: tuple[TrueSegment, ...]
    decay: tuple[TrueDecay, ...]
    modes: tuple[TrueMode, ...]
    x_over_r: Number | None
    impedance: TrueImpedances | None
    departures: tuple[TrueDeparture, ...]


class TruthDocument(Part):
    """The document; `departures` are the instruments', those of the network stand in their event."""

    schema_id: Literal["faultassay/truth/1"] = Field(default=TRUTH_SCHEMA_ID, alias="schema")
    record: TrueRecord
    instruments: TrueInstruments
    events: tuple[TrueEvent, ...]
    departures: tuple[TrueDeparture, ...]
    scenario: dict[str, Any] = Field(description="The scenario with its distributions drawn.")

    def to_dict(self) -> dict[str, Any]:
        """Return the document as plain dictionaries, lists, numbers, strings and None."""
        return self.model_dump(mode="json", by_alias=True)

    def to_json(self) -> str:
        """Return the document as JSON text, ASCII only."""
        import json

        return json.dumps(self.to_dict(), indent=1, allow_nan=False) + "\n"

    @classmethod
    def json_schema(cls) -> dict[str, Any]:
        """Return the JSON Schema (draft 2020-12) of the document."""
        return {
            "$schema": "https://json-schema.org/draft/2020-12/schema",
            "$id": TRUTH_SCHEMA_ID,
            **cls.model_json_schema(by_alias=True),
        }
