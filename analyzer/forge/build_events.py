"""From the events of a drawn scenario to a schedule: instants resolved, points on wave found."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager

import numpy as np

from analyzer.forge import scenario as sections
from analyzer.forge.amounts import settled
from analyzer.forge.build import numbers, under
from analyzer.forge.errors import ForgeError
from analyzer.forge.loops import reference_loop
from analyzer.forge.measure import alternating
from analyzer.forge.network import Network
from analyzer.forge.schedule import (
    Arc,
    Connect,
    Disconnect,
    Fault,
    FaultChange,
    FaultEnd,
    FaultStart,
    FrequencyRamp,
    Happening,
    PolesClose,
    PolesOpen,
    Restrike,
    Schedule,
)
from analyzer.forge.solution import solve

_DEAD = 1e-6  # of the source's voltage
_LATER_S = 1.0  # beyond what is solved; only whether they open or close matters for those still to come


def build_schedule(scenario: sections.Scenario, network: Network, *, lead_s: float) -> Schedule:
    """Return the schedule of a drawn scenario.

    Parameters
    ----------
    scenario : Scenario
        Without distributions.
    network : Network
        Its network, whose load flow decides the points on wave.
    lead_s : float
        By how much the solution starts before the record; all times are later by it. [s]

    Raises
    ------
    ForgeError
        If the events contradict each other or lie outside the record; `where` is the scenario's key.
    """
    frequency = scenario.network.actual_frequency_hz
    frequency_hz = None if frequency is None else settled(frequency)
    end_s = (scenario.n_samples - 1) / scenario.sample_rate_hz
    done: list[Happening] = []
    now_s = 0.0
    for k, event in enumerate(scenario.events):
        key = f"events[{k}]"
        named = next(n for n in ("time_s", "after_s", "angle_deg") if getattr(event, n, None) is not None)
        if named == "time_s":
            time_s = numbers(event, "time_s")["time_s"]
        elif named == "after_s":
            if k == 0:
                raise ForgeError("bad-scenario", "there is no event before the first", where=f"{key}.after_s")
            time_s = now_s + numbers(event, "after_s")["after_s"]
        else:
            assert isinstance(event, sections.AngledEvent)
            earliest_s = numbers(event, "not_before_s")["not_before_s"]
            if not now_s <= earliest_s < end_s or earliest_s < 0.0:
                raise ForgeError(
                    "bad-scenario",
                    f"{earliest_s:g} s is not between the event before and the record's end",
                    where=f"{key}.not_before_s",
                )
            later = _happenings(scenario, first=k, start_s=lead_s + end_s + _LATER_S)
            with naming_events(scenario):
                story = Schedule(happenings=(*done, *later), frequency_hz=frequency_hz)
                time_s = _instant(network, story, event, earliest_s=earliest_s + lead_s) - lead_s
        if time_s <= 0.0 or time_s < now_s:
            raise ForgeError(
                "bad-scenario", f"{time_s:g} s is not after the event before it", where=f"{key}.{named}"
            )
        if time_s >= end_s:
            raise ForgeError(
                "bad-scenario",
                f"{time_s:g} s lies beyond the record's end at {end_s:g} s",
                where=f"{key}.{named}",
            )
        now_s = time_s
        done.append(_happening(scenario, k, time_s=time_s + lead_s))
    with naming_events(scenario):
        return Schedule(happenings=tuple(done), frequency_hz=frequency_hz)


@contextmanager
def naming_events(scenario: sections.Scenario) -> Iterator[None]:
    """Let errors of the schedule or the solution name the key of the event that they are about."""
    try:
        yield
    except ForgeError as error:
        section, _, field = error.where.partition(".")
        if section not in ("schedule", "fault"):
            raise
        raise ForgeError(
            error.code, error.message, where=_key_of_event(scenario, field, error.message), hint=error.hint
        ) from error


def _key_of_event(scenario: sections.Scenario, field: str, message: str) -> str:
    """The event that an error is about: one whose value it quotes, else the last that has the field."""
    if field == "fault":
        kinds = (sections.FaultEvent, sections.ChangeEvent, sections.EndEvent)
        about = [k for k, event in enumerate(scenario.events) if isinstance(event, kinds)]
        return f"events[{about[-1]}].do" if about else "events"
    about = [k for k, event in enumerate(scenario.events) if hasattr(event, field)]
    quoted = [k for k in about if repr(getattr(scenario.events[k], field)) in message]
    return f"events[{(quoted or about)[-1]}].{field}" if about else "events"


def _instant(network: Network, story: Schedule, event: sections.AngledEvent, *, earliest_s: float) -> float:
    """The first instant from `earliest_s` on at which the bus voltage is at the event's point on wave."""
    before = solve(network, story, duration_s=earliest_s)
    loop = reference_loop(event.type if isinstance(event, sections.FaultEvent) else "AG")  # type: ignore[arg-type]
    voltages = alternating(before, before.stretches[-1], time_s=earliest_s).voltage_v
    driving = complex(loop.weights @ voltages)
    largest = max((s.voltage_rms_v for s in (network.source, network.remote) if s is not None), default=0.0)
    if abs(driving) <= _DEAD * max(largest, float(np.abs(voltages).max())):
        raise ForgeError("bad-scenario", "the bus has no voltage to start from", where="schedule.angle_deg")
    frequency_hz = before.course.omega_rad_s(earliest_s) / (2.0 * np.pi)
    angle_deg = numbers(event, "angle_deg")["angle_deg"]
    missing_deg = angle_deg - (float(np.degrees(np.angle(driving))) + 90.0)
    return float(earliest_s + (missing_deg / 360.0 % 1.0) / frequency_hz)


