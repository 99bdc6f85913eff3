"""From the site file's statements to terminals: which channels, how they are summed, on which scale."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass, replace
from datetime import timedelta

from analyzer.records import AnalogChannel, Problem, Record
from analyzer.site import Channels, PhaseChannels, Site, SiteError, SiteTerminal
from analyzer.terminals.assign import Sum, Terminal, assign_terminal
from analyzer.toml_file import Step

_RATIOS_ALIKE = 1e-3
_THIRD = 1.0 / 3.0
_PAIRS = ("ab", "bc", "ca")


@dataclass(frozen=True, slots=True, kw_only=True)
class Assigned:
    """The terminals of a record, what is noted about them, and why there are none where there are none."""

    terminals: tuple[Terminal, ...]
    problems: tuple[Problem, ...] = ()
    reason: str = ""


def stated_record(record: Record, site: Site) -> tuple[Record, tuple[Problem, ...]]:
    """Return the record with what the site file says of frequency, clock, units and ratios.

    A ratio is used for the values that the record has on the secondary side; those on the primary side are
    scaled already. What the record says of its clock stays, since a fixed offset may be that of the other
    half of the year.

    Parameters
    ----------
    record : Record
    site : Site

    Returns
    -------
    record : Record
    problems : tuple of Problem
        Where the record says otherwise.

    Raises
    ------
    SiteError
        If a unit is stated for a channel that is not there (code ``no-such-channel``).
    """
    problems: list[Problem] = []
    if site.site.nominal_frequency_hz is not None:
        record = replace(record, nominal_frequency_hz=site.site.nominal_frequency_hz)
    start, trigger = record.start, record.trigger
    if site.clock.utc_offset_h is not None and start is not None:
        offset = timedelta(hours=site.clock.utc_offset_h)
        if start.utc_offset is None:
            in_zone = trigger.in_zone(offset) if trigger is not None else None
            record = replace(record, start=start.in_zone(offset), trigger=in_zone)
        elif start.utc_offset != offset:
            message = "the record states another offset from UTC than the site file; the record's is used"
            problems.append(Problem(code="clock-contradicted", message=message))
    for k, terminal in enumerate(_present(record, site)):
        if terminal is None:
            continue
        try:
            for key, unit in terminal.unit.items():
                record = _with(record, replace(_channel(record, key, ("unit", key)), unit=unit))
        except SiteError as error:
            raise _placed(error, site, k) from error
        record, contradicted = _with_ratios(record, terminal)
        problems += contradicted
    return record, tuple(problems)


def terminals_of(record: Record, site: Site | None) -> Assigned:
    """Return the terminals of a record: as the site file states them, else the one that the names tell.

    Parameters
    ----------
    record : Record
        With the statements of the site file; see :func:`stated_record`.
    site : Site or None

    Returns
    -------
    Assigned
        Of a site file with several terminals, those of which the record holds no channel are left out.

    Raises
    ------
    SiteError
        If a channel is not in the record (code ``no-such-channel``) or cannot be what it is said to be
        (``unusable-channel``), or if none of the terminals is in the record.
    """
    if site is None or not site.terminal:
        by_name, reason = assign_terminal(record)
        return Assigned(terminals=(by_name,)) if by_name else Assigned(terminals=(), reason=reason)
    terminals, problems = [], []
    for k, stated in enumerate(_present(record, site)):
        if stated is None:
            shown = site.terminal[k].name or f"terminal[{k}]"
            message = f"no channel of {shown}, which the site file states, is in this record: left out"
            problems.append(Problem(code="terminal-not-recorded", message=message))
            continue
        try:
            if stated.currents is not None:
                terminal = terminal_from_site(record, stated)
            else:
                by_name, reason = assign_terminal(record)
                if by_name is None:
                    return Assigned(terminals=(), reason=reason)
                terminal = _completed(record, stated, by_name)
        except SiteError as error:
            raise _placed(error, site, k) from error
        if not terminal.voltages_have_zero_sequence:
            message = (
                f"{terminal.name}: only voltages between phases are stated; those to ground are taken to be "
                "without zero sequence, and what needs it is left open"
            )
            problems.append(Problem(code="no-zero-sequence-voltage", message=message))
        terminals.append(terminal)
    return Assigned(terminals=tuple(terminals), problems=tuple(problems))


def terminal_from_site(record: Record, stated: SiteTerminal) -> Terminal:
    """Return the terminal that a site file states.

    Parameters
    ----------
    record : Record
    stated : SiteTerminal
        With its currents.

    Returns
    -------
    Terminal

    Raises
    ------
    SiteError
        If a channel is not in the record (code ``no-such-channel``), is of another quantity or has no known
        scale (``unusable-channel``), or a correction is given for a channel that is not the terminal's
        (``unused-correction``).
    ValueError
        If no currents are stated.

    Notes
    -----
    A phase current that is left out is the residual less the other two. Phase voltages of voltages between
    phases are those less their zero sequence: ``va - v0 = (vab - vca) / 3``, and so on. The noise of phases
    that share channels is correlated, which the fits do not carry: of three voltages between phases, what
    is combined without zero sequence has a variance 1.5 times the one that is stated.
    """
    if stated.currents is None:
        raise ValueError("a terminal of a site file needs its currents")
    sign = 1.0 if stated.polarity == "out-of-bus" else -1.0
    currents = {
        phase: _scaled(_sum(record, channels, ("currents", phase), "current"), sign)
        for phase, channels in stated.currents.by_phase.items()
    }
    residual: Sum = ()
    if stated.residual is not None:
        residual = _scaled(_sum(record, stated.residual, ("residual",), "current"), sign)
    for phase in "abc":
        if phase not in currents:
            others = (_scaled(currents[other], -1.0) for other in "abc" if other != phase)
            currents[phase] = _added(residual, *others)
    voltages, names, shown = _voltages(record, stated)
    used = {key for parts in (*currents.values(), *voltages, residual) for key, _ in parts}
    for key in stated.ratio_correction:
        if key not in used:
            message = f"channel {key!r} is none of this terminal's"
            raise SiteError("unused-correction", message, location=("ratio_correction", key))
    sums = tuple(
        tuple((key, factor * stated.ratio_correction.get(key, 1.0)) for key, factor in parts)
        for parts in (*(currents[phase] for phase in "abc"), *voltages)
    )
    texts = tuple(_in_words(currents[phase]) for phase in "abc")
    return Terminal(
        name=stated.name or f"of {texts[0]}",
        currents=texts,
        voltages=shown,
        residual=_in_words(residual) if residual else None,
        reason="as the site file states",
        how="by-site-file",
        sums=sums,
        voltage_names=names,
        voltages_have_zero_sequence=stated.voltages_pp is None,
        stated=stated,
    )


def _voltages(
    record: Record, stated: SiteTerminal
) -> tuple[tuple[Sum, ...], tuple[str, ...], tuple[str, ...]]:
    """The phase voltages' sums, and what is recorded: names and channels."""
    if stated.voltages is not None:
        phases = {
            phase: _sum(record, channels, ("voltages", phase), "voltage")
            for phase, channels in stated.voltages.by_phase.items()
        }
        sums = tuple(phases[phase] for phase in "abc")
        return sums, ("va", "vb", "vc"), tuple(_in_words(parts) for parts in sums)
    if stated.voltages_pp is None:
        return (), ("va", "vb", "vc"), ()
    given = {
        pair: _sum(record, channels, ("voltages_pp", pair), "voltage")
        for pair, channels in stated.voltages_pp.by_pair.items()
    }
    names, shown = tuple(f"v{pair}" for pair in given), tuple(_in_words(parts) for parts in given.values())
    for pair in _PAIRS:
        if pair not in given:
            given[pair] = _added(*(_scaled(given[other], -1.0) for other in _PAIRS if other != pair))
    ab, bc, ca = (given[pair] for pair in _PAIRS)
    sums = tuple(
        _scaled(_added(first, _scaled(second, -1.0)), _THIRD)
        for first, second in ((ab, ca), (bc, ab), (ca, bc))
    )
    return sums, names, shown


