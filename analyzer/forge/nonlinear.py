"""Stretches with an arc, a saturating core or a moving frequency, integrated at a stated tolerance."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from scipy.integrate import OdeSolution, solve_ivp

from analyzer.forge.circuit import ComplexArray, FloatArray
from analyzer.forge.drives import Drive, FrequencyCourse
from analyzer.forge.errors import ForgeError, impossible
from analyzer.forge.network import Transformer
from analyzer.forge.reduction import StateSpace
from analyzer.forge.schedule import Arc
from analyzer.forge.stretches import BranchIndex

RELATIVE_TOLERANCE = 1e-10
"""Of each step of the integration, relative to the state."""
ABSOLUTE_SHARE = 1e-11
"""Absolute tolerance as a share of the largest forced state."""
_NONE = np.zeros(0, dtype=np.intp)
_SQRT2 = float(np.sqrt(2.0))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Equations:
    """A network with arcs and cores, and what of it is integrated.

    Without a core the integrated state is the ordinary one. With a core its flux part is the loops' whole
    flux, the iron's included: a current would rush past the knee within a step and lose the flux on the way,
    whereas the flux moves no faster than the voltage allows.

    Parameters
    ----------
    space : StateSpace
        The linear part; the cores' air inductance is in it.
    start_s, theta_rad, omega_rad_s, chirp_rad_s2 : float
        Angle of the sources: theta + omega (t - start) + chirp (t - start)^2 / 2.
    sigma_per_s, since_s : ndarray, shape (k,)
        Decay of each drive.
    still, moving, prescribed : ndarray of complex, shape (n_branches, k)
        ``g = Re((still + s moving) a)`` and prescribed currents ``Re(prescribed a)``, a the amplitudes.
    arc, core : Arc, Transformer or None
        The nonlinear elements that conduct.
    arc_branches, core_branches : ndarray of int
        Where they are.
    """

    space: StateSpace
    start_s: float
    theta_rad: float
    omega_rad_s: float
    chirp_rad_s2: float
    sigma_per_s: FloatArray
    since_s: FloatArray
    still: ComplexArray
    moving: ComplexArray
    prescribed: ComplexArray
    arc: Arc | None
    core: Transformer | None
    arc_branches: BranchIndex
    core_branches: BranchIndex

    def drive(self, time_s: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return (g, prescribed currents, their slopes), each (n_branches, n)."""
        step = time_s - self.start_s
        theta = self.theta_rad + self.omega_rad_s * step + 0.5 * self.chirp_rad_s2 * step**2
        size = _SQRT2 * np.exp(
            np.multiply.outer(self.sigma_per_s, time_s) - (self.sigma_per_s * self.since_s)[:, None]
        )
        amplitude = size * np.exp(1j * theta)
        turning = amplitude * (self.sigma_per_s[:, None] + 1j * (self.omega_rad_s + self.chirp_rad_s2 * step))
        g = (self.still @ amplitude + self.moving @ turning).real
        return g, (self.prescribed @ amplitude).real, (self.prescribed @ turning).real

    def state_slopes(self) -> Callable[[float, FloatArray], FloatArray]:
        """Return the right-hand side for one instant, constant products done beforehand."""
        space, n_flux = self.space, self.space.n_flux
        still = space.b_g @ self.still + space.b_i @ self.prescribed
        moving = space.b_g @ self.moving
        rows = space.i_w[self.arc_branches]
        rows_still = space.i_g[self.arc_branches] @ self.still + self.prescribed[self.arc_branches]
        rows_moving = space.i_g[self.arc_branches] @ self.moving
        arc_push, arc, core = space.b_g[:, self.arc_branches], self.arc, self.core
        core_prescribed = self.prescribed[self.core_branches]
        sigma, turned = self.sigma_per_s, self.sigma_per_s * self.since_s
        q = np.zeros(n_flux)

        def slopes(time_s: float, y: FloatArray) -> FloatArray:
            nonlocal q
            step = time_s - self.start_s
            theta = self.theta_rad + (self.omega_rad_s + 0.5 * self.chirp_rad_s2 * step) * step
            amplitude = np.exp(sigma * time_s - turned + 1j * theta) * _SQRT2
            turning = amplitude * (sigma + 1j * (self.omega_rad_s + self.chirp_rad_s2 * step))
            w = y
            if core is not None:
                fixed = (core_prescribed @ amplitude).real
                q = self.currents_of_flux(y[:n_flux], fixed, guess=q)
                w = np.concatenate([q, y[n_flux:]])
            result = space.a @ w + (still @ amplitude + moving @ turning).real
            if arc is not None:
                currents = rows @ w + (rows_still @ amplitude + rows_moving @ turning).real
                result += arc_push @ (arc.voltage_v * np.tanh(currents / arc.ignition_a))
            if core is not None:
                result[:n_flux] = space.inertia @ result[:n_flux]
            return np.asarray(result)

        return slopes

    def currents_of_flux(self, flux: FloatArray, fixed_a: FloatArray, *, guess: FloatArray) -> FloatArray:
        """Return the current states q whose loop fluxes, the cores' included, are given.

        Solves ``E q + B' flux_core(B q + fixed) = flux`` by damped Newton steps; the left side is monotone.

        Raises
        ------
        ForgeError
            If the steps do not settle.
        """
        core, inertia = self.core, self.space.inertia
        assert core is not None
        basis = self.space.flux_basis[self.core_branches]
        tolerance = 1e-13 * (
            float(np.abs(flux).max(initial=0.0)) + core.knee_flux_vs * float(np.abs(basis).max())
        )
        q = guess
        rest = inertia @ q + basis.T @ core_flux(core, basis @ q + fixed_a) - flux
        size = float(np.abs(rest).max(initial=0.0))
        for _ in range(100):
            if size <= tolerance:
                return q
            slope = core_inductance(core, basis @ q + fixed_a)
            step = np.linalg.solve(inertia + (basis.T * slope) @ basis, rest)
            share, before = 1.0, size
            while True:
                trial = q - share * step
                rest = inertia @ trial + basis.T @ core_flux(core, basis @ trial + fixed_a) - flux
                size = float(np.abs(rest).max(initial=0.0))
                if size < before or share < 1e-8:
                    break
                share *= 0.5
            q = trial
        raise ForgeError(
            "forge-no-solution", "the cores' current for their flux was not found", where="transformer"
        )

    def states(self, time_s: FloatArray, y: FloatArray) -> FloatArray:
        """Return the ordinary states for columns of integrated ones (fluxes where there is a core)."""
        if self.core is None:
            return y
        n_flux = self.space.n_flux
        fixed = self.drive(time_s)[1][self.core_branches]
        columns, q = y.copy(), np.zeros(n_flux)
        for k in range(y.shape[1]):
            q = self.currents_of_flux(y[:n_flux, k], fixed[:, k], guess=q)
            columns[:n_flux, k] = q
        return columns

    def evaluate(self, time_s: FloatArray, w: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return (branch currents, bus voltages) for columns of ordinary states."""
        space, n_flux = self.space, self.space.n_flux
        g, prescribed, prescribed_slope = self.drive(time_s)
        currents = space.i_w @ w + space.i_g @ g + prescribed
        if self.arc is not None:
            # An arc lies in no loop without inductance, so its voltage does not act back on these currents.
            g[self.arc_branches] += self.arc.voltage_v * np.tanh(
                currents[self.arc_branches] / self.arc.ignition_a
            )
        slopes = space.a @ w + space.b_g @ g + space.b_i @ prescribed
        if self.core is not None:
            basis = space.flux_basis[self.core_branches]
            rising = core_inductance(self.core, currents[self.core_branches])
            known = rising * prescribed_slope[self.core_branches]
            push = space.inertia @ slopes[:n_flux] - basis.T @ known
            inertia = space.inertia + np.einsum("cp,ck,cq->kpq", basis, rising, basis)
            slopes[:n_flux] = np.linalg.solve(inertia, push.T[:, :, None])[:, :, 0].T
            g[self.core_branches] += known + rising * (basis @ slopes[:n_flux])
        voltages = space.v_w @ w + space.v_dq @ slopes[:n_flux] + space.v_g @ g
        return currents, voltages


def core_flux(core: Transformer, current_a: FloatArray) -> FloatArray:
    """Return the flux linkage of the iron alone. [V s]."""
    return np.asarray(core.knee_flux_vs * np.tanh(current_a / core.knee_current_a))


def core_inductance(core: Transformer, current_a: FloatArray) -> FloatArray:
    """Return its slope over the current. [H]."""
    tanh = np.tanh(current_a / core.knee_current_a)
    return np.asarray(core.knee_flux_vs / core.knee_current_a * (1.0 - tanh) * (1.0 + tanh))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class OdeStretch:
    """A stretch integrated by scipy's solvers, with their dense output between the steps."""

    start_s: float
    stop_s: float
    space: StateSpace
    fastest_rad_s: float
    equations: Equations
    path: OdeSolution

    def _states(self, time_s: FloatArray) -> FloatArray:
        y = np.asarray(self.path(np.clip(time_s, self.path.t_min, self.path.t_max)))
        return self.equations.states(time_s, y)

    def outputs(self, time_s: FloatArray, branches: BranchIndex) -> tuple[FloatArray, FloatArray]:
        """Return the currents of some branches (n_branches, n) and the bus voltages (3, n)."""
        currents, voltages = self.equations.evaluate(time_s, self._states(time_s))
        return currents[branches], voltages

    def current(self, branch: int, time_s: FloatArray) -> FloatArray:
        """Return one branch current, shape (n,)."""
        g, prescribed, _ = self.equations.drive(time_s)
        row = self.space
        return np.asarray(row.i_w[branch] @ self._states(time_s) + row.i_g[branch] @ g + prescribed[branch])

    def capacitor_voltages(self, time_s: float) -> FloatArray:
        """Return the capacitor voltages at one instant."""
        return self._states(np.array([time_s]))[self.space.n_flux :, 0] / self.space.root_capacitance

    def fluxes(self, time_s: float) -> FloatArray:
        """Return the flux linkage of every branch at one instant."""
        instant = np.array([time_s])
        currents, _ = self.equations.evaluate(instant, self._states(instant))
        flux = self.space.l_h @ currents[:, 0]
        core = self.equations.core
        if core is not None:
            flux[self.equations.core_branches] += core_flux(core, currents[self.equations.core_branches, 0])
        return np.asarray(flux)


def make_equations(
    space: StateSpace,
    drives: Sequence[Drive],
    course: FrequencyCourse,
    *,
    start_s: float,
    arc: Arc | None = None,
    arc_branches: BranchIndex = _NONE,
    core: Transformer | None = None,
    core_branches: BranchIndex = _NONE,
) -> Equations:
    """Gather a network's equations from `start_s` on.

    Raises
    ------
    ForgeError
        If an arc lies in a loop without inductance.
    """
    if arc is not None and np.abs(space.i_g[:, arc_branches]).max() > 1e-12 * max(
        np.abs(space.i_g).max(), 1.0
    ):
        raise impossible(
            "fault.arc",
            "lies in a loop without inductance",
            hint="give the load beyond the fault a reactance",
        )
    prescribed = np.array([space.spread @ drive.injection_rms_a for drive in drives]).T
    return Equations(
        space=space,
        start_s=start_s,
        theta_rad=course.theta_rad(start_s),
        omega_rad_s=course.omega_rad_s(start_s),
        chirp_rad_s2=course.chirp_rad_s2(start_s),
        sigma_per_s=np.array([drive.sigma_per_s for drive in drives]),
        since_s=np.array([drive.since_s for drive in drives]),
        still=space.r_ohm @ prescribed - np.array([drive.emf_rms_v for drive in drives]).T,
        moving=space.l_h @ prescribed,
        prescribed=prescribed,
        arc=arc,
        core=core,
        arc_branches=arc_branches,
        core_branches=core_branches,
    )


def carried_flux_state(equations: Equations, linear_state: FloatArray, fluxes: FloatArray) -> FloatArray:
    """Return the integrated state after a switching where a core takes part: every loop keeps its flux.

    Parameters
    ----------
    equations : Equations
        The network after the switching.
    linear_state : ndarray, shape (n,)
        State that the linear network would have; its capacitor part is right.
    fluxes : ndarray, shape (n_branches,)
        Flux linkages just before, the cores' included. [V s]
    """
    if equations.core is None:
        return linear_state
    space = equations.space
    prescribed = equations.drive(np.array([equations.start_s]))[1][:, 0]
    return np.concatenate(
        [space.flux_basis.T @ (fluxes - space.l_h @ prescribed), linear_state[space.n_flux :]]
    )


def integrate(equations: Equations, state: FloatArray, *, stop_s: float, scale: float) -> OdeStretch:
    """Integrate from a state.

    Parameters
    ----------
    equations : Equations
        The network; the stretch starts at its `start_s`.
    state : ndarray, shape (n,)
        Integrated state at the start.
    stop_s : float
        End. [s]
    scale : float
        Typical size of the state, for the absolute tolerance `ABSOLUTE_SHARE`.

    Returns
    -------
    OdeStretch
        At `RELATIVE_TOLERANCE`, by LSODA: its many short steps of low order find the sharp knee of a core
        that the long steps of a Runge-Kutta method of order 8 were seen to misjudge by 1e-5 now and then.

    Raises
    ------
    ForgeError
        If the solver gives up.
    """
    space = equations.space
    values = np.linalg.eigvals(space.a) if space.n else np.zeros(0)
    result = solve_ivp(
        equations.state_slopes(),
        (equations.start_s, stop_s),
        state,
        method="LSODA",
        dense_output=True,
        rtol=RELATIVE_TOLERANCE,
        atol=ABSOLUTE_SHARE * max(scale, 1e-300),
        max_step=0.25 / equations.omega_rad_s * np.pi,
    )
    if not result.success or result.sol is None:
        raise ForgeError("forge-no-solution", f"integration stopped: {result.message}", where="network")
    fastest = max(equations.omega_rad_s * 2.0, float(np.abs(values.imag).max(initial=0.0)))
    return OdeStretch(
        start_s=equations.start_s,
        stop_s=stop_s,
        space=space,
        fastest_rad_s=fastest,
        equations=equations,
        path=result.sol,
    )
