"""What drives a network: rotating phasors that may decay, on a common frequency that may move."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from analyzer.forge.circuit import POSITIVE, Circuit, ComplexArray
from analyzer.forge.network import Converter, Machine, Network
from analyzer.forge.reduction import StateSpace
from analyzer.forge.schedule import FrequencyRamp, Schedule


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Drive:
    """``sqrt2 Re(phasor exp(sigma (t - since)) exp(j theta(t)))`` in every branch.

    Parameters
    ----------
    sigma_per_s : float
        Decay, zero or negative. [1/s]
    since_s : float
        Instant from which it decays. [s]
    emf_rms_v : ndarray of complex, shape (n_branches,)
        Electromotive forces. [V]
    injection_rms_a : ndarray of complex, shape (n_injected,)
        Prescribed currents. [A]
    """

    sigma_per_s: float
    since_s: float
    emf_rms_v: ComplexArray
    injection_rms_a: ComplexArray


@dataclass(frozen=True, slots=True, kw_only=True)
class FrequencyCourse:
    """The common frequency over time: constant, and linear within ramps.

    Parameters
    ----------
    initial_hz : float
        At the start of the record. [Hz]
    ramps : tuple of FrequencyRamp
        In order, not overlapping.
    """

    initial_hz: float
    ramps: tuple[FrequencyRamp, ...] = ()

    def omega_rad_s(self, time_s: float) -> float:
        """Return the angular frequency at an instant. [rad/s]."""
        hz = self.initial_hz
        for ramp in self.ramps:
            hz += ramp.rate_hz_per_s * (min(max(time_s, ramp.time_s), ramp.end_s) - ramp.time_s)
        return 2.0 * np.pi * hz

    def theta_rad(self, time_s: float) -> float:
        """Return the angle travelled since the record's start. [rad]."""
        angle = self.initial_hz * time_s
        for ramp in self.ramps:
            inside = min(max(time_s, ramp.time_s), ramp.end_s) - ramp.time_s
            after = max(time_s - ramp.end_s, 0.0)
            angle += ramp.rate_hz_per_s * (0.5 * inside**2 + (ramp.end_s - ramp.time_s) * after)
        return 2.0 * np.pi * angle

    def chirp_rad_s2(self, time_s: float) -> float:
        """Return the rate of the angular frequency from `time_s` on. [rad/s^2]."""
        for ramp in self.ramps:
            if ramp.time_s <= time_s < ramp.end_s:
                return 2.0 * np.pi * ramp.rate_hz_per_s
        return 0.0


def frequency_course(network: Network, schedule: Schedule) -> FrequencyCourse:
    """Return the course that a schedule prescribes."""
    initial = network.nominal_frequency_hz if schedule.frequency_hz is None else schedule.frequency_hz
    return FrequencyCourse(
        initial_hz=initial, ramps=tuple(h for h in schedule.happenings if isinstance(h, FrequencyRamp))
    )


def _phasor(rms: float, angle_deg: float) -> complex:
    return complex(rms * np.exp(1j * np.radians(angle_deg)))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class DriveState:
    """All drives at a stage of the story; a stage's successor is made by the methods below.

    Parameters
    ----------
    network : Network
        Whose sources these are.
    circuit : Circuit
        Whose branches these are.
    machine : tuple of (sigma, phasor)
        Parts of the machine's internal voltage, decaying since `machine_since_s`.
    converter_target, converter_deviation : complex
        Phasor that the converter's current tends to, and its distance from it at `converter_since_s`.
    """

    network: Network
    circuit: Circuit
    machine: tuple[tuple[float, complex], ...] = ()
    machine_since_s: float = 0.0
    machine_decays: bool = False
    converter_target: complex = 0j
    converter_deviation: complex = 0j
    converter_since_s: float = 0.0

    @property
    def drives(self) -> tuple[Drive, ...]:
        """The drives of this stage."""
        circuit, network = self.circuit, self.network
        quiet = np.zeros(len(circuit.injected), dtype=np.complex128)
        still = np.zeros_like(circuit.emf_rms_v)
        steady_current = quiet if network.converter is None else self.converter_target * POSITIVE
        drives = [
            Drive(sigma_per_s=0.0, since_s=0.0, emf_rms_v=circuit.emf_rms_v, injection_rms_a=steady_current)
        ]
        for sigma, phasor in self.machine:
            emf = still.copy()
            emf[circuit.groups["machine"]] = phasor * POSITIVE
            drives.append(
                Drive(sigma_per_s=sigma, since_s=self.machine_since_s, emf_rms_v=emf, injection_rms_a=quiet)
            )
        if network.converter is not None and self.converter_deviation != 0j:
            drives.append(
                Drive(
                    sigma_per_s=-1.0 / network.converter.response_s,
                    since_s=self.converter_since_s,
                    emf_rms_v=still,
                    injection_rms_a=self.converter_deviation * POSITIVE,
                )
            )
        return tuple(drives)

    def with_machine_decaying(
        self, before: StateSpace, after: StateSpace, *, omega: float, time_s: float
    ) -> DriveState:
        """Return the stage in which the machine's voltage decays, given the networks around inception."""
        machine = self.network.machine
        if machine is None or self.machine_decays:
            return self
        load_current = _machine_current(before, self, omega)
        parts = machine_decrement(
            machine,
            load_current_a=load_current,
            external_x_ohm=_external_reactance(after, self, omega),
            omega_ratio=omega / (2.0 * np.pi * self.network.nominal_frequency_hz),
        )
        return replace(self, machine=parts, machine_since_s=time_s, machine_decays=True)

    def with_converter_target(self, target: complex, *, time_s: float) -> DriveState:
        """Return the stage in which the converter's current moves to another phasor from `time_s` on."""
        if self.network.converter is None:
            return self
        elapsed = time_s - self.converter_since_s
        now = self.converter_target + self.converter_deviation * np.exp(
            -elapsed / self.network.converter.response_s
        )
        return replace(
            self, converter_target=target, converter_deviation=complex(now - target), converter_since_s=time_s
        )