def _completed(record: Record, stated: SiteTerminal, by_name: Terminal) -> Terminal:
    """The terminal that the names tell, with what is stated besides."""
    changes: dict[str, object] = {"currents": _one_each(by_name.currents)}
    if stated.residual is None and by_name.residual is not None:
        changes["residual"] = (by_name.residual,)
    if stated.voltages is None and stated.voltages_pp is None and by_name.voltages:
        changes["voltages"] = _one_each(by_name.voltages)
    return replace(
        terminal_from_site(record, stated.model_copy(update=changes)),
        name=stated.name or by_name.name,
        how="by-name",
        confidence=by_name.confidence,
        reason=by_name.reason,
    )


def _one_each(ids: tuple[str, ...]) -> PhaseChannels:
    a, b, c = ids
    return PhaseChannels(a=(a,), b=(b,), c=(c,))


def _sum(record: Record, channels: Channels, location: tuple[Step, ...], quantity: str) -> Sum:
    parts: list[tuple[str, float]] = []
    for text in channels:
        key, sign = _signed(record, text)
        channel = _channel(record, key, location)
        if channel.quantity is not None and channel.quantity != quantity:
            message = f"channel {key!r} is in {channel.unit}, which is no {quantity}"
            hint = "choose another channel, or state its unit under unit if the record's is wrong"
            raise SiteError("unusable-channel", message, hint=hint, location=location)
        if channel.refusal is not None:
            hints = {
                "unknown-unit": f'state it: unit = {{ "{key}" = "…" }}',
                "unknown-ratio": "state the ratio in [terminal.ct] or [terminal.vt]",
            }
            raise SiteError(
                "unusable-channel",
                f"channel {key!r}: {channel.refusal.message}",
                hint=hints.get(channel.refusal.code, ""),
                location=location,
            )
        parts.append((key, sign))
    return tuple(parts)


