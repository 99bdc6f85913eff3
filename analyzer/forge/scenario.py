"""The schema of a scenario: what a forged record is made of, as sections of a TOML file.

Any number may be a distribution (`analyzer.forge.amounts`); `analyzer.forge.example` has a commented file
with every section. Values are primary SI, impedances are those at nominal frequency, times are seconds
after the record's first sample and angles are degrees.
"""

from __future__ import annotations

from datetime import datetime
from typing import Annotated, Any, Literal, Self

from pydantic import Discriminator, Field, Tag, model_validator

from analyzer.forge.amounts import Amount, Number, Section, WordChoice
from analyzer.forge.scenario_instruments import Instruments, Role
from analyzer.forge.schedule import Breaker, FaultType

_PLAIN_NAME = r"^[A-Za-z0-9][A-Za-z0-9_.-]{0,99}$"
_MOST_SAMPLES = 500_000  # a few hundred megabytes on the instruments' finer grid
_SUMS = [{"r_ohm", "x_ohm"}, {"x_ohm", "x_over_r"}, {"r_ohm", "x_over_r"}]
_TIMES = {"time_s", "after_s", "angle_deg"}
_POLAR = [{"magnitude_ohm", "angle_deg"}, {"magnitude_ohm", "x_over_r"}]


class Ohms(Section):
    """An impedance by two of its parts: r_ohm and x_ohm, one of them and x_over_r, or magnitude and angle."""

    r_ohm: Amount | None = Field(None, description="Resistance. [ohm]")
    x_ohm: Amount | None = Field(None, description="Reactance at nominal frequency. [ohm]")
    magnitude_ohm: Amount | None = Field(None, description="Magnitude. [ohm]")
    angle_deg: Amount | None = Field(None, description="Angle of the impedance. [deg]")
    x_over_r: Amount | None = Field(None, description="Ratio of reactance to resistance.")

    @model_validator(mode="after")
    def _two_parts(self) -> Self:
        if {name for name, part in self if part is not None} not in _SUMS + _POLAR:
            raise ValueError(
                "an impedance has r_ohm and x_ohm, or x_over_r with one of r_ohm, x_ohm, magnitude_ohm, "
                "or magnitude_ohm and angle_deg"
            )
        return self


class Sides(Section):
    """Rated values of an instrument transformer; only their ratio counts."""

    primary: Number = Field(ge=1e-3, le=1e7, description="Rated primary value. [A or V]")
    secondary: Number = Field(ge=1e-3, le=1e7, description="Rated secondary value. [A or V]")


class RecordSection(Section):
    """`[record]`: the file, its channels, its rate and length."""

    name: str | None = Field(
        None, pattern=_PLAIN_NAME, description="Of the files, without suffix; the scenario's when left out."
    )
    station: str = Field("", description="Invented, please.")
    device: str = Field("", description="Name of the recorder.")
    circuit: str = Field("", description="Name of the protected circuit, for each channel.")
    format: Literal["comtrade", "csv"] = Field("comtrade", description="What is written.")
    revision: Literal[1991, 1999, 2013] = Field(1999, description="Revision of COMTRADE.")
    encoding: Literal["ascii", "binary", "binary32", "float32"] = Field(
        "binary", description="Of the COMTRADE data; the last two came with 2013."
    )
    combined: bool = Field(False, description="All in one .cff file, revision 2013 only.")
    samples_per_cycle: Number | None = Field(None, gt=0, description="Of the nominal frequency.")
    sample_rate_hz: Number | None = Field(None, gt=0, description="In place of samples_per_cycle. [Hz]")
    duration_s: Number = Field(gt=0, le=60, description="Length of the record. [s]")
    start_time: datetime | None = Field(None, description="Local instant of the first sample, no zone.")
    trigger_s: Number | None = Field(
        None, ge=0, description="Of the trigger; at the first event when left out. [s]"
    )
    channels: tuple[Role, ...] = Field(
        ("va", "vb", "vc", "ia", "ib", "ic"),
        min_length=1,
        description="Recorded quantities in this order; in and vn are the sums of three.",
    )
    names: dict[Role, str] = Field({}, description="Channel names; IA, VA and so on when left out.")
    current_unit: Literal["A", "kA"] = Field("A", description="Unit that the file states for currents.")
    voltage_unit: Literal["V", "kV"] = Field("V", description="Unit that the file states for voltages.")
    side: Literal["primary", "secondary"] = Field("primary", description="Side that the values are on.")
    current_ratio: Sides | None = Field(None, description="Of the current transformers.")
    voltage_ratio: Sides | None = Field(None, description="Of the voltage transformers.")
    seed: int = Field(1, ge=0, description="Of everything that is drawn: distributions, classes, noise.")

    @model_validator(mode="after")
    def _fits_together(self) -> Self:
        if (self.samples_per_cycle is None) == (self.sample_rate_hz is None):
            raise ValueError("give either samples_per_cycle or sample_rate_hz")
        if self.side == "secondary" and (self.current_ratio is None or self.voltage_ratio is None):
            raise ValueError("secondary values need current_ratio and voltage_ratio")
        if self.start_time is not None and self.start_time.tzinfo is not None:
            raise ValueError("start_time is a local time without zone")
        if len(set(self.channels)) != len(self.channels):
            raise ValueError("channels are given once each")
        if self.revision != 2013 and (self.combined or self.encoding in ("binary32", "float32")):
            raise ValueError("combined files, binary32 and float32 came with revision 2013")
        return self


