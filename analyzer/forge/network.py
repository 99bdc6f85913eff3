"""What a forged three-phase network consists of: sources, line, loads and the rest, as frozen data."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from analyzer.forge.errors import (
    impossible,
    require_at_least,
    require_finite,
    require_passive,
    require_positive,
)

Place = Literal["bus", "end"]
Star = Literal["grounded", "open"]
_RESERVED = frozenset({"capacitor", "transformer", "line", "remote", "adjacent", "fault"})


def phase_matrices(
    z1_ohm: complex, z2_ohm: complex, z0_ohm: complex, *, nominal_frequency_hz: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    r"""Return the phase-domain R and L that show given sequence impedances at nominal frequency.

    Parameters
    ----------
    z1_ohm, z2_ohm, z0_ohm : complex
        Positive-, negative- and zero-sequence impedance. [ohm]
    nominal_frequency_hz : float
        Frequency at which they hold. [Hz]

    Returns
    -------
    r_ohm, l_h : ndarray, shape (3, 3)
        Resistance and inductance matrices. [ohm, H]

    Notes
    -----
    With Z2 = Z1 these are the transposed matrices, self (Z0 + 2 Z1)/3 and mutual (Z0 - Z1)/3.
    A real circulant matrix has conjugate eigenvalues for the two rotating sequences, so Z2 != Z1 needs
    a skew-symmetric circulant part as well: (X1 - X2)/2 in R, which is lossless like a gyrator, and
    (R2 - R1)/(2 omega) in L. This meets all three sequence impedances exactly at nominal frequency with
    constant matrices. Its price: the offset of such a source turns slowly, with a complex exponent, where a
    real machine's saliency would show a second harmonic instead.

    References
    ----------
    Symmetrical components as in C. L. Fortescue, Trans. AIEE 37 (1918); the skew part is own derivation.
    """
    omega = 2.0 * np.pi * nominal_frequency_hz
    mean = 0.5 * (z1_ohm + z2_ohm)
    common, own = (z0_ohm - mean) / 3.0, mean
    skew = np.array([[0.0, -1.0, 1.0], [1.0, 0.0, -1.0], [-1.0, 1.0, 0.0]]) / np.sqrt(3.0)
    r_ohm = np.eye(3) * own.real + common.real + skew * (0.5 * (z1_ohm.imag - z2_ohm.imag))
    l_h = (np.eye(3) * own.imag + common.imag + skew * (0.5 * (z2_ohm.real - z1_ohm.real))) / omega
    return r_ohm, l_h


def _require_damped(z1_ohm: complex, z2_ohm: complex, where: str) -> None:
    # The mode of the skew part is (r + js)/(l + jm); it must decay.
    if (z1_ohm.real + z2_ohm.real) * (z1_ohm.imag + z2_ohm.imag) + (z1_ohm.imag - z2_ohm.imag) * (
        z2_ohm.real - z1_ohm.real
    ) < 0.0:
        raise impossible(where, "differs so much from z1_ohm that no passive circuit shows both")


@dataclass(frozen=True, slots=True, kw_only=True)
class Source:
    """A symmetrical voltage behind sequence impedances, star point solidly grounded through `z0_ohm`.

    Parameters
    ----------
    voltage_rms_v : float
        Phase-to-ground electromotive force. [V]
    angle_deg : float
        Angle of phase A: e = sqrt2 V cos(omega t + angle), on the time base of the record.
    z1_ohm, z0_ohm : complex
        Impedances at nominal frequency, X > 0. [ohm]
    z2_ohm : complex or None
        Negative-sequence impedance; None means equal to `z1_ohm`. See `phase_matrices` for another value.

    Raises
    ------
    ForgeError
        If a value is not physical.
    """

    voltage_rms_v: float
    angle_deg: float = 0.0
    z1_ohm: complex
    z0_ohm: complex
    z2_ohm: complex | None = None

    def __post_init__(self) -> None:
        require_at_least(self.voltage_rms_v, 0.0, "source.voltage_rms_v")
        require_finite(self.angle_deg, "source.angle_deg")
        require_passive(self.z1_ohm, "source.z1_ohm", inductive=True)
        require_passive(self.z0_ohm, "source.z0_ohm", inductive=True)
        require_passive(self.negative_ohm, "source.z2_ohm", inductive=True)
        _require_damped(self.z1_ohm, self.negative_ohm, "source.z2_ohm")

    @property
    def negative_ohm(self) -> complex:
        """Negative-sequence impedance at nominal frequency. [ohm]."""
        return self.z1_ohm if self.z2_ohm is None else self.z2_ohm


@dataclass(frozen=True, slots=True, kw_only=True)
class Line:
    """A transposed line without capacitance.

    Parameters
    ----------
    z1_ohm, z0_ohm : complex
        Total series impedances at nominal frequency. [ohm]
    length_km : float or None
        For reports only; None where it does not matter. [km]

    Raises
    ------
    ForgeError
        If an impedance is zero or negative.
    """

    z1_ohm: complex
    z0_ohm: complex
    length_km: float | None = None

    def __post_init__(self) -> None:
        require_passive(self.z1_ohm, "line.z1_ohm")
        require_passive(self.z0_ohm, "line.z0_ohm")
        if self.length_km is not None:
            require_positive(self.length_km, "line.length_km")


@dataclass(frozen=True, slots=True, kw_only=True)
class Load:
    """A passive series R-L load in star.

    Parameters
    ----------
    z_ohm : complex
        Impedance per phase at nominal frequency. [ohm]
    place : {'bus', 'end'}
        At the recorder's bus (behind the terminal) or at the line's far end.
    star : {'open', 'grounded'}
        Its star point.
    name : str
        By which a schedule switches it; unique in the network.

    Raises
    ------
    ForgeError
        If the impedance is zero or negative, or the name is taken by another kind of element.
    """

    z_ohm: complex
    place: Place = "end"
    star: Star = "open"
    name: str = "load"

    def __post_init__(self) -> None:
        require_passive(self.z_ohm, f"{self.name}.z_ohm")
        _require_word(self.place, ("bus", "end"), f"{self.name}.place")
        _require_word(self.star, ("open", "grounded"), f"{self.name}.star")
        if self.name in _RESERVED:
            raise impossible("load.name", f"{self.name!r} is the name of another element")


@dataclass(frozen=True, slots=True, kw_only=True)
class Capacitor:
    """A shunt bank in star at the bus, with the resistance and inductance of its connection.

    Parameters
    ----------
    capacitance_f : float
        Per phase. [F]
    r_ohm, l_h : float
        In series per phase; not both zero, since a bolted fault at the bus would discharge it at once.
    star : {'grounded', 'open'}
        Its star point.

    Raises
    ------
    ForgeError
        If a value is not physical.
    """

    capacitance_f: float
    r_ohm: float
    l_h: float
    star: Star = "grounded"

    def __post_init__(self) -> None:
        require_positive(self.capacitance_f, "capacitor.capacitance_f")
        require_at_least(self.r_ohm, 0.0, "capacitor.r_ohm")
        require_at_least(self.l_h, 0.0, "capacitor.l_h")
        if self.r_ohm == 0.0 and self.l_h == 0.0:
            raise impossible("capacitor.l_h", "resistance and inductance are both zero")
        _require_word(self.star, ("grounded", "open"), "capacitor.star")


@dataclass(frozen=True, slots=True, kw_only=True)
class Machine:
    r"""A rotating machine whose alternating component decays after a fault.

    Parameters
    ----------
    kind : {'synchronous', 'induction'}
        A synchronous machine falls to a steady short-circuit current, an induction machine to nothing.
    emf_rms_v, emf_angle_deg : float
        Internal voltage behind the sub-transient impedance before the fault. [V, deg]
    r_ohm, x_subtransient_ohm : float
        Constant series impedance of the model. [ohm]
    x_transient_ohm, x_synchronous_ohm : float or None
        Of a synchronous machine. [ohm]
    subtransient_open_s, transient_open_s : float or None
        Open-circuit time constants T''d0 and T'd0; an induction machine has the first only, the open-circuit
        time constant of its rotor. [s]
    x_rotor_open_ohm : float or None
        Of an induction machine: reactance with the rotor open (magnetising plus stator leakage). [ohm]
    z0_ohm : complex or None
        None leaves the star point open. [ohm]
    place : {'bus', 'end'}
        Where it is connected.

    Raises
    ------
    ForgeError
        If the reactances are not in order or a constant is missing.

    Notes
    -----
    A voltage behind R + jX'' whose amplitude follows, from inception at t0,
    ``E(t)/(X''+Xe) = (I'' - I') exp(-t/T'') + (I' - I) exp(-t/T') + I`` with
    ``I'' = E''/(X''+Xe)``, ``I' = E'/(X'+Xe)``, ``I = E/(X+Xe)``,
    ``T' = T'd0 (X'+Xe)/(X+Xe)`` and ``T'' = T''d0 (X''+Xe)/(X'+Xe)``: the two-exponential envelope of the
    literature, whose Xe is what the machine's positive sequence sees of the faulted network. The internal
    voltages E' and E follow from the load current before the fault. The induction machine is the same with
    one rotor circuit and no excitation: E(t) = E'' exp(-t/T''), T'' = T0 (X''+Xe)/(X0+Xe). Negative sequence
    is R + jX''. Field forcing, saliency and the recovery after clearing are left out: the decay runs on.

    References
    ----------
    Two-exponential envelope and closed-circuit constants: P. C. Sen, Principles of Electric Machines and
    Power Electronics, 3rd ed., p. 458 (constants); external reactance added as in E. W. Kimbark, Power System
    Stability vol. III, and IEC 60909-0 (from memory).
    """

    kind: Literal["synchronous", "induction"]
    emf_rms_v: float
    emf_angle_deg: float = 0.0
    r_ohm: float
    x_subtransient_ohm: float
    subtransient_open_s: float
    x_transient_ohm: float | None = None
    x_synchronous_ohm: float | None = None
    transient_open_s: float | None = None
    x_rotor_open_ohm: float | None = None
    z0_ohm: complex | None = None
    place: Place = "bus"

    def __post_init__(self) -> None:
        _require_word(self.kind, ("synchronous", "induction"), "machine.kind")
        _require_word(self.place, ("bus", "end"), "machine.place")
        require_at_least(self.emf_rms_v, 0.0, "machine.emf_rms_v")
        require_finite(self.emf_angle_deg, "machine.emf_angle_deg")
        require_at_least(self.r_ohm, 0.0, "machine.r_ohm")
        require_positive(self.x_subtransient_ohm, "machine.x_subtransient_ohm")
        require_positive(self.subtransient_open_s, "machine.subtransient_open_s")
        if self.z0_ohm is not None:
            require_passive(self.z0_ohm, "machine.z0_ohm", inductive=True)
        names = (
            ("x_transient_ohm", "x_synchronous_ohm", "transient_open_s")
            if self.kind == "synchronous"
            else ("x_rotor_open_ohm",)
        )
        for name in names:
            value = getattr(self, name)
            if value is None:
                raise impossible(f"machine.{name}", f"an {self.kind} machine needs it".replace("an s", "a s"))
            require_positive(value, f"machine.{name}")
        ladder = [
            self.x_subtransient_ohm,
            self.x_transient_ohm,
            self.x_synchronous_ohm,
            self.x_rotor_open_ohm,
        ]
        held = [x for x in ladder if x is not None]
        if held != sorted(held):
            raise impossible(
                "machine.x_subtransient_ohm", "reactances must rise from sub-transient to steady"
            )


@dataclass(frozen=True, slots=True, kw_only=True)
class Converter:
    """A source at the bus whose controls hold its current, positive sequence only.

    Parameters
    ----------
    current_rms_a, angle_deg : float
        Current into the bus before the fault, angle on the record's time base. [A, deg]
    limit_rms_a, limit_angle_deg : float
        The current its limiter settles at while a fault lasts. [A, deg]
    delay_s, response_s : float
        After inception it goes on unchanged for `delay_s`, then its phasor moves to the limit with the
        time constant `response_s`. When the fault is cleared it returns in the same way, without delay. [s]

    Raises
    ------
    ForgeError
        If a value is not physical.

    Notes
    -----
    The law is stated, not measured: the synchronisation holds the angle it had before the fault, the limiter
    is a first-order lag of the current's phasor, and no negative sequence is injected. The current is thus
    known beforehand and the network stays linear and exactly solved. A limit of 1.1 to 1.5 times rated is
    usual (eepowerschool.com/?p=1803).
    """

    current_rms_a: float
    angle_deg: float = 0.0
    limit_rms_a: float
    limit_angle_deg: float
    delay_s: float = 0.0
    response_s: float

    def __post_init__(self) -> None:
        require_at_least(self.current_rms_a, 0.0, "converter.current_rms_a")
        require_at_least(self.limit_rms_a, 0.0, "converter.limit_rms_a")
        require_finite(self.angle_deg, "converter.angle_deg")
        require_finite(self.limit_angle_deg, "converter.limit_angle_deg")
        require_at_least(self.delay_s, 0.0, "converter.delay_s")
        require_positive(self.response_s, "converter.response_s")


@dataclass(frozen=True, slots=True, kw_only=True)
class Transformer:
    r"""An unloaded bank of three single-phase cores in star, switched in by the schedule.

    Parameters
    ----------
    r_ohm : float
        Winding resistance per phase. [ohm]
    air_core_h : float
        Inductance of the saturated winding, leakage included. [H]
    knee_flux_vs : float
        Flux linkage of the core at full saturation. [V s]
    knee_current_a : float
        Magnetising current that brings the core to tanh(1) = 76 % of it. [A]
    remanence_vs : tuple of three float
        Flux linkage of each core before it is switched in. [V s]
    place : {'bus', 'end'}
        Where it is connected.
    star : {'grounded', 'open'}
        Star point of the energised winding.

    Raises
    ------
    ForgeError
        If a value is not physical or the remanence lies beyond the knee flux.

    Notes
    -----
    Flux linkage of a phase: ``air_core_h * i + knee_flux_vs * tanh(i / knee_current_a)``, single-valued.
    Remanence enters as the flux that is conserved when the poles close, so the current steps to the small
    magnetising current that belongs to it. Hysteresis, core loss and a delta winding are left out.
    """

    r_ohm: float
    air_core_h: float
    knee_flux_vs: float
    knee_current_a: float
    remanence_vs: tuple[float, float, float] = (0.0, 0.0, 0.0)
    place: Place = "end"
    star: Star = "grounded"

    def __post_init__(self) -> None:
        require_at_least(self.r_ohm, 0.0, "transformer.r_ohm")
        require_positive(self.air_core_h, "transformer.air_core_h")
        require_positive(self.knee_flux_vs, "transformer.knee_flux_vs")
        require_positive(self.knee_current_a, "transformer.knee_current_a")
        _require_word(self.place, ("bus", "end"), "transformer.place")
        _require_word(self.star, ("grounded", "open"), "transformer.star")
        for flux in self.remanence_vs:
            require_finite(flux, "transformer.remanence_vs")
            if abs(flux) >= self.knee_flux_vs:
                raise impossible("transformer.remanence_vs", "lies beyond the knee flux")


@dataclass(frozen=True, slots=True, kw_only=True)
class Network:
    """The recorder's bus with what is connected behind it and the line it protects.

    Parameters
    ----------
    nominal_frequency_hz : float
        At which all impedances are given. [Hz]
    line : Line
        From the bus to the far end; its current is recorded.
    source : Source or None
        Behind the bus; None only where a machine or a converter feeds it.
    remote : Source or None
        At the far end; its `angle_deg` less the source's is the load angle.
    adjacent : Line or None
        An unloaded feeder at the same bus, on which a fault behind the recorder can lie.
    loads : tuple of Load
        Passive loads.
    capacitor, machine, converter, transformer : optional
        See their classes.

    Raises
    ------
    ForgeError
        If nothing feeds the bus or two loads share a name.
    """

    nominal_frequency_hz: float
    line: Line
    source: Source | None
    remote: Source | None = None
    adjacent: Line | None = None
    loads: tuple[Load, ...] = ()
    capacitor: Capacitor | None = None
    machine: Machine | None = None
    converter: Converter | None = None
    transformer: Transformer | None = None

    def __post_init__(self) -> None:
        require_positive(self.nominal_frequency_hz, "network.nominal_frequency_hz")
        if self.source is None and self.machine is None and self.converter is None:
            raise impossible("network.source", "nothing feeds the bus")
        names = [load.name for load in self.loads]
        if len(set(names)) != len(names):
            raise impossible("network.loads", "two loads share a name")


def _require_word(value: str, words: tuple[str, ...], where: str) -> None:
    if value not in words:
        raise impossible(where, f"must be one of {', '.join(words)}, got {value!r}")
