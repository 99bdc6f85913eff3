"""The owner's file, ``site.toml``: what a record cannot tell, as its models say it.

Every value is optional, and what is stated goes before what the record or the channels' names say. Values
are primary SI, a current transformer's secondary side apart where a key's description says so.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from pathlib import Path
from typing import Annotated, Any, Literal, Self

from pydantic import (
    AfterValidator,
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    PrivateAttr,
    ValidationInfo,
    field_validator,
    model_validator,
)

from analyzer.errors import FaultassayError
from analyzer.records.units import parse_unit
from analyzer.toml_file import Step, TomlFile, checked, key_of, read_toml

_CT_CLASS = re.compile(r"(?:5|10)PR?(?:\d{1,3})?|PXR?|TP[XYZ]|0\.1|0\.2S?|0\.5S?|[135]")
_VT_CLASS = re.compile(r"0\.1|0\.2|0\.5|1|3|3P|6P")


class SiteError(FaultassayError):
    """A site file that cannot be used, or one that does not fit a record.

    Parameters
    ----------
    code, message, where, hint
        As in :class:`analyzer.errors.FaultassayError`.
    location : tuple of str and int
        The key within a terminal's table that is wrong, where the error is of one.
    """

    def __init__(
        self,
        code: str,
        message: str,
        *,
        where: str = "",
        hint: str = "",
        location: tuple[Step, ...] = (),
    ) -> None:
        super().__init__(code, message, where=where or key_of(location), hint=hint)
        self.location = location


def _pair(value: Any) -> Any:
    if not isinstance(value, list | tuple) or len(value) != 2:
        raise ValueError("must be [r, x], a resistance and a reactance")
    return value


def _ids(value: Any) -> Any:
    given = (value,) if isinstance(value, str) else value
    if not isinstance(given, list | tuple) or not given or not all(isinstance(one, str) for one in given):
        raise ValueError("must be a channel's name in quotation marks, or a list of those that are summed")
    if len(set(given)) < len(given):
        raise ValueError("has the same channel twice")
    return given


def _known_unit(text: str) -> str:
    unit = parse_unit(text)
    if unit is None or unit.quantity not in ("voltage", "current"):
        raise ValueError("must be a unit of voltage or current, such as kV or A")
    return text


def _ct_class(text: str) -> str:
    if not _CT_CLASS.fullmatch(text):
        raise ValueError("must be a class of current transformers, such as 5P20, 10P, 5PR, PX, TPY or 0.2S")
    return text


def _vt_class(text: str) -> str:
    if not _VT_CLASS.fullmatch(text):
        raise ValueError("must be a class of voltage transformers, such as 3P, 6P, 0.2 or 0.5")
    return text


Text = Annotated[str, Field(strict=True, min_length=1)]
Number = Annotated[float, Field(strict=True, allow_inf_nan=False)]
NotNegative = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=0)]
Positive = Annotated[float, Field(strict=True, allow_inf_nan=False, gt=0)]
Percent = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=0, le=100)]
Ohms = Annotated[tuple[NotNegative, Positive], BeforeValidator(_pair)]
Channels = Annotated[tuple[Text, ...], BeforeValidator(_ids)]
UnitText = Annotated[Text, AfterValidator(_known_unit)]


class Section(BaseModel):
    """Base of the file's parts: what it does not know is refused, and nothing in it can be changed."""

    model_config = ConfigDict(frozen=True, extra="forbid", allow_inf_nan=False)


class SiteInfo(Section):
    """`[site]`: the place."""

    name: Text | None = Field(default=None, description="For reports.", examples=["Riverbend 20 kV"])
    nominal_voltage_v: Positive | None = Field(
        default=None, description="Phase to phase. [V]", examples=[20000]
    )
    nominal_frequency_hz: Annotated[Number, Field(ge=10, le=100)] | None = Field(
        default=None, description="Goes before the record's. [Hz]", examples=[50]
    )