class SourceSection(Section):
    """A stiff voltage behind sequence impedances: `[network.source]`, `[network.remote]`."""

    voltage_rms_v: Amount = Field(description="Phase to ground. [V]")
    angle_deg: Amount = Field(
        0.0, description="Phase A is sqrt2 V cos(omega t + angle), t after the first sample. [deg]"
    )
    z1: Ohms = Field(description="Positive-sequence impedance.")
    z0: Ohms = Field(description="Zero-sequence impedance.")
    z2: Ohms | None = Field(None, description="Negative-sequence impedance; z1 when left out.")


class LineSection(Section):
    """A transposed line without capacitance: `[network.line]`, `[network.adjacent]`."""

    z1: Ohms = Field(description="Positive-sequence impedance of its whole length.")
    z0: Ohms = Field(description="Zero-sequence impedance of its whole length.")
    length_km: Amount | None = Field(None, description="For reports only. [km]")


class LoadSection(Section):
    """A passive load in star: `[[network.loads]]`."""

    name: str = Field("load", pattern=_PLAIN_NAME, description="By which an event switches it.")
    z: Ohms = Field(description="Impedance of a phase.")
    place: Literal["bus", "end"] = Field("end", description="At the recorder's bus or the line's far end.")
    star: Literal["open", "grounded"] = Field("open", description="Its star point.")


class CapacitorSection(Section):
    """A shunt bank at the bus: `[network.capacitor]`."""

    capacitance_f: Amount = Field(description="Of a phase. [F]")
    r_ohm: Amount = Field(description="Of its connection. [ohm]")
    l_h: Amount = Field(description="Of its connection. [H]")
    star: Literal["grounded", "open"] = Field("grounded", description="Its star point.")


class MachineSection(Section):
    """A rotating machine whose alternating current decays: `[network.machine]`."""

    kind: Literal["synchronous", "induction"] = Field(description="Kind of machine.")
    emf_rms_v: Amount = Field(description="Behind the sub-transient reactance before the fault. [V]")
    emf_angle_deg: Amount = Field(0.0, description="As the source's angle. [deg]")
    r_ohm: Amount = Field(description="Resistance. [ohm]")
    x_subtransient_ohm: Amount = Field(description="Sub-transient reactance. [ohm]")
    subtransient_open_s: Amount = Field(
        description="Open-circuit sub-transient time constant; of an induction machine its rotor's. [s]"
    )
    x_transient_ohm: Amount | None = Field(None, description="Synchronous machine only. [ohm]")
    x_synchronous_ohm: Amount | None = Field(None, description="Synchronous machine only. [ohm]")
    transient_open_s: Amount | None = Field(None, description="Synchronous machine only. [s]")
    x_rotor_open_ohm: Amount | None = Field(None, description="Induction machine only. [ohm]")
    z0: Ohms | None = Field(None, description="Zero sequence; star point open when left out.")
    place: Literal["bus", "end"] = Field("bus", description="Where it is connected.")


class ConverterSourceSection(Section):
    """A source whose controls hold its current: `[network.converter]`."""

    current_rms_a: Amount = Field(description="Into the bus before the fault. [A]")
    angle_deg: Amount = Field(0.0, description="Of that current, as the source's angle. [deg]")
    limit_rms_a: Amount = Field(description="At which its limiter holds during a fault. [A]")
    limit_angle_deg: Amount = Field(description="Of that current. [deg]")
    delay_s: Amount = Field(0.0, description="From inception until it reacts. [s]")
    response_s: Amount = Field(description="Time constant of its reaction. [s]")


