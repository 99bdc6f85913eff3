"""Channel names, phase marks and units: which phase of which quantity a channel carries.

Habits of many recorders and languages meet here; a name that does not say is left undecided.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Literal

from analyzer.records.channels import AnalogChannel

Kind = Literal["voltage", "current"]

# Words of channels that hold no instantaneous phase quantity.
_NOT_INSTANTANEOUS = re.compile(
    r"(?<![a-z])(rms|mag|magnitude|ang|angle|phase angle|mean|avg|thd|harm\w*|diff\w*|bias|restr\w*|ref"
    r"|freq\w*|i?dc|v?dc|mem|pos|neg|seq|nps|pps)(?![a-z])"
)
_BEFORE, _AFTER = r"(?<![a-zа-я0-9])", r"(?![a-zа-я0-9])"
# A quantity letter and a phase: IA, I_L1, Ua, V-B, ULC, 3I0, IN, VAN, Va-g; not part of a longer word.
_PHASE = re.compile(
    _BEFORE
    + r"(?:3[ _-]?)?(?P<quantity>[iuve])[ _-]?l?[ _-]?(?P<phase>[abcrstywnge0123])(?:-?[ng])?"
    + _AFTER
)
_PAIR = re.compile(
    _BEFORE + r"(?P<quantity>[uve])[ _-]?l?(?P<first>[abcrsty123])[ _-]?l?(?P<second>[abcrsty123])" + _AFTER
)
_MARKS = {
    **{mark: mark for mark in "abcrstyn"},
    **{"l1": "1", "l2": "2", "l3": "3", "1": "1", "2": "2", "3": "3", "g": "n", "e": "n"},
    **{"a-n": "a", "b-n": "b", "c-n": "c", "an": "a", "bn": "b", "cn": "c"},
}
_RESIDUAL = frozenset("nge0")
_CYRILLIC = str.maketrans("авсеиу", "abceiu")  # letters that look Latin in names of phases


@dataclass(frozen=True, slots=True, kw_only=True)
class Role:
    """What a channel carries, by its name.

    Attributes
    ----------
    channel : AnalogChannel
    kind : {"voltage", "current"}
    phase : str
        Letter or number as written, in lower case; ``n`` for a residual; two letters for a voltage between
        phases.
    group : str
        What is left of the name without the phase: equal for the channels that belong together.
    """

    channel: AnalogChannel
    kind: Kind
    phase: str
    group: str


def role_of(channel: AnalogChannel) -> Role | None:
    """Return what a channel carries, None when it is no instantaneous voltage or current of a phase."""
    quantity = channel.quantity
    if channel.refusal is not None or channel.multiplier == 0.0:
        return None
    kind: Kind
    if quantity == "voltage":
        kind = "voltage"
    elif quantity == "current":
        kind = "current"
    else:
        return None
    name = re.sub(r"[(\[].*?[)\]]", "", channel.name).strip().lower()
    if _NOT_INSTANTANEOUS.search(name):
        return None
    plain = name.translate(_CYRILLIC) if not name.isascii() else name
    letters = "i" if kind == "current" else "uve"
    for pattern in (_PHASE, _PAIR):
        for match in pattern.finditer(plain):
            if match["quantity"] not in letters:
                continue
            if pattern is _PAIR:
                phase = match["first"] + match["second"]
            else:
                phase = "n" if match["phase"] in _RESIDUAL or match[0].startswith("3") else match["phase"]
            group = f"{name[: match.start()]}|{name[match.end() :]}"
            return Role(channel=channel, kind=kind, phase=phase, group=_tidy(group))
    return _role_by_mark(channel, kind, name)


def _role_by_mark(channel: AnalogChannel, kind: Kind, name: str) -> Role | None:
    """The name has no phase in it: the phase mark may tell it, and its letter leaves the name."""
    phase = _MARKS.get(channel.phase.strip().lower())
    if phase is None:
        return None
    group = re.sub(rf"(?<![a-z0-9]){re.escape(phase)}(?![a-z0-9])", "", name)
    if group == name:
        group = re.sub(rf"(?<=[a-z]){re.escape(phase)}(?![a-z0-9])", "", name)
    return Role(channel=channel, kind=kind, phase=phase, group=_tidy(group))


def _tidy(group: str) -> str:
    return re.sub(r"[\s|_\-]+", " ", group).strip()


def phase_order(phases: set[str]) -> tuple[str, str, str] | None:
    """Return the names of phases A, B and C in a set of phase names, None when they form no known set."""
    for order in (("a", "b", "c"), ("r", "s", "t"), ("1", "2", "3"), ("r", "y", "b")):
        if set(order) <= phases:
            return order
    return None