class ClockStatement(Section):
    """`[clock]`: the recorder's clock, where the record itself says nothing of it."""

    utc_offset_h: Annotated[Number, Field(ge=-14, le=14)] | None = Field(
        default=None, description="What it shows less UTC. [h]", examples=[1]
    )
    stated_error_s: Positive | None = Field(
        default=None, description="Largest error to be reckoned with. [s]", examples=[0.001]
    )


class PhaseChannels(Section):
    """Channels of the phases A, B and C."""

    a: Channels | None = None
    b: Channels | None = None
    c: Channels | None = None

    @property
    def by_phase(self) -> dict[str, Channels]:
        """Those that are given."""
        given = {"a": self.a, "b": self.b, "c": self.c}
        return {phase: channels for phase, channels in given.items() if channels is not None}

    @model_validator(mode="after")
    def _distinct(self) -> Self:
        _must_differ(self.by_phase)
        return self


class PairChannels(Section):
    """Channels of the voltages between phases: A less B, B less C, C less A."""

    ab: Channels | None = None
    bc: Channels | None = None
    ca: Channels | None = None

    @property
    def by_pair(self) -> dict[str, Channels]:
        """Those that are given."""
        given = {"ab": self.ab, "bc": self.bc, "ca": self.ca}
        return {pair: channels for pair, channels in given.items() if channels is not None}

    @model_validator(mode="after")
    def _two(self) -> Self:
        if len(self.by_pair) < 2:
            raise ValueError("needs two of ab, bc and ca at least; the third follows from them")
        _must_differ(self.by_pair)
        return self


def _must_differ(given: Mapping[str, Channels]) -> None:
    names = list(given)
    for k, name in enumerate(names):
        for other in names[k + 1 :]:
            if set(given[name]) == set(given[other]):
                raise ValueError(f"{name} and {other} are the same channel")


class SourceStatement(Section):
    """`[terminal.source]`: impedance behind the terminal by the study, in ohm at nominal frequency."""

    z1_ohm: Ohms | None = Field(
        default=None, description="Positive sequence, [R1, X1].", examples=[[0.4, 4.0]]
    )
    z0_ohm: Ohms | None = Field(default=None, description="Zero sequence, [R0, X0].", examples=[[0.6, 5.0]])
    tolerance_percent: Positive = Field(
        default=10.0, description="Of the magnitude, that the study claims.", examples=[10]
    )


class LineStatement(Section):
    """`[terminal.line]`: the protected line, for the impedance to a fault to ground."""

    length_km: Positive | None = Field(default=None, description="[km]", examples=[9])
    z1_ohm_per_km: Ohms | None = Field(
        default=None, description="Positive sequence, [R1, X1].", examples=[[0.12, 0.36]]
    )
    z0_ohm_per_km: Ohms | None = Field(
        default=None, description="Zero sequence, [R0, X0].", examples=[[0.29, 1.1]]
    )

    @property
    def k0(self) -> complex | None:
        """Factor of 3 I0 in a loop to ground, ``(Z0 - Z1) / (3 Z1)``; None without both impedances."""
        if self.z1_ohm_per_km is None or self.z0_ohm_per_km is None:
            return None
        z1, z0 = complex(*self.z1_ohm_per_km), complex(*self.z0_ohm_per_km)
        return (z0 - z1) / (3 * z1)


class CurrentTransformer(Section):
    """`[terminal.ct]`: the current transformers; `examine` uses the ratio, the rest is for duty."""

    primary_a: Positive | None = Field(
        default=None,
        description="With secondary_a: ratio of secondary values. [A]",
        examples=[600],
    )
    secondary_a: Positive | None = Field(default=None, description="[A]", examples=[5])
    accuracy_class: Annotated[Text, AfterValidator(_ct_class)] | None = Field(
        default=None, description="IEC 61869-2.", examples=["5P20"]
    )
    secondary_time_constant_s: Positive | None = Field(
        default=None, description="Of the secondary loop. [s]", examples=[3]
    )
    knee_point_v: Positive | None = Field(default=None, description="RMS, secondary. [V]", examples=[300])
    burden_ohm: NotNegative | None = Field(
        default=None, description="Connected: leads and relays. [ohm]", examples=[1.2]
    )
    winding_ohm: NotNegative | None = Field(
        default=None, description="Secondary winding. [ohm]", examples=[0.8]
    )
    rated_burden_va: Positive | None = Field(default=None, description="[VA]", examples=[30])

    @model_validator(mode="after")
    def _whole_ratio(self) -> Self:
        if (self.primary_a is None) != (self.secondary_a is None):
            raise ValueError("needs both primary_a and secondary_a, or neither")
        return self


