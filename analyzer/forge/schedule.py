"""What happens in a forged record, and when: faults, pole openings, switchings, a moving frequency."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import Literal, get_args

from analyzer.forge.errors import impossible, require_at_least, require_finite, require_positive

FaultType = Literal["AG", "BG", "CG", "AB", "BC", "CA", "ABG", "BCG", "CAG", "ABC"]
FAULT_TYPES: tuple[FaultType, ...] = get_args(FaultType)
Breaker = Literal["line", "remote", "adjacent"]
PHASES = ("A", "B", "C")


@dataclass(frozen=True, slots=True, kw_only=True)
class Arc:
    """An arc whose voltage, not its resistance, is given.

    Parameters
    ----------
    voltage_v : float
        Height of the nearly rectangular arc voltage in each faulted phase. [V]
    ignition_a : float
        Current around zero within which the voltage changes sign: u = voltage * tanh(i / ignition). [A]

    Raises
    ------
    ForgeError
        If a value is not positive.

    Notes
    -----
    A square-wave arc voltage in phase with the current has the odd harmonics 1/h of the fundamental; this is
    the usual long-arc description in fault location (from memory).
    """

    voltage_v: float
    ignition_a: float

    def __post_init__(self) -> None:
        require_positive(self.voltage_v, "arc.voltage_v")
        require_positive(self.ignition_a, "arc.ignition_a")


@dataclass(frozen=True, slots=True, kw_only=True)
class Fault:
    """A short circuit on the protected line, or behind the recorder on the adjacent feeder.

    Parameters
    ----------
    type : str
        One of the ten types AG BG CG AB BC CA ABG BCG CAG ABC.
    fraction : float
        Distance from the bus over the line's length, 0 to 1.
    phase_resistance_ohm : float
        In each faulted phase, towards the point where they meet. [ohm]
    ground_resistance_ohm : float
        From there to ground; zero for types without ground. [ohm]
    side : {'ahead', 'behind'}
        On the protected line, or on the adjacent feeder (on the bus itself where there is none).
    arc : Arc or None
        In each faulted phase, in series with its resistance.

    Raises
    ------
    ForgeError
        Naming the field that is impossible.
    """

    type: FaultType
    fraction: float
    phase_resistance_ohm: float = 0.0
    ground_resistance_ohm: float = 0.0
    side: Literal["ahead", "behind"] = "ahead"
    arc: Arc | None = None

    def __post_init__(self) -> None:
        if self.type not in FAULT_TYPES:
            raise impossible("fault.type", f"{self.type!r} is none of {' '.join(FAULT_TYPES)}")
        require_finite(self.fraction, "fault.fraction")
        if not 0.0 <= self.fraction <= 1.0:
            raise impossible(
                "fault.fraction",
                f"{self.fraction:g} lies beyond the line",
                hint="it runs from 0 at the bus to 1",
            )
        require_at_least(self.phase_resistance_ohm, 0.0, "fault.phase_resistance_ohm")
        require_at_least(self.ground_resistance_ohm, 0.0, "fault.ground_resistance_ohm")
        if self.ground_resistance_ohm > 0.0 and not self.grounded:
            raise impossible("fault.ground_resistance_ohm", f"a fault {self.type} has no path to ground")
        if self.side not in ("ahead", "behind"):
            raise impossible("fault.side", f"must be ahead or behind, got {self.side!r}")

    @property
    def phases(self) -> tuple[int, ...]:
        """Indices of the faulted phases, A = 0."""
        return tuple(sorted(PHASES.index(letter) for letter in self.type.removesuffix("G")))

    @property
    def grounded(self) -> bool:
        """Whether the type has a path to ground."""
        return self.type.endswith("G")


@dataclass(frozen=True, slots=True, kw_only=True)
class FaultStart:
    """The fault begins."""

    time_s: float
    fault: Fault


@dataclass(frozen=True, slots=True, kw_only=True)
class FaultChange:
    """The fault becomes another at the same place: new phases at once, dropped ones at their current zero."""

    time_s: float
    fault: Fault


@dataclass(frozen=True, slots=True, kw_only=True)
class FaultEnd:
    """The fault path goes out by itself, each phase at its next current zero."""

    time_s: float


@dataclass(frozen=True, slots=True, kw_only=True)
class PolesOpen:
    """Order to open; each pole interrupts at its first own current zero from then on."""

    time_s: float
    breaker: Breaker = "line"
    poles: str = "ABC"


@dataclass(frozen=True, slots=True, kw_only=True)
class PolesClose:
    """The poles close at this instant."""

    time_s: float
    breaker: Breaker = "line"
    poles: str = "ABC"


@dataclass(frozen=True, slots=True, kw_only=True)
class Restrike:
    """An open pole conducts again, until its next current zero."""

    time_s: float
    breaker: Breaker = "line"
    poles: str = "A"


@dataclass(frozen=True, slots=True, kw_only=True)
class Connect:
    """A load (by name), the 'capacitor' or the 'transformer' is switched in, three poles at once."""

    time_s: float
    element: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Disconnect:
    """The element is switched out, each pole at its own current zero."""

    time_s: float
    element: str


@dataclass(frozen=True, slots=True, kw_only=True)
class FrequencyRamp:
    """The frequency of all sources moves linearly between two instants and stays."""

    time_s: float
    end_s: float
    rate_hz_per_s: float


Happening = (
    FaultStart
    | FaultChange
    | FaultEnd
    | PolesOpen
    | PolesClose
    | Restrike
    | Connect
    | Disconnect
    | FrequencyRamp
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Schedule:
    """All that happens, in order of time.

    Parameters
    ----------
    happenings : tuple
        In any order; sorted by time. A breaker's pole or an element whose first happening closes it is open
        at the start, all else is closed.
    frequency_hz : float or None
        Of all sources at the start; None means nominal. [Hz]

    Raises
    ------
    ForgeError
        If the story contradicts itself, e.g. a change before the fault.
    """

    happenings: tuple[Happening, ...] = ()
    frequency_hz: float | None = None

    def __post_init__(self) -> None:
        for happening in self.happenings:
            require_positive(happening.time_s, "schedule.time_s")
            if isinstance(happening, PolesOpen | PolesClose | Restrike):
                if not happening.poles or set(happening.poles) - set(PHASES):
                    raise impossible("schedule.poles", f"must be letters of ABC, got {happening.poles!r}")
                if happening.breaker not in get_args(Breaker):
                    raise impossible("schedule.breaker", f"unknown breaker {happening.breaker!r}")
            if isinstance(happening, FrequencyRamp):
                if happening.end_s <= happening.time_s:
                    raise impossible("schedule.end_s", "a frequency ramp must end after it begins")
                require_finite(happening.rate_hz_per_s, "schedule.rate_hz_per_s")
        if self.frequency_hz is not None:
            require_positive(self.frequency_hz, "schedule.frequency_hz")
        ordered = tuple(sorted(self.happenings, key=lambda happening: happening.time_s))
        object.__setattr__(self, "happenings", ordered)
        self._check_faults()
        ramps = [h for h in ordered if isinstance(h, FrequencyRamp)]
        for earlier, later in pairwise(ramps):
            if later.time_s < earlier.end_s:
                raise impossible("schedule.time_s", "two frequency ramps overlap")

    def _check_faults(self) -> None:
        place: tuple[str, float] | None = None
        live = False
        for happening in self.happenings:
            if isinstance(happening, FaultStart | FaultChange):
                here = (happening.fault.side, happening.fault.fraction)
                if place is not None and here != place:
                    raise impossible("fault.fraction", "all faults of a record lie at one place")
                if isinstance(happening, FaultStart) and live:
                    raise impossible(
                        "schedule.fault", "a second fault starts while the first is on", hint="change it"
                    )
                if isinstance(happening, FaultChange) and not live:
                    raise impossible("schedule.fault", "a fault changes that has not started")
                place, live = here, True
            elif isinstance(happening, FaultEnd):
                if not live:
                    raise impossible("schedule.fault", "a fault ends that has not started")
                live = False

    @property
    def fault(self) -> Fault | None:
        """The first fault of the schedule, which fixes the place."""
        for happening in self.happenings:
            if isinstance(happening, FaultStart):
                return happening.fault
        return None
