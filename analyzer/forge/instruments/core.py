"""Flux of a saturating current transformer core, solved for the whole record at once.

With the primary current i' on the secondary side, the exciting current g(flux), the secondary resistance R
and the burden's inductance L,

    d/dt (flux + L g(flux) - L i') = R (i' - g(flux)).

The trapezoidal rule makes this one monotone equation per step. Marching through them costs a Python loop;
here Newton's method runs over all steps and phases together, each turn being array arithmetic and one banded
solve. It starts from a coarse march, and halving the step until the current no longer moves tells the error.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg.lapack import dtbtrs

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.sampling import refine

Real = NDArray[np.float64]

_MAX_HALVINGS = 5
_MAX_TURNS = 40
_COARSE_STEPS = 8  # samples per step of the march that Newton's method starts from
_NEARLY_LINEAR = 0.6  # of the knee flux; 0.6**22 is 1e-5 of the knee's exciting current


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Core:
    r"""Single-valued exciting curve of one core per phase.

    .. math:: g(\lambda) = (\lambda-\lambda_r)/L_m
              + I_k [(\lambda/\lambda_k)^S - (\lambda_r/\lambda_k)^S]

    Through the remanent flux the curve passes at zero current, so that remanence stays until the fault, as
    hysteresis makes it do; the saturated branch is where it is without remanence.

    Parameters
    ----------
    magnetising_h : float
        Lm, unsaturated, on the secondary side. [H]
    knee_wb, knee_a : float
        Flux and instantaneous exciting current at the knee. [Wb turns], [A]
    exponent : float
        S.
    remanence_wb : ndarray, shape (phases, 1)
    """

    magnetising_h: float
    knee_wb: float
    knee_a: float
    exponent: float
    remanence_wb: Real

    def current_and_slope(self, flux: Real) -> tuple[Real, Real]:
        """Exciting current and its derivative, shaped like the flux, which has one row per phase."""
        x = flux / self.knee_wb
        power = np.abs(x) ** (self.exponent - 1)
        rest = self.remanence_wb / self.knee_wb
        at_rest = rest * np.abs(rest) ** (self.exponent - 1)
        current = (flux - self.remanence_wb) / self.magnetising_h + self.knee_a * (x * power - at_rest)
        slope = 1 / self.magnetising_h + self.exponent * self.knee_a / self.knee_wb * power
        return current, slope

    def incremental_h(self) -> Real:
        """Inductance around the remanent flux, shape (phases, 1)."""
        return np.asarray(1 / self.current_and_slope(self.remanence_wb)[1])

    def row(self, phase: int) -> Core:
        """Return the core of one phase."""
        return Core(
            magnetising_h=self.magnetising_h,
            knee_wb=self.knee_wb,
            knee_a=self.knee_a,
            exponent=self.exponent,
            remanence_wb=self.remanence_wb[phase : phase + 1],
        )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class CoreSolution:
    """Flux, shape (phases, n), the error of the exciting current, and how many steps a sample took."""

    flux_wb: Real
    error_a: float
    substeps: int


def solve_core(
    current: Real,
    *,
    sample_rate_hz: float,
    core: Core,
    resistance_ohm: float,
    inductance_h: float,
    linear_flux_wb: Real,
    tolerance: float,
) -> CoreSolution:
    """Solve for the flux to a tolerance that halving the step verifies.

    Parameters
    ----------
    current : ndarray, shape (phases, n)
        Primary current on the secondary side. [A]
    sample_rate_hz : float
    core : Core
    resistance_ohm, inductance_h : float
        Of winding and burden.
    linear_flux_wb : ndarray, shape (phases, n)
        Flux were the core linear: its first column is the initial state, the rest a first guess.
    tolerance : float
        Permitted error of the exciting current over the largest primary current (or a millionth of the
        exciting current at the knee, where that is more).

    Raises
    ------
    ForgeError
        If the tolerance is not reached.
    """
    peak = float(np.abs(current).max())
    # A current far below the knee's own exciting current is nothing to be exact to.
    allowed = tolerance * max(peak, 1e-6 * core.knee_a)
    # By comparison with the source the exciting current cannot pass the largest primary current by much.
    limit = core.knee_wb * max(1.0, 4 * peak / core.knee_a) ** (1 / core.exponent) + 2 * np.abs(
        core.remanence_wb
    )
    guess = np.clip(linear_flux_wb, -limit, limit)
    for phase in np.flatnonzero(np.abs(linear_flux_wb).max(axis=1) > _NEARLY_LINEAR * core.knee_wb):
        guess[phase] = _coarse(
            current[phase],
            start_wb=float(linear_flux_wb[phase, 0]),
            step_s=_COARSE_STEPS / sample_rate_hz,
            core=core.row(int(phase)),
            resistance_ohm=resistance_ohm,
            inductance_h=inductance_h,
        )
    guess[:, 0] = linear_flux_wb[:, 0]
    previous = None
    error = np.inf
    for halving in range(_MAX_HALVINGS + 1):
        substeps = 2**halving
        guess, exciting = _newton(
            current,
            guess=guess,
            limit=limit,
            half_step_ohm_s=resistance_ohm / (2 * substeps * sample_rate_hz),
            core=core,
            inductance_h=inductance_h,
        )
        if previous is not None:
            # A second-order rule: what is left after halving is a third of what the halving moved.
            error = float(np.abs(exciting[:, ::2] - previous).max()) / 3
            if error <= allowed:
                return CoreSolution(flux_wb=guess[:, ::substeps].copy(), error_a=error, substeps=substeps)
        previous = exciting
        current, guess = refine(current), refine(guess)
    raise ForgeError(
        "core-not-solved",
        f"the exciting current is only known to {error:.1e} A, secondary, where {allowed:.1e} A is asked for",
        where="ct",
        hint="oversample more or raise the tolerance",
    )


def _newton(
    current: Real, *, guess: Real, limit: Real, half_step_ohm_s: float, core: Core, inductance_h: float
) -> tuple[Real, Real]:
    """Solve the trapezoidal rule over all steps; flux and exciting current."""
    forced = inductance_h * np.diff(current, axis=1) + half_step_ohm_s * (current[:, 1:] + current[:, :-1])
    ahead, behind = inductance_h + half_step_ohm_s, inductance_h - half_step_ohm_s
    flux = guess.copy()
    scale = max(float(np.abs(current).max()), 1e-6 * core.knee_a)
    banded = np.zeros((2, forced.size), order="F")
    for _ in range(_MAX_TURNS):
        exciting, slope = core.current_and_slope(flux)
        residual = np.diff(flux, axis=1) + ahead * exciting[:, 1:] - behind * exciting[:, :-1] - forced
        banded[0] = (1 + ahead * slope[:, 1:]).ravel()
        below = -(1 + behind * slope[:, 1:])
        below[:, -1] = 0.0  # the next row of the system is another phase
        banded[1] = below.ravel()
        solved = dtbtrs(banded, residual.ravel(), uplo="L")[0]  # its diagonal is never below one
        move = -solved.reshape(residual.shape)
        flux[:, 1:] = np.clip(flux[:, 1:] + move, -limit, limit)
        # Newton's error after a move is about the square of the move, so a move this small is the last.
        if float(np.abs(move * slope[:, 1:]).max()) <= 1e-7 * scale:
            return flux, core.current_and_slope(flux)[0]
    raise ForgeError(
        "core-not-solved",
        "the current transformer's flux did not converge",
        where="ct",
        hint="oversample more",
    )


def _coarse(
    current: Real, *, start_wb: float, step_s: float, core: Core, resistance_ohm: float, inductance_h: float
) -> Real:
    """March one phase by the implicit Euler rule over every eighth sample and interpolate."""
    coarse = current[::_COARSE_STEPS]
    knee, knee_a, exponent = core.knee_wb, core.knee_a, core.exponent
    rest = float(core.remanence_wb[0, 0])
    ratio = rest / knee
    shift = -rest / core.magnetising_h - knee_a * ratio * abs(ratio) ** (exponent - 1)
    linear = 1 / core.magnetising_h
    total = inductance_h + step_s * resistance_ohm
    flux = start_wb
    x = flux / knee
    linked = flux + inductance_h * (flux * linear + shift + knee_a * x * abs(x) ** (exponent - 1))
    out = [flux]
    last = float(coarse[0])
    for now in coarse[1:].tolist():
        linked += inductance_h * (now - last) + step_s * resistance_ohm * now
        last = now
        # flux + total·g(flux) = linked. Starting outside the root, Newton's method comes in monotonely.
        target = linked - total * shift
        bound = knee * (abs(target) / (total * knee_a)) ** (1 / exponent)
        flux = min(abs(target), bound)
        for _ in range(30):
            power = (flux / knee) ** (exponent - 1)
            excess = flux + total * (flux * linear + knee_a * flux / knee * power) - abs(target)
            move = excess / (1 + total * (linear + exponent * knee_a / knee * power))
            flux -= move
            if abs(move) < 1e-6 * knee:
                break
        flux = flux if target > 0 else -flux
        linked = linked - step_s * resistance_ohm * ((linked - flux) / total)
        out.append(flux)
    places = np.arange(coarse.size) * _COARSE_STEPS
    return np.asarray(np.interp(np.arange(current.size), places, np.array(out)))
