"""Stretches of time between switchings, solved exactly: as sums of exponentials, or by expm."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import expm

from analyzer.forge.circuit import ComplexArray, FloatArray
from analyzer.forge.drives import Drive, FrequencyCourse
from analyzer.forge.reduction import StateSpace

# Modes worse conditioned than this lose more than four of sixteen digits; expm takes over. Our choice.
_CONDITION_LIMIT = 1e4
_SQRT2 = float(np.sqrt(2.0))
BranchIndex = NDArray[np.intp]


class Stretch(Protocol):
    """A solution valid from `start_s` to `stop_s`."""

    @property
    def start_s(self) -> float:
        """First instant. [s]."""
        ...

    @property
    def stop_s(self) -> float:
        """Last instant. [s]."""
        ...

    @property
    def space(self) -> StateSpace:
        """The network's state space."""
        ...

    @property
    def fastest_rad_s(self) -> float:
        """Largest angular frequency in it, for the search of roots. [rad/s]."""
        ...

    def outputs(self, time_s: FloatArray, branches: BranchIndex) -> tuple[FloatArray, FloatArray]:
        """Return the currents of some branches (n_branches, n) and the bus voltages (3, n)."""
        ...

    def current(self, branch: int, time_s: FloatArray) -> FloatArray:
        """Return one branch current, shape (n,)."""
        ...

    def capacitor_voltages(self, time_s: float) -> FloatArray:
        """Return the capacitor voltages at one instant."""
        ...

    def fluxes(self, time_s: float) -> FloatArray:
        """Return the flux linkage of every branch at one instant, shape (n_branches,)."""
        ...


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ModalStretch:
    """``x(t) = Re(sum of columns * exp(exponents * (t - start)))``, exact.

    Parameters
    ----------
    start_s, stop_s : float
        Validity. [s]
    space : StateSpace
        The network's state space.
    exponents : ndarray of complex, shape (m,)
        First the drives', then the network's own. [1/s]
    n_drives : int
        How many belong to drives.
    states : ndarray of complex, shape (n, m)
        Columns of the state.
    currents, voltages : ndarray of complex, shapes (n_branches, m) and (3, m)
        Columns of the branch currents and bus voltages.
    """

    start_s: float
    stop_s: float
    space: StateSpace
    exponents: ComplexArray
    n_drives: int
    states: ComplexArray
    currents: ComplexArray
    voltages: ComplexArray

    @property
    def fastest_rad_s(self) -> float:
        """Largest angular frequency in it. [rad/s]."""
        return float(np.abs(self.exponents.imag).max())

    def _rise(self, time_s: FloatArray) -> ComplexArray:
        return np.exp(np.multiply.outer(self.exponents, time_s - self.start_s))

    def outputs(self, time_s: FloatArray, branches: BranchIndex) -> tuple[FloatArray, FloatArray]:
        """Return the currents of some branches (n_branches, n) and the bus voltages (3, n)."""
        rise = self._rise(time_s)
        return _real_product(self.currents[branches], rise), _real_product(self.voltages, rise)

    def current(self, branch: int, time_s: FloatArray) -> FloatArray:
        """Return one branch current, shape (n,)."""
        return _real_product(self.currents[branch], self._rise(time_s))

    def slope(self, branch: int, time_s: FloatArray) -> FloatArray:
        """Return the derivative of one branch current, shape (n,). [A/s]."""
        return _real_product(self.currents[branch] * self.exponents, self._rise(time_s))

    def _state(self, time_s: float) -> FloatArray:
        return np.asarray((self.states @ np.exp(self.exponents * (time_s - self.start_s))).real)

    def capacitor_voltages(self, time_s: float) -> FloatArray:
        """Return the capacitor voltages at one instant."""
        return self._state(time_s)[self.space.n_flux :] / self.space.root_capacitance

    def fluxes(self, time_s: float) -> FloatArray:
        """Return the flux linkage of every branch at one instant."""
        currents = (self.currents @ np.exp(self.exponents * (time_s - self.start_s))).real
        return np.asarray(self.space.l_h @ currents)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ExpmStretch:
    """The same solution by the matrix exponential of the state augmented with its drives.

    Used where natural modes coincide so that they cannot be told apart (a critically damped discharge).
    Parameters are as in `ModalStretch`; `generator` is the augmented real matrix, `initial` its state.
    """

    start_s: float
    stop_s: float
    space: StateSpace
    fastest_rad_s: float
    generator: FloatArray
    initial: FloatArray
    to_currents: FloatArray
    to_voltages: FloatArray

    def _state(self, time_s: FloatArray) -> FloatArray:
        steps = np.atleast_1d(time_s - self.start_s)
        return np.asarray(expm(self.generator * steps[:, None, None]) @ self.initial).T

    def outputs(self, time_s: FloatArray, branches: BranchIndex) -> tuple[FloatArray, FloatArray]:
        """Return the currents of some branches (n_branches, n) and the bus voltages (3, n)."""
        state = self._state(time_s)
        return self.to_currents[branches] @ state, self.to_voltages @ state

    def current(self, branch: int, time_s: FloatArray) -> FloatArray:
        """Return one branch current, shape (n,)."""
        return np.asarray(self.to_currents[branch] @ self._state(time_s))

    def slope(self, branch: int, time_s: FloatArray) -> FloatArray:
        """Return the derivative of one branch current, shape (n,). [A/s]."""
        return np.asarray(self.to_currents[branch] @ self.generator @ self._state(time_s))

    def capacitor_voltages(self, time_s: float) -> FloatArray:
        """Return the capacitor voltages at one instant."""
        state = self._state(np.array([time_s]))[: self.space.n, 0]
        return np.asarray(state[self.space.n_flux :] / self.space.root_capacitance)

    def fluxes(self, time_s: float) -> FloatArray:
        """Return the flux linkage of every branch at one instant."""
        return np.asarray(self.space.l_h @ (self.to_currents @ self._state(np.array([time_s])))[:, 0])


