"""The `[instruments]` section of a scenario: transformers, wiring, filter, converter, noise."""

from __future__ import annotations

from typing import Literal, Self

from pydantic import Field, model_validator

from analyzer.forge.amounts import Amount, Section

Role = Literal["ia", "ib", "ic", "in", "va", "vb", "vc", "vn"]
PhaseRole = Literal["ia", "ib", "ic", "va", "vb", "vc"]


class KneeSection(Section):
    """Knee of the exciting curve; without it a core never saturates."""

    voltage_v: Amount = Field(description="RMS secondary voltage at the knee. [V]")
    exciting_current_a: Amount = Field(description="RMS exciting current there. [A]")
    frequency_hz: Amount | None = Field(
        None, description="At which both were measured; nominal when left out."
    )
    exponent: Amount = Field(22.0, description="Of the power law beyond the knee.")


class CurrentTransformerSection(Section):
    """`[instruments.ct]`: current transformers with their burden; needs record.current_ratio."""

    winding_ohm: Amount = Field(description="Secondary winding. [ohm]")
    burden_ohm: Amount = Field(description="Burden with its leads. [ohm]")
    burden_h: Amount = Field(0.0, description="Inductance of the burden. [H]")
    magnetising_h: Amount | None = Field(None, description="Unsaturated magnetising inductance. [H]")
    time_constant_s: Amount | None = Field(None, description="Secondary time constant, in place of it. [s]")
    core: Literal["iron", "gapped"] = Field("iron", description="A gapped core is one with an air gap.")
    knee: KneeSection | None = None
    remanence_pu: tuple[Amount, Amount, Amount] = Field(
        (0.0, 0.0, 0.0), description="Flux before the record over the knee flux, phase by phase."
    )

    @model_validator(mode="after")
    def _one_inductance(self) -> Self:
        if (self.magnetising_h is None) == (self.time_constant_s is None):
            raise ValueError("give either magnetising_h or time_constant_s")
        return self


class CapacitiveVtSection(Section):
    """`[instruments.capacitive_vt]`: capacitive voltage transformers, which ring when the voltage falls."""

    capacitance_f: Amount = Field(description="Sum of the divider's capacitances. [F]")
    intermediate_voltage_v: Amount = Field(description="RMS voltage of the tap without load. [V]")
    burden_va: Amount = Field(description="Resistive burden. [VA]")
    loss_share: Amount = Field(0.02, description="Resistance of the losses over the burden's.")
    magnetising_share: Amount = Field(0.1, description="Magnetising over burden current.")


class ClassSection(Section):
    """Errors drawn evenly within the limits of an IEC 61869 class, each phase by itself."""

    name: str = Field(description='Such as "5P", "TPY", "0.2" of currents, "3P", "0.5" of voltages.')
    percent_of_rated: Amount = Field(100.0, description="Current that a measuring class is asked for. [%]")


class ErrorSection(Section):
    """Stated errors of one phase's transformer."""

    ratio_percent: Amount = Field(0.0, description="Ratio error. [%]")
    phase_minutes: Amount = Field(0.0, description="Phase displacement, leading. [minutes of arc]")


class AntiAliasSection(Section):
    """`[instruments.anti_alias]`: low-pass in front of the converter."""

    kind: Literal["butterworth", "rc"] = Field("butterworth", description="Kind of filter.")
    cutoff_hz: Amount = Field(description="Where 3 dB are lost. [Hz]")
    order: int = Field(1, ge=1, le=8, description="Order; an RC element is of the first.")


class ConverterSection(Section):
    """`[instruments.converter]`: resolution and range, in primary terms."""

    bits: int = Field(ge=2, le=32, description="Sign included.")
    current_range_a: Amount = Field(description="Largest instantaneous current. [A]")
    voltage_range_v: Amount = Field(description="Largest instantaneous voltage. [V]")


class NoiseSection(Section):
    """`[instruments.noise]`: Gaussian noise in front of the converter, in primary terms."""

    current_rms_a: Amount = Field(0.0, description="Of each current channel. [A]")
    voltage_rms_v: Amount = Field(0.0, description="Of each voltage channel. [V]")
    lag1_autocorrelation: Amount = Field(0.0, description="0 is white.")


class BackgroundSection(Section):
    """`[[instruments.background]]`: a sinusoid on the three phases, all the time."""

    on: Literal["current", "voltage"] = Field(description="What it is added to.")
    harmonic: int | None = Field(None, ge=2, description="Order; its sequence follows from it.")
    frequency_hz: Amount | None = Field(None, description="In place of harmonic. [Hz]")
    rms: Amount = Field(description="[A or V]")
    angle_deg: Amount = Field(0.0, description="Of phase A at the first sample. [deg]")
    sequence: Literal["positive", "negative", "zero"] = Field("positive", description="With frequency_hz.")
    drift_hz_per_s: Amount = Field(0.0, description="With frequency_hz. [Hz/s]")

    @model_validator(mode="after")
    def _one_frequency(self) -> Self:
        if (self.harmonic is None) == (self.frequency_hz is None):
            raise ValueError("give either harmonic or frequency_hz")
        if self.harmonic is not None and {"sequence", "drift_hz_per_s"} & self.model_fields_set:
            raise ValueError("sequence and drift_hz_per_s belong to frequency_hz")
        return self


class WiringSection(Section):
    """`[instruments.wiring]`: mistakes between transformer and recorder."""

    reversed: tuple[PhaseRole, ...] = Field((), description="Channels of wrong polarity.")
    exchanged: tuple[tuple[PhaseRole, PhaseRole], ...] = Field((), description="Pairs that changed places.")
    wrong_scale: dict[PhaseRole, Amount] = Field({}, description="Recorded over true value.")


class RelayFilterSection(Section):
    """`[instruments.relay_filter]`: band-pass that some relays put before they store their samples."""

    kind: Literal["full-cycle-cosine", "half-cycle-cosine", "mimic-full-cycle-cosine"] = Field(
        description="Kind of filter."
    )
    mimic_time_constant_s: Amount = Field(0.0, description="Of the mimic. [s]")
    keep_every: int = Field(1, ge=1, description="Converter samples for each one that is stored.")
    applies_to: Literal["currents", "all"] = Field("currents", description="Channels that it filters.")


class Instruments(Section):
    """`[instruments]`: everything between the primary and the record; what is left out is ideal."""

    ct: CurrentTransformerSection | None = None
    capacitive_vt: CapacitiveVtSection | None = None
    ct_class: ClassSection | None = None
    vt_class: ClassSection | None = None
    ct_errors: tuple[ErrorSection, ErrorSection, ErrorSection] | None = Field(
        None, description="Of phases A, B, C, in place of ct_class."
    )
    vt_errors: tuple[ErrorSection, ErrorSection, ErrorSection] | None = Field(
        None, description="Of phases A, B, C, in place of vt_class."
    )
    background: tuple[BackgroundSection, ...] = ()
    wiring: WiringSection | None = None
    anti_alias: AntiAliasSection | None = None
    skew_s: dict[Role, Amount] = Field({}, description="How much later a channel is sampled. [s]")
    skew_stated: bool = Field(True, description="Whether the record says so.")
    noise: NoiseSection | None = None
    converter: ConverterSection | None = None
    relay_filter: RelayFilterSection | None = None

    @model_validator(mode="after")
    def _one_kind_of_errors(self) -> Self:
        for kind in ("ct", "vt"):
            if None not in (getattr(self, f"{kind}_class"), getattr(self, f"{kind}_errors")):
                raise ValueError(f"give either {kind}_class or {kind}_errors")
        return self
