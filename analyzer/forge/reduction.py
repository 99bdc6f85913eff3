"""One state of the switches as an ordinary state space, singular parts eliminated exactly."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from analyzer.forge.circuit import Circuit, ComplexArray, FloatArray
from analyzer.forge.errors import impossible

# Below this share of the largest, an eigenvalue of the loop inductance is zero: our choice, far above
# rounding (1e-16) and far below the ratio of a line's to a load's inductance.
_ZERO_SHARE = 1e-12


@dataclass(frozen=True, slots=True, kw_only=True)
class SwitchState:
    """Which branches are interrupted, and the fault's resistances."""

    open_branches: frozenset[int]
    phase_resistance_ohm: float = 0.0
    ground_resistance_ohm: float = 0.0


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class StateSpace:
    r"""``E w' = A w - Q1' g`` with branch currents and node voltages as outputs.

    Notes
    -----
    Currents that obey Kirchhoff's current law with the open branches left out are ``i = B x + F j``, B
    spanning the loops and F carrying the prescribed currents j. The loop equations
    ``B'(L i' + R i + P v_c - e) = 0``, ``C v_c' = P' i`` have a singular B'LB wherever a loop holds no
    inductance; in its null space they are algebraic and are solved once (index 1), in the rest they are the
    state. A zero-ohm branch is thus a constraint, never a small resistance. States are in energy coordinates
    (flux over root inductance, charge over root capacitance), which keeps the modes well conditioned. The
    forcing is ``g = R F j + L F j' - e`` per branch.
    """

    n_flux: int
    open_branches: frozenset[int]
    flux_basis: FloatArray  # (nb, n_flux): currents of the flux states, "B Q1"
    inertia: FloatArray  # (n_flux, n_flux), identity unless L has a skew part
    a: FloatArray  # (n, n)
    b_g: FloatArray  # (n, nb)
    b_i: FloatArray  # (n, nb), from prescribed currents
    i_w: FloatArray  # (nb, n)
    i_g: FloatArray  # (nb, nb)
    spread: FloatArray  # (nb, n_injected), "F"
    r_ohm: FloatArray
    l_h: FloatArray
    v_w: FloatArray  # (3, n)
    v_dq: FloatArray  # (3, n_flux)
    v_g: FloatArray  # (3, nb)
    root_capacitance: FloatArray
    capacitor_branches: NDArray[np.intp]
    symmetric: bool

    @property
    def n(self) -> int:
        """Number of states."""
        return int(self.a.shape[0])

    def forcing(
        self, emf: ComplexArray, injection: ComplexArray, s: complex
    ) -> tuple[ComplexArray, ComplexArray]:
        """Return (g, prescribed branch currents) for a drive with the exponent `s`."""
        currents = self.spread @ injection
        return (self.r_ohm + s * self.l_h) @ currents - emf, currents

    def response(self, emf: ComplexArray, injection: ComplexArray, s: complex) -> ComplexArray:
        """Return the state of the forced solution proportional to exp(s t).

        Raises
        ------
        ForgeError
            If `s` is a natural mode of the network.
        """
        g, currents = self.forcing(emf, injection, s)
        try:
            return np.asarray(
                np.linalg.solve(s * np.eye(self.n) - self.a, self.b_g @ g + self.b_i @ currents)
            )
        except np.linalg.LinAlgError as error:
            raise impossible(
                "network", "is in undamped resonance with its source", hint="give it some resistance"
            ) from error

    def outputs(
        self, w: ComplexArray, dw: ComplexArray, g: ComplexArray, currents: ComplexArray
    ) -> tuple[ComplexArray, ComplexArray]:
        """Return (branch currents, bus voltages) for columns of states, their slopes and their forcing."""
        i = self.i_w @ w + self.i_g @ g + currents
        v = self.v_w @ w + self.v_dq @ dw[: self.n_flux] + self.v_g @ g
        return i, v