def _happenings(scenario: sections.Scenario, *, first: int, start_s: float) -> Sequence[Happening]:
    return [
        _happening(scenario, k, time_s=start_s + _LATER_S * (k - first))
        for k in range(first, len(scenario.events))
    ]


def _happening(scenario: sections.Scenario, k: int, *, time_s: float) -> Happening:
    event, key = scenario.events[k], f"events[{k}]"
    with under(key):
        if isinstance(event, sections.FaultEvent):
            return FaultStart(time_s=time_s, fault=_fault(event, event, key))
        if isinstance(event, sections.ChangeEvent):
            began = [e for e in scenario.events[:k] if isinstance(e, sections.FaultEvent)]
            if not began:
                raise ForgeError("bad-scenario", "no fault has begun that could change", where="do")
            return FaultChange(time_s=time_s, fault=_fault(event, began[-1], key))
        if isinstance(event, sections.EndEvent):
            return FaultEnd(time_s=time_s)
        if isinstance(event, sections.OpenEvent):
            return PolesOpen(time_s=time_s, breaker=event.breaker, poles=event.poles)
        if isinstance(event, sections.CloseEvent):
            return PolesClose(time_s=time_s, breaker=event.breaker, poles=event.poles)
        if isinstance(event, sections.RestrikeEvent):
            return Restrike(time_s=time_s, breaker=event.breaker, poles=event.poles)
        if isinstance(event, sections.ConnectEvent):
            return Connect(time_s=time_s, element=event.element)
        if isinstance(event, sections.DisconnectEvent):
            return Disconnect(time_s=time_s, element=event.element)
        ramp = numbers(event, "lasts_s", "rate_hz_per_s")
        if ramp["lasts_s"] <= 0.0:
            raise ForgeError("bad-value", f"{ramp['lasts_s']:g} is not above zero", where="lasts_s")
        return FrequencyRamp(
            time_s=time_s, end_s=time_s + ramp["lasts_s"], rate_hz_per_s=ramp["rate_hz_per_s"]
        )


def _fault(event: sections.FaultEvent | sections.ChangeEvent, place: sections.FaultEvent, key: str) -> Fault:
    arc = None
    if event.arc is not None:
        with under(f"{key}.arc"):
            arc = Arc(**numbers(event.arc, "voltage_v", "ignition_a"))
    assert isinstance(event.type, str)
    with under(key):
        return Fault(
            type=event.type,
            side=place.side,
            arc=arc,
            **numbers(place, "fraction"),
            **numbers(event, "phase_resistance_ohm", "ground_resistance_ohm"),
        )
