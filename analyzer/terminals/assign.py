"""From channels to one terminal: three currents and, where there are any, three voltages.

This version takes the group of currents that the disturbance moves most, and the voltages whose names are
nearest to it.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from difflib import SequenceMatcher
from typing import TYPE_CHECKING, Literal

import numpy as np
from numpy.typing import NDArray

from analyzer.records import Record, RecordError
from analyzer.terminals.names import Kind, Role, phase_order, role_of
from analyzer.waveform.scan import LONG_SAMPLES, active_windows
from analyzer.waveform.stretches import MIN_SAMPLES_PER_CYCLE, part_of, stretches_of

if TYPE_CHECKING:
    from analyzer.site import SiteTerminal

Sum = tuple[tuple[str, float], ...]
_HEAD_SAMPLES = 1 << 16  # of a long record, beside the windows in which something happens
_IDLE = 0.1  # of the largest swing
_TURNED = 0.5  # change in half a cycle over the value, RMS; a sinusoid has 2, beside as large a constant 1.4


@dataclass(frozen=True, slots=True, kw_only=True)
class Terminal:
    """Channels that belong together.

    Attributes
    ----------
    name : str
        What is common to the current channels' names, or as stated.
    currents, voltages : tuple of str
        Channel ids of phases A, B, C, or in words how they are formed; empty where there are none.
    residual : str or None
        Channel id of the residual current.
    confidence : float
        0 to 1, by how the channels were found.
    reason : str
        In words.
    how : {"by-name", "by-site-file"}
        How the channels were found.
    sums : tuple of Sum
        Of each phase current, then of each phase voltage, the channels that are summed and the factor of
        each; empty where every one is a channel of its own.
    voltage_names : tuple of str
        What `voltages` are called in the findings; those between phases where only these are recorded.
    voltages_have_zero_sequence : bool
        False for phase voltages formed from voltages between phases.
    stated : SiteTerminal or None
        What the site file says of it.
    """

    name: str
    currents: tuple[str, ...]
    voltages: tuple[str, ...] = ()
    residual: str | None = None
    confidence: float = 1.0
    reason: str = ""
    how: Literal["by-name", "by-site-file"] = "by-name"
    sums: tuple[Sum, ...] = ()
    voltage_names: tuple[str, ...] = ("va", "vb", "vc")
    voltages_have_zero_sequence: bool = True
    stated: SiteTerminal | None = None

    @property
    def channels(self) -> dict[str, str]:
        """Channel ids by the names that the findings use: va, vb, vc, ia, ib, ic, in."""
        named = dict(zip(self.voltage_names, self.voltages, strict=False))
        named.update(zip(("ia", "ib", "ic"), self.currents, strict=False))
        if self.residual is not None:
            named["in"] = self.residual
        return named

    @property
    def signals(self) -> tuple[Sum, ...]:
        """How each phase current, then each phase voltage is formed from channels."""
        return self.sums or tuple(((key, 1.0),) for key in (*self.currents, *self.voltages))


@dataclass(frozen=True, slots=True)
class _Group:
    name: str
    circuit: str
    by_phase: Mapping[str, str]  # A, B, C, n to channel id


def assign_terminal(record: Record) -> tuple[Terminal | None, str]:
    """Return the terminal of a record, and in words why it is that one or why there is none.

    Parameters
    ----------
    record : Record

    Returns
    -------
    terminal : Terminal or None
    reason : str
    """
    roles = [role for channel in record.analog if (role := role_of(channel)) is not None]
    currents = _groups([role for role in roles if role.kind == "current"])
    voltages = _groups([role for role in roles if role.kind == "voltage"])
    if not currents:
        return None, "no three currents of one circuit are recognised by their names; state them by hand"
    parts = _looked_at(record, [*currents, *voltages])
    movement = [_movement(parts, group) for group in currents]
    if not any(np.isfinite(movement)):
        return None, "the current channels hold no alternating current"
    currents = [group for group, moved in zip(currents, movement, strict=True) if np.isfinite(moved)]
    movement = [moved for moved in movement if np.isfinite(moved)]
    voltages = [group for group in voltages if np.isfinite(_movement(parts, group))]
    # Of groups that moved almost alike (both ends of a line, say) the one named like the voltages is local.
    nearest = [max((_kinship(group, v) for v in voltages), default=0.0) for group in currents]
    best = max(movement)
    chosen = max(
        range(len(currents)), key=lambda k: (movement[k] > 0.3 * best, nearest[k] > 0.6, movement[k])
    )
    group = currents[chosen]
    confidence = 0.95 if len(currents) == 1 else 0.8
    reason = (
        "the only three currents"
        if len(currents) == 1
        else f"moved most of {len(currents)} groups of currents"
    )
    voltage: _Group | None = None
    if voltages:
        voltage = max(voltages, key=lambda v: _kinship(group, v))
        reason += f"; voltages {'the only ones' if len(voltages) == 1 else 'by the nearest name'}"
        if len(voltages) > 1 and _kinship(group, voltage) < 0.5:
            confidence -= 0.2
    else:
        reason += "; no three phase voltages"
    terminal = Terminal(
        name=_shown_name(group),
        currents=tuple(group.by_phase[phase] for phase in "ABC"),
        voltages=tuple(voltage.by_phase[phase] for phase in "ABC") if voltage else (),
        residual=group.by_phase.get("n"),
        confidence=round(confidence, 2),
        reason=reason,
    )
    return terminal, reason


def named_groups(record: Record, kind: Kind) -> tuple[dict[str, str], ...]:
    """Return the channel ids by phase, A, B, C and n, of all groups whose names belong together."""
    roles = [role for channel in record.analog if (role := role_of(channel)) is not None]
    return tuple(dict(group.by_phase) for group in _groups([role for role in roles if role.kind == kind]))


def _shown_name(group: _Group) -> str:
    if group.name and "#" not in group.name:
        return group.name
    return group.circuit or f"of {group.by_phase['A']}"


def _groups(roles: list[Role]) -> list[_Group]:
    """Complete groups, by the names without their phases; numbers that only count channels do not divide."""
    complete, left = _gathered(roles, lambda role: role.group)
    more, _ = _gathered(left, lambda role: re.sub(r"\d+", "#", role.group))
    return complete + more


def _gathered(roles: list[Role], name_of: Callable[[Role], str]) -> tuple[list[_Group], list[Role]]:
    groups: dict[tuple[str, str], dict[str, Role]] = {}
    for role in roles:
        key = (name_of(role), "")
        if role.phase in groups.get(key, {}):  # there twice under one name: the circuit tells them apart
            key = (name_of(role), role.channel.circuit or role.channel.id)
        groups.setdefault(key, {}).setdefault(role.phase, role)
    complete: list[_Group] = []
    left: list[Role] = []
    for (name, _), by_phase in groups.items():
        order = phase_order(set(by_phase))
        if order is None:
            left.extend(by_phase.values())
            continue
        ids = dict(zip("ABC", (by_phase[phase].channel.id for phase in order), strict=True))
        if "n" in by_phase:
            ids["n"] = by_phase["n"].channel.id
        complete.append(_Group(name=name, circuit=by_phase[order[0]].channel.circuit, by_phase=ids))
    return complete, left


def _looked_at(record: Record, groups: Sequence[_Group]) -> tuple[Record, ...]:
    """The whole record, or of a long one its beginning and the windows in which any of the groups moves."""
    if record.n_samples <= LONG_SAMPLES:
        return (record,)
    keys = [group.by_phase[phase] for group in groups for phase in "ABC"]
    signals = [((key, 1.0),) for key in keys if record.channel(key).refusal is None]
    frequency_hz = record.nominal_frequency_hz or 50.0
    parts = []
    for stretch in stretches_of(record):
        if signals and stretch.rate_hz >= MIN_SAMPLES_PER_CYCLE * frequency_hz:
            head = replace(stretch, stop=min(stretch.first + _HEAD_SAMPLES, stretch.stop))
            windows = active_windows(record, signals, stretch, frequency_hz=frequency_hz)
            parts += [part_of(record, part) for part in (head, *windows)]
    return tuple(parts)


def _movement(parts: Sequence[Record], group: _Group) -> float:
    """How much the group's channels change from one cycle to the next; NaN for what does not alternate."""
    return float(np.fmax.reduce([_movement_in(part, group) for part in parts], initial=np.nan))


