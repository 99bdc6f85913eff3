"""What is read off a solution itself, not off its samples: phasors, natural modes, peaks, zero crossings."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from scipy.integrate import OdeSolution
from scipy.optimize import brentq, minimize_scalar

from analyzer.forge.circuit import ComplexArray, FloatArray
from analyzer.forge.errors import ForgeError
from analyzer.forge.nonlinear import Equations, OdeStretch, integrate
from analyzer.forge.solution import Solution
from analyzer.forge.story import bracketed_root
from analyzer.forge.stretches import BranchIndex, ExpmStretch, ModalStretch, Stretch, search_grid

_SQRT2 = float(np.sqrt(2.0))
_SAME_MODE = 1e-7  # eigenvalues closer than this are one mode; rounding splits equal ones by 1e-12
_INVISIBLE = 1e-10  # of the largest current
_PERIODIC_SHARE = 1e-8  # to which a periodic state repeats; the integration itself holds 1e-10 a step


@dataclass(frozen=True, slots=True, kw_only=True)
class Peak:
    """Largest magnitude of a phase current, at its exact instant.

    Parameters
    ----------
    value_a : float
        Not negative. [A]
    time_s : float
        After the record's start. [s]
    """

    value_a: float
    time_s: float


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class NaturalMode:
    """One exponential of the line currents after a switching.

    Parameters
    ----------
    time_constant_s : float
        Infinite where nothing damps it. [s]
    frequency_hz : float
        Zero for an offset; else that of a ringing. [Hz]
    amplitude_a : ndarray of complex, shape (3,)
        ``Re(amplitude exp((-1/time_constant + 2 pi j frequency)(t - t0)))`` per phase. [A]
    """

    time_constant_s: float
    frequency_hz: float
    amplitude_a: ComplexArray


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Alternating:
    """Power-frequency parts at an instant, RMS phasors: ``sqrt2 Re(phasor exp(j omega (t - instant)))``.

    Parameters
    ----------
    current_a, voltage_v : ndarray of complex, shape (3,)
        With all parts that decay as sources do, at that instant. [A, V]
    steady_current_a, steady_voltage_v : ndarray of complex, shape (3,)
        Without them. [A, V]
    """

    current_a: ComplexArray
    voltage_v: ComplexArray
    steady_current_a: ComplexArray
    steady_voltage_v: ComplexArray


def alternating(solution: Solution, stretch: Stretch, *, time_s: float) -> Alternating:
    """Return the power-frequency phasors of a stretch, referred to an instant.

    In a linear stretch they are its forced solution; while the frequency moves, the forced solution at the
    frequency of that instant; with an arc, the fundamental of the periodic state that the stretch tends to,
    found by shooting; with a core, the forced solution of its unsaturated inductance, so that all inrush
    counts as offset (an arc at the same time is left out).

    Parameters
    ----------
    solution : Solution
        Whose line currents and bus voltages are meant.
    stretch : Stretch
        One of its stretches.
    time_s : float
        The instant; within the stretch or not. [s]
    """
    near = solution.circuit.groups["near"]
    if isinstance(stretch, OdeStretch):
        equations = stretch.equations
        if equations.arc is not None and equations.core is None:
            return _periodic(equations, near, time_s)
        forced = _forced(equations, time_s)
        exponents, voltages, reference_s = forced.exponents, forced.voltages, time_s
        currents = forced.currents[near]
    elif isinstance(stretch, ModalStretch):
        exponents = stretch.exponents[: stretch.n_drives]
        currents = stretch.currents[near][:, : stretch.n_drives]
        voltages, reference_s = stretch.voltages[:, : stretch.n_drives], stretch.start_s
    elif isinstance(stretch, ExpmStretch):
        exponents, currents, voltages = _expm_forced(stretch)
        currents, reference_s = currents[near], stretch.start_s
    else:
        raise TypeError(f"unknown stretch {type(stretch).__name__}")
    turn = np.exp(exponents * (time_s - reference_s)) / _SQRT2
    steady = exponents.real == 0.0
    return Alternating(
        current_a=currents @ turn,
        voltage_v=voltages @ turn,
        steady_current_a=currents[:, steady] @ turn[steady],
        steady_voltage_v=voltages[:, steady] @ turn[steady],
    )


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Columns:
    exponents: ComplexArray
    states: ComplexArray
    currents: ComplexArray
    voltages: ComplexArray


def _forced(equations: Equations, time_s: float) -> _Columns:
    """Forced solution at an instant's frequency, peak phasors; without the arc, the cores unsaturated."""
    space, step = equations.space, time_s - equations.start_s
    omega = equations.omega_rad_s + equations.chirp_rad_s2 * step
    theta = equations.theta_rad + equations.omega_rad_s * step + 0.5 * equations.chirp_rad_s2 * step**2
    exponents = np.asarray(equations.sigma_per_s + 1j * omega, dtype=np.complex128)
    size = _SQRT2 * np.exp(equations.sigma_per_s * (time_s - equations.since_s) + 1j * theta)
    forcings = (equations.still + equations.moving * exponents) * size
    prescribed = equations.prescribed * size
    states = np.zeros((space.n, len(exponents)), dtype=np.complex128)
    branches, n_flux = equations.core_branches, space.n_flux
    basis, inertia = space.flux_basis[branches], np.eye(space.n)
    core_h = 0.0 if equations.core is None else equations.core.knee_flux_vs / equations.core.knee_current_a
    inertia[:n_flux, :n_flux] += core_h * np.linalg.solve(space.inertia, basis.T @ basis)
    for k, s in enumerate(exponents):
        forcings[branches, k] += core_h * s * prescribed[branches, k]
        push = space.b_g @ forcings[:, k] + space.b_i @ prescribed[:, k]
        states[:, k] = np.linalg.solve(s * inertia - space.a, push)
        forcings[branches, k] += core_h * s * (basis @ states[:n_flux, k])
    currents, voltages = space.outputs(states, states * exponents, forcings, prescribed)
    return _Columns(exponents=exponents, states=states, currents=currents, voltages=voltages)