def _real_product(columns: ComplexArray, rise: ComplexArray) -> FloatArray:
    # The real part of the complex product, without forming its imaginary half.
    return np.asarray(columns.real @ rise.real - columns.imag @ rise.imag)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Forced:
    """The forced solution at one instant: columns for each drive, amplitudes at `time_s` included."""

    exponents: ComplexArray
    states: ComplexArray
    forcings: ComplexArray
    prescribed: ComplexArray

    @property
    def state_now(self) -> FloatArray:
        """The forced state at that instant."""
        return np.asarray(self.states.sum(axis=1).real)

    @property
    def prescribed_now(self) -> FloatArray:
        """Prescribed branch currents at that instant."""
        return np.asarray(self.prescribed.sum(axis=1).real)


def forced_solution(
    space: StateSpace, drives: Sequence[Drive], course: FrequencyCourse, *, time_s: float
) -> Forced:
    """Return the response to all drives as rotating (peak) phasors at an instant of constant frequency."""
    omega, turn = course.omega_rad_s(time_s), np.exp(1j * course.theta_rad(time_s))
    exponents, states, forcings, prescribed = [], [], [], []
    for drive in drives:
        s = complex(drive.sigma_per_s, omega)
        size = _SQRT2 * turn * np.exp(drive.sigma_per_s * (time_s - drive.since_s))
        emf, injection = drive.emf_rms_v * size, drive.injection_rms_a * size
        g, currents = space.forcing(emf, injection, s)
        exponents.append(s)
        states.append(space.response(emf, injection, s))
        forcings.append(g)
        prescribed.append(currents)
    return Forced(
        exponents=np.array(exponents),
        states=np.array(states).T.reshape(space.n, len(exponents)),
        forcings=np.array(forcings).T,
        prescribed=np.array(prescribed).T,
    )


