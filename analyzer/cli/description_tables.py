"""The description of a record on a terminal, 80 columns wide if need be."""

from __future__ import annotations

from typing import Any

from rich.console import Console
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from analyzer.cli.figures import engineering
from analyzer.cli.messages import safe
from analyzer.cli.tables import plain_table, show_problems, show_titled

_SHOWN_RATES = 4
_SHOWN_CHANGES = 6


def show_description(document: dict[str, Any], screen: Console) -> None:
    """Print a description; see :mod:`analyzer.cli.description` for its fields."""
    record = document["record"]
    screen.print(safe(record["path"], style="bold"), overflow="fold")
    screen.print(Padding(_heading(record), (0, 0, 0, 2)))
    if record["analog"]:
        show_titled(
            "Analog channels, range in primary values", _analog_table(record["analog"], screen.width), screen
        )
    if record["digital"]:
        _show_digital(record["digital"], screen)
    if record["problems"]:
        show_problems(record["problems"], record["path"], screen)
    else:
        screen.print(Text("  No problems found."))


def _heading(record: dict[str, Any]) -> Table:
    grid = Table.grid(padding=(0, 2))
    grid.add_column()
    grid.add_column(overflow="fold")
    clock = record["clock"]
    codes = ", ".join(
        f"{word} {clock[key]}"
        for key, word in (("time_code", "time code"), ("local_code", "local code"))
        if clock[key]
    )
    trigger = record["trigger_time"] or "not stated"
    if record["trigger_s"] is not None:
        side = "after" if record["trigger_s"] >= 0 else "before"
        trigger += f", {engineering(abs(record['trigger_s']), 's')} {side} the first sample"
    nominal = record["nominal_frequency_hz"]
    rows = [
        ("Station", record["station"] or "not stated"),
        ("Device", record["device"] or "not stated"),
        ("Format", _format(record)),
        ("Start", record["start_time"] or "not stated"),
        ("Trigger", trigger),
        ("Clock", clock["quality"] + (f"; {codes}" if codes else "")),
        ("Frequency", f"{nominal:g} Hz nominal" if nominal is not None else "not stated"),
        ("Samples", f"{record['n_samples']} over {engineering(record['duration_s'], 's')}"),
        *(("Sampling" if k == 0 else "", line) for k, line in enumerate(_rates(record["rates"]))),
        ("Channels", f"{len(record['analog'])} analog, {len(record['digital'])} digital"),
    ]
    for label, value in rows:
        grid.add_row(Text(label), safe(value))
    return grid


def _format(record: dict[str, Any]) -> str:
    name = "COMTRADE" if record["format"] == "comtrade" else record["format"]
    revision, encoding = record["revision"], record["encoding"]
    return name + (f" {revision}" if revision else "") + (f", {encoding}" if encoding else "")


def _rates(rates: list[dict[str, Any]]) -> list[str]:
    if not rates:
        return ["no rate"]
    if len(rates) == 1:
        return [f"{rates[0]['rate_hz']:g} Hz"]
    lines = [
        f"{rate['rate_hz']:g} Hz from {engineering(rate['start_s'], 's')}, {rate['n_samples']} samples"
        for rate in rates[:_SHOWN_RATES]
    ]
    rest = rates[_SHOWN_RATES:]
    if rest:
        values = [rate["rate_hz"] for rate in rest]
        span = f"{min(values):g} Hz" + (f" to {max(values):g} Hz" if max(values) > min(values) else "")
        lines.append(f"and {len(rest)} more stretches, {span}")
    return lines


def _analog_table(channels: list[dict[str, Any]], width: int) -> Table:
    """Names give way when the table is too wide; numbers never do."""
    columns = [
        ("channel", 8, [safe(channel["id"], limit=64) for channel in channels]),
        ("ph", 2, [safe(channel["phase"], limit=16) for channel in channels]),
        ("circuit", 4, [safe(channel["circuit"], limit=64) for channel in channels]),
        ("unit", 4, [safe(channel["unit"], limit=16) for channel in channels]),
        ("side", 12, [Text(_side(channel)) for channel in channels]),
    ]
    columns = [one for one in columns if any(one[2])]
    numbers = [
        ("lowest", [Text(_end(channel, "minimum")) for channel in channels]),
        ("highest", [Text(_end(channel, "maximum")) for channel in channels]),
        ("missing", [Text(str(channel["missing"] or "")) for channel in channels]),
    ]
    numbers = [one for one in numbers if one[0] != "missing" or any(one[1])]
    names_width = width - sum(_needed(title, cells) + 2 for title, cells in numbers) - 2 * len(columns)
    table = plain_table()
    wanted = [_needed(title, cells) for title, _, cells in columns]
    for (title, _, _), cells in zip(
        columns, _narrowed(wanted, [least for _, least, _ in columns], names_width), strict=True
    ):
        table.add_column(title, width=cells, no_wrap=True, overflow="ellipsis")
    for title, texts in numbers:
        table.add_column(title, width=_needed(title, texts), no_wrap=True, justify="right")
    for row in zip(*(cells for _, _, cells in columns), *(cells for _, cells in numbers), strict=True):
        table.add_row(*row)
    return table


def _needed(title: str, cells: list[Text]) -> int:
    return max(len(title), *(cell.cell_len for cell in cells))


def _narrowed(wanted: list[int], least: list[int], total: int) -> list[int]:
    """Return widths that sum to `total` if they can, taken off the widest columns first."""
    widths = list(wanted)
    while sum(widths) > total:
        room = [(width if width > low else 0) for width, low in zip(widths, least, strict=True)]
        widest = room.index(max(room))
        if not room[widest]:
            break
        widths[widest] -= 1
    return widths


def _end(channel: dict[str, Any], key: str) -> str:
    return "-" if channel[key] is None else engineering(channel[key], channel["si_unit"] or "1")


def _side(channel: dict[str, Any]) -> str:
    primary, secondary = channel["rated_primary"], channel["rated_secondary"]
    ratio = f" {primary:g}/{secondary:g}" if primary and secondary and primary != secondary else ""
    return {"primary": "prim.", "secondary": "sec."}.get(channel["side"], "unstated") + ratio


def _show_digital(channels: list[dict[str, Any]], screen: Console) -> None:
    moving = [channel for channel in channels if channel["n_changes"]]
    if not moving:
        screen.print(Text(f"  None of the {len(channels)} digital channels changes."))
        return
    table = plain_table()
    table.add_column("channel", overflow="ellipsis", no_wrap=True, max_width=24)
    table.add_column("at first", justify="right")
    table.add_column("changes", overflow="fold")
    for channel in moving:
        table.add_row(
            safe(channel["id"], limit=64), Text(str(channel["initial_state"])), Text(_changes(channel))
        )
    show_titled(f"Digital channels that change, {len(moving)} of {len(channels)}", table, screen)


def _changes(channel: dict[str, Any]) -> str:
    shown = channel["changes"][:_SHOWN_CHANGES]
    text = ", ".join(f"{change['state']} at {engineering(change['time_s'], 's')}" for change in shown)
    more = channel["n_changes"] - len(shown)
    return f"{text}, and {more} more" if more > 0 else text