def _expm_forced(stretch: ExpmStretch) -> tuple[ComplexArray, ComplexArray, ComplexArray]:
    n = stretch.space.n
    rotation = stretch.generator[n:, n:]
    count = rotation.shape[0] // 2
    exponents = np.array([complex(rotation[2 * k, 2 * k], rotation[2 * k + 1, 2 * k]) for k in range(count)])
    augmented = np.zeros((n + 2 * count, count), dtype=np.complex128)
    for k, s in enumerate(exponents):
        # (cos, sin) of a drive is the real part of (1, -j) exp(s t).
        augmented[n + 2 * k : n + 2 * k + 2, k] = [1.0, -1.0j]
        push = stretch.generator[:n, n:] @ augmented[n:, k]
        augmented[:n, k] = np.linalg.solve(s * np.eye(n) - stretch.space.a, push)
    return exponents, np.asarray(stretch.to_currents @ augmented), np.asarray(stretch.to_voltages @ augmented)


def _periodic(equations: Equations, near: BranchIndex, time_s: float) -> Alternating:
    """Shoot for the state that repeats after a cycle; drives that decay are left out."""
    lasting = equations.sigma_per_s == 0.0
    steady = replace(
        equations,
        chirp_rad_s2=0.0,
        sigma_per_s=equations.sigma_per_s[lasting],
        since_s=equations.since_s[lasting],
        still=equations.still[:, lasting],
        moving=equations.moving[:, lasting],
        prescribed=equations.prescribed[:, lasting],
    )
    start, period = equations.start_s, 2.0 * np.pi / equations.omega_rad_s
    state = _forced(steady, start).states.sum(axis=1).real
    scale = max(float(np.abs(state).max(initial=0.0)), 1e-300)
    miss = _cycle(steady, state, scale)(start + period) - state
    slope = np.zeros((len(state), len(state)))
    for k in range(len(state)):
        nudged = state.copy()
        nudged[k] += 1e-4 * scale
        slope[:, k] = (_cycle(steady, nudged, scale)(start + period) - nudged - miss) / (1e-4 * scale)
    # The map of a cycle is nearly affine, so one slope serves all steps.
    for _ in range(40):
        if np.abs(miss).max(initial=0.0) <= _PERIODIC_SHARE * scale:
            break
        state = state - np.linalg.lstsq(slope, miss, rcond=1e-10)[0]
        miss = _cycle(steady, state, scale)(start + period) - state
    else:
        raise ForgeError("forge-no-solution", "no periodic state was found", where="fault.arc")
    # Over a whole period the mean over equidistant points converges as fast as the integrand is smooth.
    times = start + period * np.arange(4096) / 4096
    currents, voltages = steady.evaluate(times, steady.states(times, _cycle(steady, state, scale)(times)))
    kernel = np.exp(-1j * equations.omega_rad_s * (times - time_s)) * (_SQRT2 / 4096)
    current, voltage = currents[near] @ kernel, voltages @ kernel
    return Alternating(
        current_a=current, voltage_v=voltage, steady_current_a=current, steady_voltage_v=voltage
    )


def _cycle(equations: Equations, state: FloatArray, scale: float) -> OdeSolution:
    stop_s = equations.start_s + 2.0 * np.pi / equations.omega_rad_s
    return integrate(equations, state, stop_s=stop_s, scale=scale).path