def _signed(record: Record, text: str) -> tuple[str, float]:
    """Channel and sign; a channel whose name begins with a minus is itself."""
    known = {channel.id for channel in record.analog}
    if text not in known and text.startswith("-"):
        return text[1:].strip(), -1.0
    return text, 1.0


def _channel(record: Record, key: str, location: tuple[Step, ...]) -> AnalogChannel:
    for channel in record.analog:
        if channel.id == key:
            return channel
    known = [channel.id for channel in record.analog]
    near = difflib.get_close_matches(key, known, n=1)
    hint = f"channels are: {', '.join(known[:12])}{' …' if len(known) > 12 else ''}"
    message = f"there is no channel {key!r} in {record.origin.path or 'the record'}"
    hint = f"did you mean {near[0]}? {hint}" if near else hint
    raise SiteError("no-such-channel", message, hint=hint, location=location)


def _added(*sums: Sum) -> Sum:
    factors: dict[str, float] = {}
    for key, factor in (part for parts in sums for part in parts):
        factors[key] = factors.get(key, 0.0) + factor
    return tuple((key, factor) for key, factor in factors.items() if factor != 0.0)


def _scaled(parts: Sum, factor: float) -> Sum:
    return tuple((key, factor * own) for key, own in parts)


def _in_words(parts: Sum) -> str:
    """Such as ``IA1 - IA2``; one channel alone is its id, whatever its sign."""
    if len(parts) == 1:
        return parts[0][0]
    first, *others = parts
    text = first[0] if first[1] > 0 else f"-{first[0]}"
    return text + "".join(f" {'+' if factor > 0 else '-'} {key}" for key, factor in others)


def _present(record: Record, site: Site) -> list[SiteTerminal | None]:
    """The site's terminals, None for those of several that have no channel in the record."""
    stated = list(site.terminal)
    held = [_holds_any(record, terminal) for terminal in stated]
    if not any(held):
        return list(stated)
    return [terminal if has else None for terminal, has in zip(stated, held, strict=True)]


def _holds_any(record: Record, terminal: SiteTerminal) -> bool:
    if terminal.currents is None:
        return True
    named: Iterable[Channels] = terminal.currents.by_phase.values()
    known = {channel.id for channel in record.analog}
    return any(_signed(record, text)[0] in known for channels in named for text in channels)


def _with(record: Record, channel: AnalogChannel) -> Record:
    return replace(record, analog=tuple(channel if one.id == channel.id else one for one in record.analog))


def _with_ratios(record: Record, terminal: SiteTerminal) -> tuple[Record, list[Problem]]:
    ct, vt = terminal.ct, terminal.vt
    sides = (
        ("current", ct.primary_a, ct.secondary_a, _named(record, terminal, "current")),
        ("voltage", vt.primary_v, vt.secondary_v, _named(record, terminal, "voltage")),
    )
    problems = []
    for quantity, primary, secondary, named in sides:
        if primary is None or secondary is None:
            continue
        for channel in record.analog:
            if channel.quantity != quantity or channel.side != "secondary":
                continue
            if channel.id not in named and (named or channel.ratio is not None):
                continue
            if channel.ratio is not None and abs(channel.ratio * secondary / primary - 1) > _RATIOS_ALIKE:
                message = (
                    f"the record's transformer ratio {channel.primary:g}/{channel.secondary:g} is not the "
                    f"site file's {primary:g}/{secondary:g}, which is used"
                )
                where = f"channel {channel.id}"
                problems.append(Problem(code="ratio-contradicted", message=message, where=where))
            record = _with(record, replace(channel, primary=primary, secondary=secondary))
    return record, problems


def _named(record: Record, terminal: SiteTerminal, quantity: str) -> set[str]:
    """Channels that the terminal states; none where they are told by their names."""
    if quantity == "current":
        groups = list(terminal.currents.by_phase.values()) if terminal.currents else []
        groups += [terminal.residual] if terminal.residual else []
    else:
        groups = list(terminal.voltages.by_phase.values()) if terminal.voltages else []
        groups += list(terminal.voltages_pp.by_pair.values()) if terminal.voltages_pp else []
    return {_signed(record, text)[0] for channels in groups for text in channels}


def _placed(error: SiteError, site: Site, k: int) -> SiteError:
    where = site.where("terminal", k, *error.location)
    return SiteError(error.code, error.message, where=where, hint=error.hint)