class TransformerSection(Section):
    """An unloaded bank with saturating cores, switched in by an event: `[network.transformer]`."""

    r_ohm: Amount = Field(description="Winding resistance of a phase. [ohm]")
    air_core_h: Amount = Field(description="Inductance of the saturated winding. [H]")
    knee_flux_vs: Amount = Field(description="Flux linkage at full saturation. [V s]")
    knee_current_a: Amount = Field(description="Magnetising current at 76 % of it. [A]")
    remanence_vs: tuple[Amount, Amount, Amount] = Field(
        (0.0, 0.0, 0.0), description="Flux linkage of each core before it is switched in. [V s]"
    )
    place: Literal["bus", "end"] = Field("end", description="Where it is connected.")
    star: Literal["grounded", "open"] = Field("grounded", description="Its star point.")


class NetworkSection(Section):
    """`[network]`: the recorder's bus, what feeds it and the line it protects."""

    frequency_hz: Number = Field(ge=10, le=1000, description="Nominal. [Hz]")
    actual_frequency_hz: Amount | None = Field(None, description="Before the event, if not nominal. [Hz]")
    source: SourceSection | None = Field(None, description="Behind the bus.")
    line: LineSection = Field(description="From the bus to the far end; its current is recorded.")
    remote: SourceSection | None = Field(None, description="At the far end.")
    adjacent: LineSection | None = Field(None, description="Another feeder of the bus, for reverse faults.")
    loads: tuple[LoadSection, ...] = Field((), description="Passive loads.")
    capacitor: CapacitorSection | None = None
    machine: MachineSection | None = None
    converter: ConverterSourceSection | None = None
    transformer: TransformerSection | None = None


class TimedEvent(Section):
    """When an event happens: at a time, after the event before it, or at a point on wave."""

    time_s: Amount | None = Field(None, description="After the first sample. [s]")
    after_s: Amount | None = Field(None, description="After the event before it in the file. [s]")

    @model_validator(mode="after")
    def _one_time(self) -> Self:
        given = {name for name, value in self if value is not None} & _TIMES
        if len(given) != 1:
            choices = "time_s, after_s or angle_deg" if hasattr(self, "angle_deg") else "time_s or after_s"
            raise ValueError(f"needs one of {choices}")
        if ("angle_deg" in given) != (getattr(self, "not_before_s", None) is not None):
            raise ValueError("angle_deg and not_before_s belong together")
        return self


class AngledEvent(TimedEvent):
    """An event that may also happen at a point on wave: the first such instant not before a time."""

    angle_deg: Amount | None = Field(
        None, description="Of the bus voltage, of the faulted loop or of phase A: 0 rises through zero. [deg]"
    )
    not_before_s: Amount | None = Field(None, description="Earliest instant, with angle_deg. [s]")


class ArcSection(Section):
    """An arc in each faulted phase, whose voltage is given."""

    voltage_v: Amount = Field(description="Height of the nearly rectangular arc voltage. [V]")
    ignition_a: Amount = Field(description="Current around zero within which it changes sign. [A]")


_FaultTypes = Annotated[
    Annotated[FaultType, Tag("<word>")] | Annotated[WordChoice[FaultType], Tag("<choice>")],
    Discriminator(lambda value: "<choice>" if isinstance(value, dict | WordChoice) else "<word>"),
]


class FaultEvent(AngledEvent):
    """`do = "fault"`: a short circuit begins."""

    do: Literal["fault"]
    type: _FaultTypes = Field(description="One of AG BG CG AB BC CA ABG BCG CAG ABC.")
    fraction: Amount = Field(description="Of the line from the bus to the fault, 0 to 1.")
    phase_resistance_ohm: Amount = Field(0.0, description="In each faulted phase. [ohm]")
    ground_resistance_ohm: Amount = Field(0.0, description="From there to ground. [ohm]")
    side: Literal["ahead", "behind"] = Field("ahead", description="On the line or on the adjacent feeder.")
    arc: ArcSection | None = None


class ChangeEvent(TimedEvent):
    """`do = "change"`: the fault becomes another at the same place."""

    do: Literal["change"]
    type: _FaultTypes = Field(description="What it becomes.")
    phase_resistance_ohm: Amount = Field(0.0, description="In each faulted phase. [ohm]")
    ground_resistance_ohm: Amount = Field(0.0, description="From there to ground. [ohm]")
    arc: ArcSection | None = None


