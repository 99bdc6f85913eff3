"""From a drawn scenario to the network, the schedule and the instruments that it describes."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import fields
from typing import Any

import numpy as np

from analyzer.forge.amounts import Section, settled
from analyzer.forge.errors import ForgeError
from analyzer.forge.network import (
    Capacitor,
    Converter,
    Line,
    Load,
    Machine,
    Network,
    Source,
    Transformer,
)
from analyzer.forge.scenario import LineSection, NetworkSection, Ohms, SourceSection

_KEYS = {"z1_ohm": "z1", "z2_ohm": "z2", "z0_ohm": "z0", "z_ohm": "z"}


@contextmanager
def under(section: str, **renamed: str) -> Iterator[None]:
    """Let errors name the scenario's key: the section, and the field that the error names.

    Parameters
    ----------
    section : str
        Such as ``network.line``; empty for the scenario itself.
    **renamed : str
        Keys of fields that the scenario calls otherwise; whole ones where they are in another section.
    """
    try:
        yield
    except ForgeError as error:
        field = error.where.rsplit(".", 1)[-1]
        key = renamed.get(field, _KEYS.get(field, field))
        where = key if "." in key else ".".join(part for part in (section, key) if part)
        raise ForgeError(error.code, error.message, where=where, hint=error.hint) from error


def numbers(section: Section, *names: str) -> dict[str, Any]:
    """Return the named keys of a section that are given, by name; amounts as numbers."""
    values = {name: getattr(section, name) for name in names}
    return {name: _plain(value) for name, value in values.items() if value is not None}


def _plain(value: Any) -> Any:
    if isinstance(value, tuple):
        return tuple(_plain(item) for item in value)
    return value if isinstance(value, str) else settled(value)


def impedance(ohms: Ohms, key: str) -> complex:
    """Return the complex impedance of an `Ohms` section. [ohm].

    Raises
    ------
    ForgeError
        If X/R is not above zero.
    """
    given = numbers(ohms, "r_ohm", "x_ohm", "magnitude_ohm", "angle_deg", "x_over_r")
    ratio = given.get("x_over_r")
    if ratio is not None and ratio <= 0.0:
        raise ForgeError("bad-value", f"{ratio:g} is not above zero", where=f"{key}.x_over_r")
    if "magnitude_ohm" in given:
        angle = np.arctan(ratio) if ratio is not None else np.radians(given["angle_deg"])
        return complex(given["magnitude_ohm"] * np.exp(1j * angle))
    if ratio is None:
        return complex(given["r_ohm"], given["x_ohm"])
    if "r_ohm" in given:
        return complex(given["r_ohm"], given["r_ohm"] * ratio)
    return complex(given["x_ohm"] / ratio, given["x_ohm"])


def build_network(section: NetworkSection) -> Network:
    """Return the network of a drawn scenario.

    Parameters
    ----------
    section : NetworkSection

    Raises
    ------
    ForgeError
        If it is impossible; `where` is the scenario's key.
    """
    adjacent = section.adjacent
    parts: dict[str, Any] = {
        "line": _line(section.line, "network.line"),
        "source": _source(section.source, "network.source"),
        "remote": _source(section.remote, "network.remote"),
        "adjacent": None if adjacent is None else _line(adjacent, "network.adjacent"),
        "loads": _loads(section),
        "machine": _machine(section),
    }
    for name, cls in (("capacitor", Capacitor), ("converter", Converter), ("transformer", Transformer)):
        parts[name] = _element(section, name, cls)
    with under("network"):
        return Network(nominal_frequency_hz=section.frequency_hz, **parts)


def _element(section: NetworkSection, name: str, cls: type[Any]) -> Any:
    """An element whose section has the fields of its class."""
    part: Section | None = getattr(section, name)
    if part is None:
        return None
    with under(f"network.{name}"):
        return cls(**numbers(part, *(field.name for field in fields(cls))))


def _line(section: LineSection, key: str) -> Line:
    z1, z0 = impedance(section.z1, f"{key}.z1"), impedance(section.z0, f"{key}.z0")
    with under(key):
        return Line(z1_ohm=z1, z0_ohm=z0, **numbers(section, "length_km"))


def _source(section: SourceSection | None, key: str) -> Source | None:
    if section is None:
        return None
    z: dict[str, Any] = {
        f"{name}_ohm": impedance(ohms, f"{key}.{name}")
        for name in ("z1", "z2", "z0")
        if (ohms := getattr(section, name)) is not None
    }
    with under(key):
        return Source(**numbers(section, "voltage_rms_v", "angle_deg"), **z)


def _loads(section: NetworkSection) -> tuple[Load, ...]:
    loads = []
    for k, load in enumerate(section.loads):
        key = f"network.loads[{k}]"
        z_ohm = impedance(load.z, f"{key}.z")
        with under(key):
            loads.append(Load(z_ohm=z_ohm, **numbers(load, "place", "star", "name")))
    return tuple(loads)


def _machine(section: NetworkSection) -> Machine | None:
    if section.machine is None:
        return None
    names = {field.name for field in fields(Machine)} - {"z0_ohm"}
    z0 = section.machine.z0
    z0_ohm = None if z0 is None else impedance(z0, "network.machine.z0")
    with under("network.machine"):
        return Machine(**numbers(section.machine, *sorted(names)), z0_ohm=z0_ohm)
