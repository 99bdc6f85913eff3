"""Building blocks of the findings: numbers that say how sure they are, and what an event is made of."""

from __future__ import annotations

from collections.abc import Callable
from typing import Annotated, Any, ClassVar, Literal, Self

from pydantic import (
    AfterValidator,
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    SerializerFunctionWrapHandler,
    model_serializer,
    model_validator,
)

# Two-sided 95 % point of the normal distribution.
NORMAL_95 = 1.959963984540054

Number = Annotated[float, Field(strict=True, allow_inf_nan=False)]
Positive = Annotated[float, Field(strict=True, allow_inf_nan=False, gt=0)]
NotNegative = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=0)]
Correlation = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=-1, le=1)]
Count = Annotated[int, Field(strict=True, ge=0)]
Sentence = Annotated[str, Field(min_length=1)]


def _spelled_out(text: Any) -> Any:
    """A file name may hold bytes that are no text in its code page, which no JSON string can."""
    return text.encode("utf-8", "backslashreplace").decode("utf-8") if isinstance(text, str) else text


PathText = Annotated[str, BeforeValidator(_spelled_out)]

Unit = Literal["V", "A", "ohm", "H", "s", "Hz", "deg", "1"]
Phase = Literal["A", "B", "C"]
ReferenceLoop = Literal["AG", "BG", "CG", "AB", "BC", "CA"]
DecayLoop = Literal["AG", "BG", "CG", "AB", "BC", "CA", "AB+G", "BC+G", "CA+G", "ABC"]
SourceMethod = Literal["incremental", "driving-voltage", "nominal-voltage"]


def _require_all(schema: dict[str, Any], model: type[Part]) -> None:
    """Every field of the contract is always written, those that have a default included."""
    absent = model.may_be_absent
    schema["required"] = [name for name in schema.get("properties", {}) if name not in absent]


class Part(BaseModel):
    """Base of the models: cannot be changed, knows all its fields, and holds no NaN and no Infinity."""

    may_be_absent: ClassVar[frozenset[str]] = frozenset()

    model_config = ConfigDict(
        frozen=True,
        extra="forbid",
        allow_inf_nan=False,
        json_schema_extra=_require_all,
        protected_namespaces=(),  # older pydantic warns of fields named model_…, which the contract has
    )


class Quantity(Part):
    """An estimate, its standard uncertainty and its 95 % interval.

    Attributes
    ----------
    value : float or None
        None where the record cannot determine it.
    std : float or None
        Standard uncertainty, the instruments' part included; None where none can be stated.
    low, high : float or None
        Ends of the 95 % interval, not always symmetrical about the value; None where there is no such end.
        The value of an angle is in (-180, 180]; an end may lie beyond, so that ``low <= value <= high``.
    unit : str
        SI symbol, ``deg`` for an angle and ``1`` for a ratio.
    std_instrument : float or None
        The instruments' part of `std`; absent from the document when it is not stated.
    """

    may_be_absent: ClassVar[frozenset[str]] = frozenset({"std_instrument"})

    value: Number | None
    std: NotNegative | None
    low: Number | None
    high: Number | None
    unit: Unit
    std_instrument: NotNegative | None = None

    @classmethod
    def unknown(cls, unit: Unit) -> Self:
        """Return the quantity that the record cannot determine."""
        return cls(value=None, std=None, low=None, high=None, unit=unit)

    @classmethod
    def of(
        cls,
        value: float,
        std: float | None,
        unit: Unit,
        *,
        low: float | None = None,
        high: float | None = None,
        std_instrument: float | None = None,
    ) -> Self:
        """Return a quantity.

        Parameters
        ----------
        value : float
            The estimate.
        std : float or None
            Its standard uncertainty.
        unit : str
            Unit of all of them.
        low, high : float, optional
            Ends of the 95 % interval. When both are left out and `std` is given they are
            ``value ± 1.959964 std``; when one is given the other stays open.
        std_instrument : float, optional
            The instruments' part of `std`.

        Returns
        -------
        Quantity

        Raises
        ------
        pydantic.ValidationError
            If a number is not finite, `std` is negative, the ends are out of order, or an angle is outside
            (-180, 180].
        """
        if low is None and high is None and std is not None:
            low, high = value - NORMAL_95 * std, value + NORMAL_95 * std

        def plain(number: float | None) -> float | None:
            return None if number is None else float(number)

        return cls(
            value=float(value),
            std=plain(std),
            low=plain(low),
            high=plain(high),
            unit=unit,
            std_instrument=plain(std_instrument),
        )

    @model_validator(mode="after")
    def _in_order(self) -> Self:
        ordered = [end for end in (self.low, self.value, self.high) if end is not None]
        if ordered != sorted(ordered):
            raise ValueError("low <= value <= high does not hold")
        if self.value is None and self.std is not None:
            raise ValueError("a standard uncertainty needs a value")
        if self.unit == "deg" and self.value is not None and not -180.0 < self.value <= 180.0:
            raise ValueError("an angle is in (-180, 180] degrees")
        if self.std_instrument is not None and (
            self.std is None or self.std_instrument > self.std * (1 + 1e-12)
        ):
            raise ValueError("std is the combined uncertainty and not less than std_instrument")
        return self

    @model_serializer(mode="wrap")
    def _as_in_contract(self, handler: SerializerFunctionWrapHandler) -> dict[str, Any]:
        document: dict[str, Any] = handler(self)
        if self.std_instrument is None:
            document.pop("std_instrument", None)
        return document