def natural_modes(solution: Solution, stretch: Stretch) -> tuple[NaturalMode, ...]:
    """Return the exponentials of the line currents in a linear stretch, the largest first.

    Equal modes are summed; conjugate pairs are given once. Empty where a stretch was integrated.
    """
    if not isinstance(stretch, ModalStretch):
        return ()
    exponents = stretch.exponents[stretch.n_drives :]
    columns = stretch.currents[solution.circuit.groups["near"]][:, stretch.n_drives :]
    largest = float(np.abs(stretch.currents[solution.circuit.groups["near"]]).max(initial=0.0))
    modes: list[tuple[complex, ComplexArray]] = []
    for exponent, column in zip(exponents, columns.T, strict=True):
        upper = complex(exponent.real, abs(exponent.imag))
        # Of a conjugate pair only the real part of the sum shows, which is that of the upper one doubled.
        column = np.conj(column) if exponent.imag < 0.0 else column
        for k, (known, total) in enumerate(modes):
            if abs(known - upper) <= _SAME_MODE * abs(upper):
                modes[k] = (known, total + column)
                break
        else:
            modes.append((upper, column))
    shown = [mode for mode in modes if np.abs(mode[1]).max() > _INVISIBLE * largest]
    shown.sort(key=lambda mode: -float(np.abs(mode[1]).max()))
    return tuple(
        NaturalMode(
            time_constant_s=float(-1.0 / exponent.real) if exponent.real < 0.0 else float("inf"),
            frequency_hz=float(exponent.imag / (2.0 * np.pi)),
            amplitude_a=column,
        )
        for exponent, column in shown
    )


def phase_peaks(solution: Solution, *, start_s: float, stop_s: float) -> tuple[Peak, Peak, Peak]:
    """Return each phase's largest |current| between two instants, exact in time and value.

    The extrema of the solution are bracketed on a grid finer than its fastest oscillation and then found by
    a root of its derivative, or by bounded minimisation where it was integrated.
    """
    near = solution.circuit.groups["near"]
    best = [Peak(value_a=0.0, time_s=start_s) for _ in range(3)]
    for stretch in _within(solution, start_s, stop_s):
        grid = search_grid(stretch, max(stretch.start_s, start_s), min(stretch.stop_s, stop_s))
        sizes = np.abs(stretch.outputs(grid, near)[0])
        for phase in range(3):
            peak = _peak_on(stretch, int(near[phase]), grid, sizes[phase], floor=best[phase].value_a)
            if peak is not None and peak.value_a > best[phase].value_a:
                best[phase] = peak
    return best[0], best[1], best[2]


def _peak_on(
    stretch: Stretch, branch: int, grid: FloatArray, size: FloatArray, *, floor: float
) -> Peak | None:
    # 32 points a cycle see a crest to 0.5 %; candidates further below the best cannot win.
    top = max(float(size.max()), floor)
    result: Peak | None = None
    for k in np.flatnonzero(size >= 0.98 * top):
        low, high = grid[max(int(k) - 1, 0)], grid[min(int(k) + 1, len(grid) - 1)]
        time_s = _extremum(stretch, branch, float(low), float(high), start=float(grid[int(k)]))
        value = abs(float(stretch.current(branch, np.array([time_s]))[0]))
        if result is None or value > result.value_a:
            result = Peak(value_a=value, time_s=time_s)
    return result


def _extremum(stretch: Stretch, branch: int, low: float, high: float, *, start: float) -> float:
    if isinstance(stretch, ModalStretch | ExpmStretch):
        linear = stretch

        def slope(t: float) -> float:
            return float(linear.slope(branch, np.array([t]))[0])

        if slope(low) * slope(high) < 0.0:
            return float(brentq(slope, low, high, xtol=1e-15))
        return start

    def height(t: float) -> float:
        return -abs(float(stretch.current(branch, np.array([t]))[0]))

    found = minimize_scalar(height, bounds=(low, high), method="bounded", options={"xatol": 1e-12})
    return float(found.x) if found.fun < height(start) else start


def longest_wait(solution: Solution, phase: int, *, start_s: float, stop_s: float) -> float:
    """Return the longest time that a line current goes without a zero crossing, between two instants. [s]."""
    branch = int(solution.circuit.groups["near"][phase])
    zeros = [start_s, stop_s]
    for stretch in _within(solution, start_s, stop_s):
        grid = search_grid(stretch, max(stretch.start_s, start_s), min(stretch.stop_s, stop_s))
        values = stretch.current(branch, grid)

        def current(t: float, stretch: Stretch = stretch) -> float:
            return float(stretch.current(branch, np.array([t]))[0])

        for k in np.flatnonzero(values[:-1] * values[1:] < 0.0):
            zeros.append(bracketed_root(current, float(grid[int(k)]), float(grid[int(k) + 1])))
    return float(np.diff(np.sort(zeros)).max())


def _within(solution: Solution, start_s: float, stop_s: float) -> list[Stretch]:
    return [s for s in solution.stretches if s.stop_s > start_s and s.start_s < stop_s]