def initial_drives(network: Network, circuit: Circuit) -> DriveState:
    """Return the drives of the load-flow steady state."""
    machine = network.machine
    parts = () if machine is None else ((0.0, _phasor(machine.emf_rms_v, machine.emf_angle_deg)),)
    target = 0j if network.converter is None else prefault_current(network.converter)
    return DriveState(network=network, circuit=circuit, machine=parts, converter_target=target)


def prefault_current(converter: Converter) -> complex:
    """Return the phasor a converter holds without a fault. [A rms]."""
    return _phasor(converter.current_rms_a, converter.angle_deg)


def limited_current(converter: Converter) -> complex:
    """Return the phasor a converter's limiter settles at. [A rms]."""
    return _phasor(converter.limit_rms_a, converter.limit_angle_deg)


def machine_decrement(
    machine: Machine, *, load_current_a: complex, external_x_ohm: float, omega_ratio: float = 1.0
) -> tuple[tuple[float, complex], ...]:
    """Return the parts of a machine's internal voltage during a fault.

    Parameters
    ----------
    machine : Machine
        Its reactances and open-circuit time constants.
    load_current_a : complex
        Phasor out of the machine before the fault. [A rms]
    external_x_ohm : float
        Reactance between its terminals and the fault, not negative. [ohm]
    omega_ratio : float
        Actual over nominal frequency.

    Returns
    -------
    tuple of (sigma, phasor)
        Each part is ``phasor exp(sigma t)``, they sum to the voltage before the fault. [1/s, V rms]

    Notes
    -----
    See `Machine`.
    """
    x2 = machine.x_subtransient_ohm * omega_ratio
    xe = max(external_x_ohm, 0.0)
    emf2 = _phasor(machine.emf_rms_v, machine.emf_angle_deg)
    if machine.kind == "induction":
        open_x = _held(machine.x_rotor_open_ohm) * omega_ratio
        return ((-1.0 / (machine.subtransient_open_s * (x2 + xe) / (open_x + xe)), emf2),)
    x1, x0 = _held(machine.x_transient_ohm) * omega_ratio, _held(machine.x_synchronous_ohm) * omega_ratio
    emf1 = emf2 + 1j * (x1 - x2) * load_current_a
    emf0 = emf2 + 1j * (x0 - x2) * load_current_a
    steady = emf0 * (x2 + xe) / (x0 + xe)
    transient = emf1 * (x2 + xe) / (x1 + xe)
    transient_s = _held(machine.transient_open_s) * (x1 + xe) / (x0 + xe)
    subtransient_s = machine.subtransient_open_s * (x2 + xe) / (x1 + xe)
    return (
        (0.0, steady),
        (-1.0 / transient_s, transient - steady),
        (-1.0 / subtransient_s, emf2 - transient),
    )


def _held(value: float | None) -> float:
    # Machine checks on construction that the constants of its kind are there.
    assert value is not None
    return value


def _machine_current(space: StateSpace, stage: DriveState, omega: float) -> complex:
    total = np.zeros(len(stage.circuit.emf_rms_v), dtype=np.complex128)
    for drive in stage.drives:
        w = space.response(drive.emf_rms_v, drive.injection_rms_a, 1j * omega)
        g, prescribed = space.forcing(drive.emf_rms_v, drive.injection_rms_a, 1j * omega)
        total += space.i_w @ w + space.i_g @ g + prescribed
    return _positive_part(total[stage.circuit.groups["machine"]])


def _external_reactance(space: StateSpace, stage: DriveState, omega: float) -> float:
    machine = stage.network.machine
    assert machine is not None
    emf = np.zeros_like(stage.circuit.emf_rms_v)
    emf[stage.circuit.groups["machine"]] = POSITIVE
    quiet = np.zeros(len(stage.circuit.injected), dtype=np.complex128)
    w = space.response(emf, quiet, 1j * omega)
    g, prescribed = space.forcing(emf, quiet, 1j * omega)
    current = _positive_part((space.i_w @ w + space.i_g @ g + prescribed)[stage.circuit.groups["machine"]])
    if abs(current) == 0.0:
        return 0.0
    own_x = machine.x_subtransient_ohm * omega / (2.0 * np.pi * stage.network.nominal_frequency_hz)
    return float((1.0 / current).imag - own_x)


def _positive_part(phases: ComplexArray) -> complex:
    return complex(np.vdot(POSITIVE, phases) / 3.0)