def _movement_in(part: Record, group: _Group) -> float:
    try:
        values = part.signals([group.by_phase[phase] for phase in "ABC"])
    except RecordError:
        return float("nan")
    frequency_hz = part.nominal_frequency_hz or 50.0
    largest = float("nan")
    for stretch in stretches_of(part):
        lag = round(stretch.rate_hz / frequency_hz)
        block = values[:, stretch.first : stretch.stop]
        if (
            lag < 6
            or block.shape[1] < 2 * lag
            or not np.isfinite(block).any()
            or not _alternates(block, lag // 2)
        ):
            continue
        change = np.abs(block[:, lag:] - block[:, :-lag])
        largest = float(np.nanmax([largest, np.nanmax(change)])) if np.isfinite(change).any() else largest
    return largest


def _alternates(block: NDArray[np.float64], half_cycle: int) -> bool:
    """Whether the values are other ones half a cycle later, as instantaneous ones are and stored RMS not."""
    block = block[np.isfinite(block).any(axis=1)]
    swing = np.nanstd(block, axis=1)
    # Beside a phase that swings, an idle one shows nothing but its converter's zero.
    swinging = block[swing > _IDLE * swing.max()]
    turned = np.abs(swinging[:, half_cycle:] - swinging[:, :-half_cycle])
    return bool(
        swinging.size and np.all(np.nanmean(turned**2, axis=1) > _TURNED**2 * np.nanmean(swinging**2, axis=1))
    )


def _kinship(current: _Group, voltage: _Group) -> float:
    """How alike the two names are, 0 to 1; equal circuits decide."""
    if current.circuit and current.circuit == voltage.circuit:
        return 1.0
    if current.name == voltage.name:
        return 0.95
    first, second = set(current.name.split()), set(voltage.name.split())
    common = len(first & second) / max(len(first | second), 1)
    alike = SequenceMatcher(None, current.name, voltage.name).ratio()
    return 0.5 + 0.4 * common if common else 0.5 * alike