class VoltageTransformer(Section):
    """`[terminal.vt]`: the voltage transformers; `examine` uses the ratio."""

    primary_v: Positive | None = Field(
        default=None,
        description="With secondary_v: ratio of secondary values. [V]",
        examples=[20000],
    )
    secondary_v: Positive | None = Field(default=None, description="[V]", examples=[100])
    accuracy_class: Annotated[Text, AfterValidator(_vt_class)] | None = Field(
        default=None, description="IEC 61869-3.", examples=["3P"]
    )

    @model_validator(mode="after")
    def _whole_ratio(self) -> Self:
        if (self.primary_v is None) != (self.secondary_v is None):
            raise ValueError("needs both primary_v and secondary_v, or neither")
        return self


class Breaker(Section):
    """`[terminal.breaker]`: ratings of the circuit breaker as IEC 62271-100 calls them, for duty."""

    rated_breaking_current_a: Positive | None = Field(
        default=None,
        description="Short-circuit breaking current, RMS. [A]",
        examples=[25000],
    )
    rated_making_current_a: Positive | None = Field(
        default=None, description="Short-circuit making current, peak. [A]", examples=[63000]
    )
    dc_component_percent: Percent | None = Field(
        default=None, description="At contact separation, of the symmetrical peak. [%]", examples=[30]
    )
    dc_time_constant_s: Positive | None = Field(
        default=None, description="Of the rating. [s]", examples=[0.045]
    )
    opening_time_s: Positive | None = Field(
        default=None, description="Trip to contact separation. [s]", examples=[0.035]
    )
    break_time_s: Positive | None = Field(
        default=None, description="Trip to the end of arcing. [s]", examples=[0.05]
    )

    @model_validator(mode="after")
    def _in_order(self) -> Self:
        if self.opening_time_s and self.break_time_s and self.break_time_s < self.opening_time_s:
            raise ValueError("break_time_s holds opening_time_s and cannot be shorter")
        return self