def _has_unit(unit: Unit) -> Callable[[Quantity], Quantity]:
    def check(quantity: Quantity) -> Quantity:
        if quantity.unit != unit:
            raise ValueError(f"the unit here is {unit}, not {quantity.unit}")
        return quantity

    return check


Amperes = Annotated[Quantity, AfterValidator(_has_unit("A"))]
Volts = Annotated[Quantity, AfterValidator(_has_unit("V"))]
Seconds = Annotated[Quantity, AfterValidator(_has_unit("s"))]
Hertz = Annotated[Quantity, AfterValidator(_has_unit("Hz"))]
Ohms = Annotated[Quantity, AfterValidator(_has_unit("ohm"))]
Degrees = Annotated[Quantity, AfterValidator(_has_unit("deg"))]
Ratio = Annotated[Quantity, AfterValidator(_has_unit("1"))]


class Impedance(Part):
    """An impedance at power frequency, in parts and in magnitude and angle.

    Attributes
    ----------
    r_ohm, x_ohm, magnitude_ohm : Quantity
        Resistance, reactance, magnitude. [ohm]
    angle_deg : Quantity
        Angle. [deg]
    x_over_r : Quantity
        Ratio of reactance to resistance.
    correlation_rx : float or None
        Correlation of the errors of resistance and reactance.
    """

    r_ohm: Ohms
    x_ohm: Ohms
    magnitude_ohm: Ohms
    angle_deg: Degrees
    x_over_r: Ratio
    correlation_rx: Correlation | None

    @classmethod
    def unknown(cls) -> Self:
        """Return the impedance that the record cannot determine."""
        ohm = Quantity.unknown("ohm")
        return cls(
            r_ohm=ohm,
            x_ohm=ohm,
            magnitude_ohm=ohm,
            angle_deg=Quantity.unknown("deg"),
            x_over_r=Quantity.unknown("1"),
            correlation_rx=None,
        )


class Inception(Part):
    """Start of the event; the angle is that of the driving voltage of the `reference` loop."""

    time_s: Seconds
    voltage_angle_deg: Degrees
    reference: ReferenceLoop | None

    @model_validator(mode="after")
    def _angle_has_reference(self) -> Self:
        if self.reference is None and self.voltage_angle_deg.value is not None:
            raise ValueError("an inception angle needs its reference loop")
        return self


class Clearing(Part):
    """Interruption of the current: of the last pole, and of each faulted phase."""

    time_s: Seconds
    by_phase_s: dict[Phase, Seconds]


class Prefault(Part):
    """The network before inception."""

    frequency_hz: Hertz
    voltage_rms_v: dict[Phase, Volts]
    current_rms_a: dict[Phase, Amperes]


class Peak(Part):
    """Largest instantaneous current: measured, of the fitted model, and for the worst inception angle.

    ``ratio`` is the largest absolute value over the peak of the symmetrical current.
    """

    measured_a: Number | None
    measured_time_s: Number | None
    model_a: Amperes
    model_time_s: Number | None
    ratio: Ratio
    worst_case_a: Amperes

    @classmethod
    def unknown(cls) -> Self:
        """Return the peak of which nothing is known."""
        ampere = Quantity.unknown("A")
        return cls(
            measured_a=None,
            measured_time_s=None,
            model_a=ampere,
            model_time_s=None,
            ratio=Quantity.unknown("1"),
            worst_case_a=ampere,
        )


class PhaseFindings(Part):
    """Fault current of one phase; `dc_theory_a` is what continuity and the fitted sinusoid demand."""

    symmetrical_rms_a: Amperes
    angle_deg: Degrees
    dc_initial_a: Amperes
    dc_theory_a: Amperes
    peak: Peak


class Decay(Part):
    """Decay of the offset of one loop current."""

    loop: DecayLoop
    time_constant_s: Seconds
    x_over_r: Ratio


class XOverR(Part):
    """X/R of the total loop at the measured power frequency, by each route and combined."""

    from_decay: Ratio
    from_angle: Ratio
    from_waveform: Ratio
    combined: Ratio

    @classmethod
    def unknown(cls) -> Self:
        """Return an X/R that no route determines."""
        one = Quantity.unknown("1")
        return cls(from_decay=one, from_angle=one, from_waveform=one, combined=one)


class SourceImpedance(Part):
    """Impedance behind the terminal, loads at its bus included; `method` is what was used or tried."""

    z1: Impedance
    z2: Impedance
    z0: Impedance
    method: SourceMethod

    @classmethod
    def unknown(cls, method: SourceMethod = "incremental") -> Self:
        """Return a source impedance that `method` could not determine."""
        z = Impedance.unknown()
        return cls(z1=z, z2=z, z0=z, method=method)


class ImpedanceFindings(Part):
    """Impedances behind, at and beyond the terminal, and the total that the driving voltage sees."""

    source: SourceImpedance
    faulted_loop: Impedance | None
    faulted: Impedance | None
    total: Impedance

    @classmethod
    def unknown(cls) -> Self:
        """Return impedances that the record does not determine."""
        return cls(
            source=SourceImpedance.unknown(), faulted_loop=None, faulted=None, total=Impedance.unknown()
        )
