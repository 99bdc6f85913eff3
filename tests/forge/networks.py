"""Invented networks and closed forms that the forge tests share."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from analyzer.forge.network import Line, Network, Source
from analyzer.forge.schedule import Fault

ROTATION = np.exp(-2j * np.pi / 3.0 * np.arange(3))


def radial(*, frequency_hz: float = 50.0, angle_deg: float = 17.0, **more: object) -> Network:
    return Network(
        nominal_frequency_hz=frequency_hz,
        line=Line(z1_ohm=0.5 + 3.0j, z0_ohm=1.2 + 9.0j),
        source=Source(voltage_rms_v=11547.0, angle_deg=angle_deg, z1_ohm=0.3 + 4.0j, z0_ohm=0.5 + 6.0j),
        **more,  # type: ignore[arg-type]
    )


def emf(network: Network) -> NDArray[np.complex128]:
    assert network.source is not None
    return network.source.voltage_rms_v * np.exp(1j * np.radians(network.source.angle_deg)) * ROTATION


def total(network: Network, fault: Fault) -> tuple[complex, complex]:
    assert network.source is not None
    return (
        network.source.z1_ohm + fault.fraction * network.line.z1_ohm,
        network.source.z0_ohm + fault.fraction * network.line.z0_ohm,
    )


def rl_current(
    t_s: NDArray[np.float64],
    *,
    e_rms: complex,
    z_ohm: complex,
    omega: float,
    start_s: float,
    before: float = 0.0,
) -> NDArray[np.float64]:
    """Current of an R-L loop put onto sqrt2 Re(e exp(j omega t)) at start_s with the current `before`."""
    phasor = e_rms / z_ohm

    def steady(t: NDArray[np.float64] | float) -> NDArray[np.float64]:
        return np.asarray(np.sqrt(2.0) * (phasor * np.exp(1j * omega * np.asarray(t))).real)

    decay = np.exp(-(t_s - start_s) * z_ohm.real * omega / z_ohm.imag)
    return np.asarray(steady(t_s) + (before - steady(start_s)) * decay)


def fault_loops(fault: Fault, z1: complex, z0: complex) -> list[tuple[NDArray[np.float64], complex]]:
    """The driven loops of a fault type: weights of the phases, and impedance (table of the design)."""
    rp, rg = fault.phase_resistance_ohm, fault.ground_resistance_ohm
    unit = np.eye(3)
    if fault.type == "ABC":
        return [(unit[p], z1 + rp) for p in range(3)]
    if len(fault.phases) == 1:
        return [(unit[fault.phases[0]], (2.0 * z1 + z0) / 3.0 + rp + rg)]
    a, b = fault.phases
    loops = [(unit[a] - unit[b], z1 + rp)]
    if fault.grounded:
        loops.append((unit[a] + unit[b], (z1 + 2.0 * z0) / 3.0 + rp + 2.0 * rg))
    return loops