class SiteTerminal(Section):
    """`[[terminal]]`: channels that belong together, and what is connected there.

    Channels are named as `faultassay describe` shows them. Where `currents` is left out, those of the
    record's channels are taken that belong together by their names, and what else is stated goes before.
    Where it is given, the terminal has the voltages and the residual that are given, and no others.
    """

    name: Text | None = Field(default=None, description="For reports.", examples=["Feeder 4"])
    polarity: Literal["out-of-bus", "into-bus"] = Field(
        default="out-of-bus", description="Of a current shown as positive."
    )
    residual: Channels | None = Field(default=None, description="Channel of ia + ib + ic.", examples=["IN"])
    currents: PhaseChannels | None = Field(
        default=None,
        description='A channel a phase, or a list that is summed, such as ["IA1", "-IA2"]. With a residual '
        "one phase may be left out.",
        examples=[{"a": "IA", "b": "IB", "c": "IC"}],
    )
    voltages: PhaseChannels | None = Field(
        default=None, description="Phase to ground.", examples=[{"a": "VA", "b": "VB", "c": "VC"}]
    )
    voltages_pp: PairChannels | None = Field(
        default=None,
        description="Phase to phase, in place of them: two or three of them.",
        examples=[{"ab": "VAB", "bc": "VBC", "ca": "VCA"}],
    )
    unit: dict[Text, UnitText] = Field(
        default={},
        description="Where the record's is missing or wrong.",
        examples=[{"IA": "kA"}],
    )
    ratio_correction: dict[Text, Positive] = Field(
        default={}, description="What a channel's values are multiplied by.", examples=[{"IA": 1.2}]
    )
    anti_alias_delay_s: NotNegative = Field(
        default=0.0, description="Taken off inception and clearing times. [s]", examples=[0.00012]
    )
    source: SourceStatement = SourceStatement()
    line: LineStatement = LineStatement()
    ct: CurrentTransformer = CurrentTransformer()
    vt: VoltageTransformer = VoltageTransformer()
    breaker: Breaker = Breaker()

    @field_validator("currents")
    @classmethod
    def _three_currents(cls, currents: PhaseChannels | None, info: ValidationInfo) -> PhaseChannels | None:
        absent = [phase for phase in "abc" if currents is not None and phase not in currents.by_phase]
        if len(absent) == 1 and info.data.get("residual") is None:
            raise ValueError(f"{absent[0]} is absent, and without a residual it cannot be formed")
        if len(absent) > 1:
            raise ValueError(f"{' and '.join(absent)} are absent; of one phase alone no fault can be told")
        return currents

    @field_validator("voltages")
    @classmethod
    def _three_voltages(cls, voltages: PhaseChannels | None) -> PhaseChannels | None:
        absent = [phase for phase in "abc" if voltages is not None and phase not in voltages.by_phase]
        if absent:
            raise ValueError(f"needs a, b and c; without {', '.join(absent)} leave voltages out altogether")
        return voltages

    @field_validator("voltages_pp")
    @classmethod
    def _one_kind(cls, voltages_pp: PairChannels | None, info: ValidationInfo) -> PairChannels | None:
        if voltages_pp is not None and info.data.get("voltages") is not None:
            raise ValueError("stands in place of voltages: give only one of them")
        return voltages_pp


class Site(Section):
    """What the owner states; :func:`read_site` reads it from a file."""

    site: SiteInfo = SiteInfo()
    clock: ClockStatement = ClockStatement()
    terminal: tuple[SiteTerminal, ...] = ()

    _file: TomlFile | None = PrivateAttr(None)

    @field_validator("terminal")
    @classmethod
    def _told_apart(cls, terminals: tuple[SiteTerminal, ...]) -> tuple[SiteTerminal, ...]:
        if len(terminals) > 1 and any(one.currents is None for one in terminals):
            raise ValueError("each of several terminals needs its currents")
        units: dict[str, str] = {}
        for terminal in terminals:
            for channel, unit in terminal.unit.items():
                if units.setdefault(channel, unit) != unit:
                    raise ValueError(f"channel {channel!r} is in {units[channel]} and in {unit}")
        return terminals

    def where(self, *location: Step) -> str:
        """Return where a key stands: file and line, where it was read from a file."""
        return self._file.where(location) if self._file is not None else key_of(location)

    def after(self, *, nominal_frequency_hz: float | None, units: Mapping[str, str]) -> Site:
        """Return the site with only what is not stated here, by other means that go before it."""
        changed: dict[str, Any] = {}
        if nominal_frequency_hz is not None:
            changed["site"] = self.site.model_copy(update={"nominal_frequency_hz": nominal_frequency_hz})
        if units:
            changed["terminal"] = tuple(
                one.model_copy(update={"unit": {k: v for k, v in one.unit.items() if k not in units}})
                for one in self.terminal
            )
        return self.model_copy(update=changed)


def read_site(path: Path | str) -> Site:
    """Read and check a site file.

    Parameters
    ----------
    path : Path or str
        TOML in UTF-8.

    Returns
    -------
    Site

    Raises
    ------
    SiteError
        If it cannot be read (code ``cannot-read``), is no TOML (``bad-toml``), or a key is unknown or has an
        impossible value (``bad-site``). One error, of the uppermost such key, with its line.
    """
    file = read_toml(Path(path), raises=SiteError)
    site = checked(file, Site, raises=SiteError, code="bad-site")
    site._file = file
    return site
