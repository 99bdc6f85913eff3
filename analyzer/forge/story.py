"""The course of a schedule: stretch after stretch, poles opening at their own current zeros."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from typing import Literal

import numpy as np
from scipy.optimize import brentq, minimize_scalar

from analyzer.forge.circuit import Circuit, FloatArray, build_circuit
from analyzer.forge.drives import (
    DriveState,
    FrequencyCourse,
    frequency_course,
    initial_drives,
    limited_current,
    prefault_current,
)
from analyzer.forge.errors import impossible, require_positive
from analyzer.forge.network import Network, Transformer
from analyzer.forge.nonlinear import carried_flux_state, integrate, make_equations
from analyzer.forge.reduction import StateSpace, SwitchState, reduce_circuit
from analyzer.forge.schedule import (
    PHASES,
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
from analyzer.forge.stretches import (
    BranchIndex,
    Stretch,
    carried_state,
    forced_solution,
    linear_stretch,
    search_grid,
)

# A pole current below this share of the largest current of the story counts as none: rounding is 1e-13 of it.
_NO_CURRENT = 1e-10
_ROOT_TOLERANCE_S = 1e-15
_NONE: BranchIndex = np.zeros(0, dtype=np.intp)

What = Literal["start", "change", "extinguished", "opened", "closed", "restruck", "connected", "disconnected"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Mark:
    """Something that did happen, at its exact instant.

    Parameters
    ----------
    time_s : float
        When. [s]
    what : str
        Kind of change.
    where : str
        Breaker, element or 'fault'.
    phase : int or None
        Of a single pole or fault leg.
    fault : Fault or None
        The fault from then on, for 'start' and 'change'.
    """

    time_s: float
    what: What
    where: str
    phase: int | None = None
    fault: Fault | None = None


@dataclass(slots=True, eq=False)
class Story:
    """A network on its way through a schedule; used by `solve` and thrown away."""

    network: Network
    schedule: Schedule
    duration_s: float
    circuit: Circuit = field(init=False)
    course: FrequencyCourse = field(init=False)
    stage: DriveState = field(init=False)
    open_branches: set[int] = field(default_factory=set)
    pending: dict[int, Mark] = field(default_factory=dict)
    fault: Fault | None = None
    breaks: list[tuple[float, Happening | Literal["limit", "steady"]]] = field(default_factory=list)
    stretches: list[Stretch] = field(default_factory=list)
    marks: list[Mark] = field(default_factory=list)
    spaces: dict[SwitchState, StateSpace] = field(default_factory=dict)
    largest_a: float = 0.0

    def __post_init__(self) -> None:
        require_positive(self.duration_s, "duration_s")
        self.circuit = build_circuit(self.network, self.schedule.fault)
        self.course = frequency_course(self.network, self.schedule)
        for ramp in self.course.ramps:
            require_positive(self.course.omega_rad_s(ramp.end_s), "schedule.rate_hz_per_s")
        self.stage = initial_drives(self.network, self.circuit)
        self._set_initial_switches()
        for happening in self.schedule.happenings:
            self.breaks.append((happening.time_s, happening))
            if isinstance(happening, FrequencyRamp):
                self.breaks.append((happening.end_s, "steady"))

    def _set_initial_switches(self) -> None:
        for name in ("fault", "transformer"):
            self.open_branches.update(self.circuit.poles.get(name, np.zeros(0, dtype=np.intp)).tolist())
        seen: set[int] = set()
        for happening in self.schedule.happenings:
            if isinstance(happening, PolesOpen | PolesClose | Restrike):
                branches = self._pole_branches(happening.breaker, happening.poles)
                closing = not isinstance(happening, PolesOpen)
            elif isinstance(happening, Connect | Disconnect):
                branches, closing = self._element_branches(happening.element), isinstance(happening, Connect)
            else:
                continue
            if closing:
                self.open_branches.update(set(branches) - seen)
            seen.update(branches)

    def _pole_branches(self, breaker: str, poles: str) -> list[int]:
        if breaker not in self.circuit.poles:
            raise impossible("schedule.breaker", f"there is no breaker {breaker!r} in this network")
        return [int(self.circuit.poles[breaker][PHASES.index(pole)]) for pole in poles]

    def _element_branches(self, element: str) -> list[int]:
        if element in ("line", "remote", "adjacent", "fault") or element not in self.circuit.poles:
            raise impossible("schedule.element", f"there is no element {element!r} to switch in this network")
        return [int(branch) for branch in self.circuit.poles[element]]

    def space(self) -> StateSpace:
        """Return the network's state space as it is switched now."""
        fault = self.fault
        key = SwitchState(
            open_branches=frozenset(self.open_branches),
            phase_resistance_ohm=0.0 if fault is None else fault.phase_resistance_ohm,
            ground_resistance_ohm=0.0 if fault is None else fault.ground_resistance_ohm,
        )
        if key not in self.spaces:
            self.spaces[key] = reduce_circuit(self.circuit, key)
        return self.spaces[key]

    def run(self) -> None:
        """Go through the whole record."""
        now = 0.0
        while now < self.duration_s:
            self.breaks.sort(key=lambda pair: pair[0])
            until = min(self.breaks[0][0] if self.breaks else self.duration_s, self.duration_s)
            if until > now:
                stretch = self._next_stretch(now, until)
                zero = self._first_zero(stretch)
                if zero is not None:
                    until = zero[0]
                    stretch = replace(stretch, stop_s=until)  # type: ignore[type-var]
                if until > now:
                    self.stretches.append(stretch)
                    now = until
                if zero is not None:
                    self._interrupt(zero[1], now)
                    continue
            if now >= self.duration_s:
                break
            self._apply(self.breaks.pop(0)[1], now)

    def _next_stretch(self, now: float, until: float) -> Stretch:
        space, drives = self.space(), self.stage.drives
        forced = forced_solution(space, drives, self.course, time_s=now)
        fluxes, state = np.zeros(0), forced.state_now
        if self.stretches:
            before = self.stretches[-1]
            fluxes = before.fluxes(now)
            self._add_remanence(fluxes, before.space)
            state = carried_state(
                space,
                fluxes=fluxes,
                capacitor_voltages=before.capacitor_voltages(now),
                prescribed=forced.prescribed_now,
            )
        arc, arc_branches = self._live_arc(space)
        core, core_branches = self._live_core()
        stretch: Stretch
        if arc is None and core is None and self.course.chirp_rad_s2(now) == 0.0:
            stretch = linear_stretch(space, forced, state, start_s=now, stop_s=until)
        else:
            equations = make_equations(
                space,
                drives,
                self.course,
                start_s=now,
                arc=arc,
                arc_branches=arc_branches,
                core=core,
                core_branches=core_branches,
            )
            state = carried_flux_state(equations, state, fluxes)
            scale = float(np.abs(forced.states).max(initial=0.0))
            stretch = integrate(equations, state, stop_s=until, scale=scale)
        currents, _ = stretch.outputs(np.array([now, until]), np.arange(len(self.circuit.emf_rms_v)))
        self.largest_a = max(self.largest_a, float(np.abs(currents).max(initial=0.0)))
        return stretch

    def _live_arc(self, space: StateSpace) -> tuple[Arc | None, BranchIndex]:
        if self.fault is None or self.fault.arc is None:
            return None, _NONE
        # A leg that no loop goes through (the poles before it are open) carries nothing and burns no arc.
        live = [leg for leg in self.circuit.poles["fault"][:3] if np.any(np.abs(space.i_w[leg]) > 1e-12)]
        return (self.fault.arc, np.array(live, dtype=np.intp)) if live else (None, _NONE)

    def _live_core(self) -> tuple[Transformer | None, BranchIndex]:
        branches = self.circuit.poles.get("transformer", _NONE)
        if all(int(branch) in self.open_branches for branch in branches):
            return None, _NONE
        return self.network.transformer, branches

    def _add_remanence(self, fluxes: FloatArray, before: StateSpace) -> None:
        # A core keeps its remanence until it is first switched in; switched out at current zero it has none.
        core, branches = self.network.transformer, self.circuit.poles.get("transformer", _NONE)
        never = not any(mark.where == "transformer" and mark.what == "disconnected" for mark in self.marks)
        if core is not None and never:
            for branch, flux in zip(branches, core.remanence_vs, strict=True):
                if int(branch) in before.open_branches:
                    fluxes[branch] += flux

    def _first_zero(self, stretch: Stretch) -> tuple[float, list[int]] | None:
        if not self.pending:
            return None
        grid = search_grid(stretch, stretch.start_s, stretch.stop_s)
        currents, _ = stretch.outputs(grid, np.array(list(self.pending), dtype=np.intp))
        self.largest_a = max(self.largest_a, float(np.abs(currents).max()))
        tiny = _NO_CURRENT * self.largest_a
        found: dict[int, float] = {}
        for branch, values in zip(self.pending, currents, strict=True):
            fresh = self.pending[branch].what == "restruck" and self.pending[branch].time_s == stretch.start_s
            if np.abs(values).max() <= tiny or (abs(values[0]) <= tiny and not fresh):
                found[branch] = stretch.start_s
                continue
            root = first_root(lambda t, b=branch: _one(stretch, b, t), grid, values, skip_start=fresh)  # type: ignore[misc]
            if root is not None:
                found[branch] = root
        if not found:
            return None
        first = min(found.values())
        return first, [b for b in found if found[b] == first or abs(_one(stretch, b, first)) <= tiny]

    def _interrupt(self, branches: list[int], now: float) -> None:
        for branch in branches:
            order = self.pending.pop(branch)
            self.open_branches.add(branch)
            what: What = {
                "fault": "extinguished",
                "line": "opened",
                "remote": "opened",
                "adjacent": "opened",
            }.get(order.where, "disconnected")  # type: ignore[assignment]
            self.marks.append(Mark(time_s=now, what=what, where=order.where, phase=order.phase))
        if self.fault is not None and self._isolated(self.fault):
            self._turn_converter(now, limited=False)

    def _isolated(self, fault: Fault) -> bool:
        legs = self.circuit.poles["fault"]
        breaker = self.circuit.poles["line" if fault.side == "ahead" else "adjacent"]
        return all(legs[p] in self.open_branches or breaker[p] in self.open_branches for p in fault.phases)

    def _turn_converter(self, now: float, *, limited: bool) -> None:
        converter = self.network.converter
        if converter is not None:
            target = limited_current(converter) if limited else prefault_current(converter)
            self.stage = self.stage.with_converter_target(target, time_s=now)

    def _apply(self, happening: Happening | Literal["limit", "steady"], now: float) -> None:
        if isinstance(happening, FaultStart):
            self._start_fault(happening.fault, now)
        elif isinstance(happening, FaultChange):
            self._change_fault(happening.fault, now)
        elif isinstance(happening, FaultEnd):
            self._order([int(leg) for leg in self.circuit.poles["fault"][:3]], "fault", now)
        elif isinstance(happening, PolesOpen):
            self._order(self._pole_branches(happening.breaker, happening.poles), happening.breaker, now)
        elif isinstance(happening, PolesClose | Restrike):
            self._close_poles(happening, now)
        elif isinstance(happening, Connect):
            self._close(self._element_branches(happening.element))
            self.marks.append(Mark(time_s=now, what="connected", where=happening.element))
        elif isinstance(happening, Disconnect):
            self._order(self._element_branches(happening.element), happening.element, now)
        elif happening == "limit" and self.fault is not None and not self._isolated(self.fault):
            self._turn_converter(now, limited=True)

    def _close(self, branches: list[int]) -> None:
        self.open_branches.difference_update(branches)
        for branch in branches:
            self.pending.pop(branch, None)

    def _order(self, branches: list[int], where: str, now: float) -> None:
        poles = self.circuit.poles[where].tolist()
        for branch in branches:
            if branch not in self.open_branches:
                self.pending[branch] = Mark(time_s=now, what="opened", where=where, phase=poles.index(branch))

    def _close_poles(self, happening: PolesClose | Restrike, now: float) -> None:
        branches = self._pole_branches(happening.breaker, happening.poles)
        self._close(branches)
        what: What = "restruck" if isinstance(happening, Restrike) else "closed"
        for pole, branch in zip(happening.poles, branches, strict=True):
            mark = Mark(time_s=now, what=what, where=happening.breaker, phase=PHASES.index(pole))
            self.marks.append(mark)
            if what == "restruck":
                self.pending[branch] = mark
        if self.fault is not None and not self._isolated(self.fault):
            self._limit_converter(now)

    def _limit_converter(self, now: float) -> None:
        converter = self.network.converter
        if converter is not None and converter.delay_s > 0.0:
            self.breaks.append((now + converter.delay_s, "limit"))
        else:
            self._turn_converter(now, limited=True)

    def _legs(self, fault: Fault) -> list[int]:
        legs = self.circuit.poles["fault"]
        return [int(legs[p]) for p in fault.phases] + ([int(legs[3])] if fault.grounded else [])

    def _start_fault(self, fault: Fault, now: float) -> None:
        before = self.space()
        self.fault = fault
        self.open_branches.update(self.circuit.poles["fault"].tolist())
        self._close(self._legs(fault))
        omega = self.course.omega_rad_s(now)
        self.stage = self.stage.with_machine_decaying(before, self.space(), omega=omega, time_s=now)
        self.marks.append(Mark(time_s=now, what="start", where="fault", fault=fault))
        if not self._isolated(fault):
            self._limit_converter(now)

    def _change_fault(self, fault: Fault, now: float) -> None:
        wanted = set(self._legs(fault))
        live = {int(leg) for leg in self.circuit.poles["fault"]} - self.open_branches
        self._close(sorted(wanted))
        self._order(sorted(live - wanted), "fault", now)
        self.fault = fault
        self.marks.append(Mark(time_s=now, what="change", where="fault", fault=fault))