class EndEvent(TimedEvent):
    """`do = "end"`: the fault goes out by itself, each phase at its next current zero."""

    do: Literal["end"]


class OpenEvent(TimedEvent):
    """`do = "open"`: an order to open; each pole interrupts at its own next current zero."""

    do: Literal["open"]
    breaker: Breaker = Field("line", description="At the bus, at the far end, or of the adjacent feeder.")
    poles: str = Field("ABC", pattern="^[ABC]{1,3}$", description="Poles that open.")


class CloseEvent(AngledEvent):
    """`do = "close"`: poles close at this instant; they were open before if nothing opened them."""

    do: Literal["close"]
    breaker: Breaker = Field("line", description="As for open.")
    poles: str = Field("ABC", pattern="^[ABC]{1,3}$", description="Poles that close.")


class RestrikeEvent(TimedEvent):
    """`do = "restrike"`: open poles conduct again until their next current zero."""

    do: Literal["restrike"]
    breaker: Breaker = Field("line", description="As for open.")
    poles: str = Field("A", pattern="^[ABC]{1,3}$", description="Poles that restrike.")


class ConnectEvent(AngledEvent):
    """`do = "connect"`: a load, the capacitor or the transformer is switched in."""

    do: Literal["connect"]
    element: str = Field(description="'capacitor', 'transformer' or a load's name.")


class DisconnectEvent(TimedEvent):
    """`do = "disconnect"`: the same is switched out, each pole at its current zero."""

    do: Literal["disconnect"]
    element: str = Field(description="'capacitor' or a load's name.")


class RampEvent(TimedEvent):
    """`do = "ramp"`: the frequency of all sources moves and then stays."""

    do: Literal["ramp"]
    lasts_s: Amount = Field(description="How long it moves. [s]")
    rate_hz_per_s: Amount = Field(description="How fast. [Hz/s]")


_EVENTS: dict[str, type[TimedEvent]] = {
    "fault": FaultEvent,
    "change": ChangeEvent,
    "end": EndEvent,
    "open": OpenEvent,
    "close": CloseEvent,
    "restrike": RestrikeEvent,
    "connect": ConnectEvent,
    "disconnect": DisconnectEvent,
    "ramp": RampEvent,
}


def _kind_of_event(value: Any) -> str | None:
    do = value.get("do") if isinstance(value, dict) else getattr(value, "do", None)
    return f"<{do}>" if isinstance(do, str) and do in _EVENTS else None


Happening = Annotated[
    Annotated[FaultEvent, Tag("<fault>")]
    | Annotated[ChangeEvent, Tag("<change>")]
    | Annotated[EndEvent, Tag("<end>")]
    | Annotated[OpenEvent, Tag("<open>")]
    | Annotated[CloseEvent, Tag("<close>")]
    | Annotated[RestrikeEvent, Tag("<restrike>")]
    | Annotated[ConnectEvent, Tag("<connect>")]
    | Annotated[DisconnectEvent, Tag("<disconnect>")]
    | Annotated[RampEvent, Tag("<ramp>")],
    Discriminator(
        _kind_of_event,
        custom_error_type="event",
        custom_error_message=f"needs a key do, one of {', '.join(_EVENTS)}",
    ),
]


class Scenario(Section):
    """A whole scenario; see the module."""

    title: str = Field("", description="What it shows, in a sentence.")
    record: RecordSection
    network: NetworkSection
    events: tuple[Happening, ...] = Field((), description="What happens, in the order of the file.")
    instruments: Instruments = Field(
        default_factory=lambda: Instruments.model_validate({}),
        description="Between the primary and the record.",
    )

    @model_validator(mode="after")
    def _of_reasonable_size(self) -> Self:
        relay_filter = self.instruments.relay_filter
        converted = self.n_samples * (1 if relay_filter is None else relay_filter.keep_every)
        if self.n_samples < 2 or converted > _MOST_SAMPLES:
            raise ValueError(f"gives {converted} samples, which is not between 2 and {_MOST_SAMPLES}")
        return self

    @property
    def sample_rate_hz(self) -> float:
        """Of the record. [Hz]."""
        record = self.record
        if record.sample_rate_hz is not None:
            return record.sample_rate_hz
        assert record.samples_per_cycle is not None
        return record.samples_per_cycle * self.network.frequency_hz

    @property
    def n_samples(self) -> int:
        """Number of samples of each channel."""
        return round(min(self.record.duration_s * self.sample_rate_hz, 1e12))
