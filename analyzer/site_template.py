"""A commented site file for one record: what the names told filled in, the rest to be taken up or left."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Mapping
from typing import Any

from pydantic import BaseModel
from pydantic.fields import FieldInfo

from analyzer.records import AnalogChannel, Record
from analyzer.records.text import printable
from analyzer.site import Site, SiteTerminal
from analyzer.terminals.assign import Terminal, assign_terminal, named_groups
from analyzer.terminals.names import phase_order, role_of

_COMMENT_COLUMN = 46
_WIDTH = 100
_SURE = 0.9  # of the only currents of a record; where there are others the names do not decide
_BARE = re.compile(r"[A-Za-z0-9_-]+")
_HEAD = (
    "Every value is optional. A key behind a # is not stated: take the # away and put in your value. What is "
    "stated goes before what the record and the names of its channels say. Values are primary SI."
)


def site_template(record: Record) -> str:
    """Return a site file for a record, as text.

    Read back as it stands it states the record's nominal frequency and the channels that were assigned by
    their names, so that it changes nothing.

    Parameters
    ----------
    record : Record

    Returns
    -------
    str
        TOML; the reasons, the confidence and what to write where the names do not tell are comments.
    """
    terminal, reason = assign_terminal(record)
    shown = printable(record.origin.path) or "a record"
    lines = [*_commented(f"Site file for faultassay, written for {shown}."), *_commented(_HEAD)]
    frequency = record.nominal_frequency_hz
    usable = frequency is not None and 10 <= frequency <= 100
    filled: dict[str, Any] = {"nominal_frequency_hz": frequency} if usable else {}
    suggested = {"name": printable(record.station)} if record.station.strip() else {}
    for name, field in Site.model_fields.items():
        if name == "terminal":
            continue
        lines += ["", f"[{name}]", *_about(field)]
        lines += _keys(field.annotation, filled, suggested)
    lines += ["", "[[terminal]]", *_commented(_reasons(record, terminal, reason))]
    lines += _keys(SiteTerminal, _assigned(terminal), _suggested(record, terminal))
    for name, field in SiteTerminal.model_fields.items():
        if _is_section(field):
            lines += ["", f"[terminal.{name}]", *_about(field), *_keys(field.annotation, {}, {})]
    lines += _other_terminals(record, terminal)
    lines += ["", "# The record's analog channels:"]
    lines += [f"#   {_channel_line(channel)}" for channel in record.analog]
    return "\n".join(lines) + "\n"


def _keys(model: Any, filled: Mapping[str, Any], suggested: Mapping[str, Any]) -> Iterator[str]:
    """Lines of a section's own keys: those filled in, and behind a # the others."""
    for name, field in model.model_fields.items():
        if _is_section(field):
            continue
        if name in filled:
            text = f"{name} = {_toml(filled[name])}"
        elif name == "polarity":
            text = f"{name} = {_toml(field.default)}"
        else:
            example = suggested.get(name, (field.examples or [""])[0])
            text = f"# {name} = {_toml(example)}"
        yield from _with_comment(text, field.description or "")


def _with_comment(text: str, comment: str) -> list[str]:
    if len(text) < _COMMENT_COLUMN and len(comment) <= _WIDTH - _COMMENT_COLUMN - 2:
        return [f"{text:<{_COMMENT_COLUMN}}# {comment}"]
    return [*_commented(comment), text]


def _assigned(terminal: Terminal | None) -> dict[str, Any]:
    if terminal is None:
        return {}
    keys: dict[str, Any] = {"name": terminal.name, "currents": _by_phase(terminal.currents)}
    if terminal.voltages:
        keys["voltages"] = _by_phase(terminal.voltages)
    if terminal.residual is not None:
        keys["residual"] = terminal.residual
    return keys


def _by_phase(ids: Iterable[str]) -> dict[str, str]:
    return dict(zip("abc", ids, strict=True))


def _suggested(record: Record, terminal: Terminal | None) -> dict[str, Any]:
    """Values to stand behind a #, of the record's own channels where these can be told."""
    keys: dict[str, Any] = {}
    pairs = _pairs(record)
    if pairs:
        keys["voltages_pp"] = pairs
    unknown = [c.id for c in record.analog if c.refusal is not None and c.refusal.code == "unknown-unit"]
    if unknown:
        keys["unit"] = dict.fromkeys(unknown[:3], "A")
    if terminal is not None:
        keys["ratio_correction"] = {terminal.currents[0]: 1.2}
    return keys