def _one(stretch: Stretch, branch: int, time_s: float) -> float:
    return float(stretch.current(branch, np.array([time_s]))[0])


def first_root(
    function: Callable[[float], float], grid: FloatArray, values: FloatArray, *, skip_start: bool = False
) -> float | None:
    """Return the first root of a smooth function known on a grid, to 1e-15 s.

    Roots that touch between two grid points are looked for at the extrema of its magnitude. With `skip_start`
    a root at the grid's first point does not count.
    """
    size = np.abs(values)
    lowest = 1 if skip_start and size[0] <= _NO_CURRENT * size.max() else 0
    crossings = np.flatnonzero(values[:-1] * values[1:] <= 0.0)
    crossings = crossings[crossings >= lowest]
    last = int(crossings[0]) if len(crossings) else len(values) - 1
    for k in range(lowest + 1, last):
        if size[k] <= size[k - 1] and size[k] <= size[k + 1]:
            sign = np.sign(values[k])
            dip = minimize_scalar(
                lambda t, s=sign: s * function(t),
                bounds=(grid[k - 1], grid[k + 1]),
                method="bounded",
                options={"xatol": 1e-12},
            )
            if dip.fun <= 0.0 < size[k - 1]:
                return bracketed_root(function, float(grid[k - 1]), float(dip.x))
    if not len(crossings):
        return None
    return bracketed_root(function, float(grid[last]), float(grid[last + 1]))


def bracketed_root(function: Callable[[float], float], low: float, high: float) -> float:
    """Return the root between two points that bracket it, to 1e-15 s.

    Where rounding has the sign of a value next to nothing wrong, that point is the root.
    """
    at_low, at_high = function(low), function(high)
    if at_low * at_high >= 0.0:
        return low if abs(at_low) < abs(at_high) else high
    return float(brentq(function, low, high, xtol=_ROOT_TOLERANCE_S))
