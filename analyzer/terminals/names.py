"""Channel names, phase marks and units: which phase of which quantity a channel carries.

Habits of many recorders and languages meet here; a name that does not say is left undecided.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Literal

from analyzer.records.channels import AnalogChannel

Kind = Literal["voltage", "current"]
_Found = tuple[str, list[tuple[int, int]]]  # phase, and what of the name told it

# Words of channels that hold no instantaneous phase quantity, alone or behind a quantity and a phase.
_NOT_INSTANTANEOUS = re.compile(
    r"(?<![a-z])(?:[iuve][ _-]?l?[abcrstyn0-3]?[ _-]?)?(?:rms|mag|magnitude|ang|angle|mean|avg|max|min|demand"
    r"|fund\w*|thd|harm\w*|diff\w*|bias|restr\w*|ref|freq\w*|dc|mem|pos|neg|seq|nps|pps|coil|contact|battery)"
    r"(?![a-z])"
)
# All patterns are of lower case, with Cyrillic letters that look Latin made Latin.
_BEFORE, _AFTER = r"(?<![a-zа-я0-9])", r"(?![a-zа-я0-9])"
_GAP = r"[ _.\-]?"
# A quantity letter and a phase: IA, I_L1, Ua, V-B, ULC, IфA, IN, VAN, Va-g, IA1; not part of a longer word.
_PHASE = re.compile(
    rf"{_BEFORE}(?P<quantity>[iuve]){_GAP}(?:l|ф\.?)?{_GAP}(?P<phase>[abcrstynge0-3])(?:-?[ng])?"
    rf"(?P<counter>(?<!\d)\d\d?)?{_AFTER}"
)
# Zero sequence, with a nought or the letter O: I0, 3I0, 3xUo.
_ZERO = re.compile(rf"{_BEFORE}(?:^3 ?|3[x*×]?)?(?P<quantity>[iuv])[ _-]?[0o]{_AFTER}")
# The difference of two phases: UL12, VAB, Va-b, VA-VB, UL1-L2; blanks and underscores divide other things.
_PAIR = re.compile(
    rf"{_BEFORE}(?P<quantity>[iuve]){_GAP}l?(?P<first>[abcrsty123])[\-/]?(?:(?P=quantity)_?)?"
    rf"l?(?P<second>[abcrsty123]){_AFTER}"
)
_FAMILIES = (frozenset("abc"), frozenset("rst"), frozenset("ryb"), frozenset("123"))
# A phase without a quantity letter, which the unit then tells: phase A, B-phase, ф.C, A相, phsB, L1.
_WORD = re.compile(
    r"(?:(?<![a-zа-я])(?:phase|ph|fase|faza|ф(?:aзa|aзы)?)|phs)[ ._\-]*l?(?P<after>[abcrst123])" + _AFTER
    + rf"|{_BEFORE}(?P<before>[abcrst])(?:[ _-]?(?:phase|ph)(?![a-z])|相)"
    + rf"|{_BEFORE}l(?P<line>[123]){_AFTER}"
)  # fmt: skip
_MARK = re.compile(r"(?:phase |ph\.?)?l?(?P<phase>[abcrsty123])(?:-?[nge])?相?")
_RESIDUAL = frozenset("nge0")
_CYRILLIC = str.maketrans("авсеиу", "abceiu")


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
    """Return what a channel carries, None when it is no instantaneous voltage or current of a phase.

    A difference of two phases is known for voltages only: two letters or numbers are then its phase.
    """
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
    name = channel.name.strip().lower()
    if _NOT_INSTANTANEOUS.search(name):
        return None
    name = re.sub(r"\s*[(\[](.*?)[)\]]", _unbracketed, name)
    plain = name.translate(_CYRILLIC)  # of the same length: what matches there is cut out of the name
    mark = _phase_of_mark(channel)
    found = _by_quantity(plain, kind, mark) or _by_words(plain, mark) or _by_mark(plain, mark)
    if found is None or (kind == "current" and len(found[0]) > 1):
        return None
    phase, cuts = found
    for first, stop in reversed(cuts):
        name = f"{name[:first]}|{name[stop:]}"
    return Role(channel=channel, kind=kind, phase=phase, group=_tidy(name))


def _by_quantity(plain: str, kind: Kind, mark: str | None) -> _Found | None:
    letters = "i" if kind == "current" else "uve"
    pairs = [match for match in _PAIR.finditer(plain) if match["quantity"] in letters and _is_pair(match)]
    singles = [
        (match, "n" if pattern is _ZERO or match["phase"] in _RESIDUAL else match["phase"])
        for pattern in (_ZERO, _PHASE)
        for match in pattern.finditer(plain)
        if match["quantity"] in letters and not any(_overlap(match, pair) for pair in pairs)
    ]
    if singles:
        # A name may hold more that looks like one (VT1 UA, Bus U1 VB): the mark decides, then VT comes last.
        match, phase = max(singles, key=lambda one: (one[1] == mark, not one[0][0].startswith("vt")))
        counted = match.re is _PHASE and match["counter"] is not None
        return phase, [(match.start(), match.start("counter") if counted else match.end())]
    if pairs:
        return pairs[0]["first"] + pairs[0]["second"], [pairs[0].span()]
    return None


def _by_words(plain: str, mark: str | None) -> _Found | None:
    for match in _WORD.finditer(plain):
        phase = match["after"] or match["before"] or match["line"]
        if match["line"] and mark not in (None, phase):
            continue  # L1 is a line's name as well
        return phase, [match.span()]
    return None


def _by_mark(plain: str, mark: str | None) -> _Found | None:
    """The name has no phase in it: the phase mark may tell it, and its letter leaves the name."""
    if mark is None:
        return None
    alone = [match.span() for match in re.finditer(rf"(?<![a-z0-9]){mark}(?![a-z0-9])", plain)]
    return mark, alone or [match.span() for match in re.finditer(rf"(?<=[a-z]){mark}(?![a-z0-9])", plain)]


def _unbracketed(match: re.Match[str]) -> str:
    """What is in brackets is a unit or a remark, unless it is the phase: I(L1), U (b)."""
    return f" {match[1]}" if _MARK.fullmatch(match[1].translate(_CYRILLIC)) else ""


def _is_pair(match: re.Match[str]) -> bool:
    both = {match["first"], match["second"]}
    return len(both) == 2 and any(both <= family for family in _FAMILIES)


def _overlap(first: re.Match[str], second: re.Match[str]) -> bool:
    return first.start() < second.end() and second.start() < first.end()


def _phase_of_mark(channel: AnalogChannel) -> str | None:
    mark = channel.phase.strip().lower().translate(_CYRILLIC)
    if mark in _RESIDUAL:
        return "n"
    match = _MARK.fullmatch(mark)
    return match["phase"] if match else None


def _tidy(group: str) -> str:
    return re.sub(r"[\s|_\-]+", " ", group).strip()


def phase_order(phases: set[str]) -> tuple[str, str, str] | None:
    """Return the names of phases A, B and C in a set of phase names, None when they form no known set."""
    for order in (("a", "b", "c"), ("r", "s", "t"), ("1", "2", "3"), ("r", "y", "b")):
        if set(order) <= phases:
            return order
    return None