def _pairs(record: Record) -> dict[str, str]:
    """Channels of voltages between phases, where the names tell all three of one family of letters."""
    found: dict[str, str] = {}
    for channel in record.analog:
        role = role_of(channel)
        if role is not None and role.kind == "voltage" and len(role.phase) == 2:
            found.setdefault(role.phase, channel.id)
    order = phase_order({letter for pair in found for letter in pair})
    if order is None:
        return {}
    a, b, c = order
    wanted = {"ab": a + b, "bc": b + c, "ca": c + a}
    if not set(wanted.values()) <= set(found):
        return {}
    return {pair: found[written] for pair, written in wanted.items()}


def _reasons(record: Record, terminal: Terminal | None, reason: str) -> str:
    if terminal is None:
        return (
            f"Not sure: {reason}.\n"
            "Write into currents the channel of each phase, and into voltages those of the voltages to "
            "ground or into voltages_pp those between phases; the record's channels stand at the end of "
            "this file."
        )
    text = f"Channels by their names, confidence {terminal.confidence:.2f}: {reason}."
    if terminal.confidence < _SURE:
        text += (
            "\nNot sure: compare with the drawings. Where another circuit is meant, write its channels into "
            "currents, voltages and residual; those that were recognised besides follow below."
        )
    if not terminal.voltages and _pairs(record):
        text += "\nVoltages between phases are recognised: take the # off voltages_pp to use them."
    elif not terminal.voltages:
        text += (
            "\nWhere the record has voltages, write their channels into voltages, or into voltages_pp those "
            "between phases."
        )
    return text


def _other_terminals(record: Record, terminal: Terminal | None) -> list[str]:
    lines: list[str] = []
    for group in named_groups(record, "current"):
        channels = {phase.lower(): key for phase, key in group.items() if phase in "ABC"}
        if terminal is not None and tuple(channels.values()) == terminal.currents:
            continue
        lines += ["", "# [[terminal]]", f"# currents = {_toml(channels)}"]
        if "n" in group:
            lines.append(f"# residual = {_toml(group['n'])}")
    voltages = [
        {phase.lower(): key for phase, key in group.items() if phase in "ABC"}
        for group in named_groups(record, "voltage")
    ]
    others = [ids for ids in voltages if terminal is None or tuple(ids.values()) != terminal.voltages]
    if others:
        lines += ["", "# Other voltages of three phases:"]
        lines += [f"# voltages = {_toml(ids)}" for ids in others]
    if lines:
        lines[:0] = [
            "",
            *_commented("Other circuits that the names show, each to be a terminal if it is one:"),
        ]
    return lines


def _channel_line(channel: AnalogChannel) -> str:
    about = [printable(channel.unit) or "no unit", channel.side.replace("unstated", "side not stated")]
    about += [f"phase {printable(channel.phase)}"] if channel.phase.strip() else []
    about += [f"circuit {printable(channel.circuit)}"] if channel.circuit.strip() else []
    return f"{_toml(channel.id)}: {', '.join(about)}"


def _is_section(field: FieldInfo) -> bool:
    return isinstance(field.annotation, type) and issubclass(field.annotation, BaseModel)


def _about(field: FieldInfo) -> list[str]:
    """What a section is, from its model's docstring: what follows the name there."""
    said = (getattr(field.annotation, "__doc__", None) or "").strip().partition(": ")[2].splitlines()
    return _commented(said[0][:1].upper() + said[0][1:]) if said else []


def _commented(text: str) -> list[str]:
    """Lines of a comment, none longer than the page is wide."""
    lines = []
    for paragraph in text.splitlines():
        line = "#"
        for word in paragraph.split():
            if len(line) + 1 + len(word) > _WIDTH and line != "#":
                lines.append(line)
                line = "#"
            line += f" {word}"
        lines.append(line)
    return lines


def _toml(value: Any) -> str:
    if isinstance(value, str):
        return f'"{"".join(_letter(letter) for letter in value)}"'
    if isinstance(value, Mapping):
        parts = [f"{key if _BARE.fullmatch(key) else _toml(key)} = {_toml(v)}" for key, v in value.items()]
        return f"{{ {', '.join(parts)} }}"
    if isinstance(value, list | tuple):
        return f"[{', '.join(_toml(one) for one in value)}]"
    return repr(int(value)) if float(value).is_integer() else repr(float(value))


def _letter(letter: str) -> str:
    """A letter of a text in quotation marks; what does not print is spelled out."""
    if letter in '"\\':
        return f"\\{letter}"
    if letter.isprintable():
        return letter
    code = ord(letter)
    return f"\\u{code:04x}" if code < 0x10000 else f"\\U{code:08x}"