def reduce_circuit(circuit: Circuit, state: SwitchState) -> StateSpace:
    """Return the state space of a circuit in one state of its switches.

    Parameters
    ----------
    circuit : Circuit
        The branches.
    state : SwitchState
        Open branches and fault resistances.

    Returns
    -------
    StateSpace
        Its matrices.

    Raises
    ------
    ForgeError
        If a loop has neither resistance nor inductance, a prescribed current no way to flow, or the bus no
        connection to ground.
    """
    n_branches = circuit.incidence.shape[1]
    r_ohm, l_h = circuit.r_ohm.copy(), circuit.l_h
    if "fault" in circuit.groups:
        legs = circuit.groups["fault"]
        r_ohm[legs[:3], legs[:3]] = state.phase_resistance_ohm
        r_ohm[legs[3], legs[3]] = state.ground_resistance_ohm
    free = np.ones(n_branches, dtype=bool)
    free[list(state.open_branches)] = False
    free[circuit.injected] = False
    a_free = circuit.incidence[:, free]
    left, sizes, right = np.linalg.svd(a_free)
    rank = int(np.sum(sizes > 1e-10))
    loops = np.zeros((n_branches, a_free.shape[1] - rank))
    loops[free] = right[rank:].T
    inverse = (right[:rank].T / sizes[:rank]) @ left[:, :rank].T

    spread = _spread_injection(circuit, state, free, inverse)
    flux_basis, null_basis, inertia = _split_loops(loops, l_h)
    closing = null_basis.T @ r_ohm @ null_basis
    if closing.size:
        smallest = np.linalg.svd(closing, compute_uv=False)[-1]
        if smallest <= _ZERO_SHARE * max(float(np.abs(r_ohm).max()), 1.0):
            raise impossible(
                "network",
                "a loop has neither resistance nor inductance, so its current is unlimited",
                hint="look for a fault or an element that shorts another one",
                code="forge-unlimited-current",
            )
    # Algebraic loop currents: x2 = -T null'(R i_flux + P v_c + g).
    project = (
        null_basis @ np.linalg.solve(closing, null_basis.T) if closing.size else np.zeros((n_branches,) * 2)
    )

    capacitors = circuit.capacitor_branches
    root_c = np.sqrt(circuit.capacitance_f)
    pick = np.zeros((n_branches, len(capacitors)))
    pick[capacitors, np.arange(len(capacitors))] = 1.0 / root_c
    i_w = np.hstack([flux_basis - project @ r_ohm @ flux_basis, -project @ pick])
    i_g = -project
    drop_w = r_ohm @ i_w
    drop_w[:, flux_basis.shape[1] :] += pick
    drop_g = r_ohm @ i_g + np.eye(n_branches)
    push = np.linalg.solve(inertia, flux_basis.T)
    a = np.vstack([-push @ drop_w, pick.T @ i_w])
    b_g = np.vstack([-push @ drop_g, pick.T @ i_g])
    b_i = np.vstack([np.zeros((flux_basis.shape[1], n_branches)), pick.T])

    # Node voltages follow from the branches that conduct: incidence' v = R i + L i' + P v_c - e.
    to_bus = np.zeros((3, n_branches))
    to_bus[:, free] = inverse.T[circuit.bus]
    floating = left[:, rank:]
    if floating.size and np.abs(floating[circuit.bus]).max() > 1e-9:
        raise impossible("network", "the bus has no connection to ground, so its voltages are not determined")
    return StateSpace(
        n_flux=flux_basis.shape[1],
        open_branches=state.open_branches,
        flux_basis=flux_basis,
        inertia=inertia,
        a=a,
        b_g=b_g,
        b_i=b_i,
        i_w=i_w,
        i_g=i_g,
        spread=spread,
        r_ohm=r_ohm,
        l_h=l_h,
        v_w=to_bus @ drop_w,
        v_dq=to_bus @ l_h @ flux_basis,
        v_g=to_bus @ drop_g,
        root_capacitance=root_c,
        capacitor_branches=capacitors,
        symmetric=len(capacitors) == 0
        and bool(np.array_equal(l_h, l_h.T) and np.array_equal(r_ohm, r_ohm.T)),
    )


def _spread_injection(
    circuit: Circuit, state: SwitchState, free: NDArray[np.bool_], inverse: FloatArray
) -> FloatArray:
    injected = circuit.injected
    spread = np.zeros((circuit.incidence.shape[1], len(injected)))
    if not len(injected):
        return spread
    arriving = circuit.incidence[:, injected]
    # The converter's three currents sum to zero; only that part has to find a way.
    balanced = np.eye(len(injected)) - 1.0 / len(injected)
    spread[free] = -inverse @ arriving @ balanced
    spread[injected] = balanced
    if np.abs(circuit.incidence @ spread).max() > 1e-9:
        raise impossible(
            "network.converter",
            "its current has no way to flow once poles are open",
            hint="put a load or a source at the bus",
        )
    return spread


def _split_loops(loops: FloatArray, l_h: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    if not loops.shape[1]:
        return loops, loops, np.zeros((0, 0))
    inductance = loops.T @ l_h @ loops
    values, vectors = np.linalg.eigh(0.5 * (inductance + inductance.T))
    held = values > _ZERO_SHARE * max(float(values.max()), 0.0)
    if not values.max() > 0.0:
        held = np.zeros(len(values), dtype=bool)
    flux_basis = loops @ (vectors[:, held] / np.sqrt(values[held]))
    return flux_basis, loops @ vectors[:, ~held], flux_basis.T @ l_h @ flux_basis