def linear_stretch(
    space: StateSpace, forced: Forced, state: FloatArray, *, start_s: float, stop_s: float
) -> ModalStretch | ExpmStretch:
    """Return the exact solution from a state at `start_s` on.

    Parameters
    ----------
    space : StateSpace
        The network.
    forced : Forced
        Its forced solution at `start_s`.
    state : ndarray, shape (n,)
        The state at `start_s`.
    start_s, stop_s : float
        Validity. [s]
    """
    deviation = state - forced.state_now
    if space.symmetric:
        values, vectors = np.linalg.eigh(0.5 * (space.a + space.a.T)) if space.n else (np.zeros(0), space.a)
        natural, columns = (
            values.astype(np.complex128),
            (vectors * (vectors.T @ deviation)).astype(np.complex128),
        )
    else:
        natural, vectors_c = np.linalg.eig(space.a)
        if space.n and np.linalg.cond(vectors_c) > _CONDITION_LIMIT:
            return _expm_stretch(space, forced, state, start_s=start_s, stop_s=stop_s)
        columns = vectors_c * np.linalg.solve(vectors_c, deviation.astype(np.complex128))
    exponents = np.concatenate([forced.exponents, natural])
    states = np.hstack([forced.states, columns])
    zeros = np.zeros((forced.forcings.shape[0], len(natural)))
    currents, voltages = space.outputs(
        states,
        states * exponents,
        np.hstack([forced.forcings, zeros]),
        np.hstack([forced.prescribed, zeros]),
    )
    return ModalStretch(
        start_s=start_s,
        stop_s=stop_s,
        space=space,
        exponents=exponents,
        n_drives=len(forced.exponents),
        states=states,
        currents=currents,
        voltages=voltages,
    )


def _expm_stretch(
    space: StateSpace, forced: Forced, state: FloatArray, *, start_s: float, stop_s: float
) -> ExpmStretch:
    n, m = space.n, len(forced.exponents)
    # Each drive is a pair (cos, sin) of damped rotation; inputs are real on it.
    rotation = np.zeros((2 * m, 2 * m))
    for k, s in enumerate(forced.exponents):
        rotation[2 * k : 2 * k + 2, 2 * k : 2 * k + 2] = [[s.real, -s.imag], [s.imag, s.real]]

    def on_pairs(columns: ComplexArray) -> FloatArray:
        return np.stack([columns.real, -columns.imag], axis=2).reshape(len(columns), 2 * m)

    g, prescribed = on_pairs(forced.forcings), on_pairs(forced.prescribed)
    generator = np.block(
        [[space.a, space.b_g @ g + space.b_i @ prescribed], [np.zeros((2 * m, n)), rotation]]
    )
    initial = np.concatenate([state, np.tile([1.0, 0.0], m)])
    to_currents = np.hstack([space.i_w, space.i_g @ g + prescribed])
    slopes = generator[: space.n_flux]
    to_voltages = np.hstack([space.v_w, space.v_g @ g]) + space.v_dq @ slopes
    fastest = max(
        float(np.abs(forced.exponents.imag).max()),
        float(np.abs(np.linalg.eigvals(space.a).imag).max(initial=0.0)),
    )
    return ExpmStretch(
        start_s=start_s,
        stop_s=stop_s,
        space=space,
        fastest_rad_s=fastest,
        generator=generator,
        initial=initial,
        to_currents=to_currents,
        to_voltages=to_voltages,
    )


def carried_state(
    space: StateSpace, *, fluxes: FloatArray, capacitor_voltages: FloatArray, prescribed: FloatArray
) -> FloatArray:
    """Return the state after a switching.

    Every loop of the new network keeps its flux and every capacitor its charge. Where the old currents fit
    the new network that is continuity of each current; where they do not (a pole forced open under current)
    it is what remains after the voltage impulse, which lies across the opened pole only.

    Parameters
    ----------
    space : StateSpace
        The network after the switching.
    fluxes : ndarray, shape (n_branches,)
        Flux linkages just before. [V s]
    capacitor_voltages : ndarray
        Just before. [V]
    prescribed : ndarray, shape (n_branches,)
        Prescribed branch currents just after. [A]
    """
    rest = space.flux_basis.T @ (fluxes - space.l_h @ prescribed)
    flux_states = np.linalg.solve(space.inertia, rest) if space.n_flux else rest
    return np.concatenate([flux_states, capacitor_voltages * space.root_capacitance])


def search_grid(
    stretch: Stretch, start_s: float, stop_s: float, *, per_cycle: int = 32
) -> NDArray[np.float64]:
    """Return instants dense enough that no root of a current hides between two. [s]."""
    step = 2.0 * np.pi / (stretch.fastest_rad_s * per_cycle)
    return np.linspace(start_s, stop_s, max(int(np.ceil((stop_s - start_s) / step)), 2) + 1)
