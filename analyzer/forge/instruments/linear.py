"""Linear elements of the chain, run exactly between samples and started in the steady state.

A transfer function is kept as a sum of first-order terms, which needs no stepping: each term is one recursive
filter whose input weights are the exact integrals of a cubic through four neighbouring samples. The error is
that of the cubic, about 0.02 (omega h)^4 of a sinusoid sampled every h seconds (1e-10 at 50 Hz and 38.4 kHz);
at a step or a kink of the input it is local and of the order of the step times h over the response time.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.signal import lfilter

from analyzer.forge.errors import ForgeError

Real = NDArray[np.float64]
Complex = NDArray[np.complex128]

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(24)


@dataclass(frozen=True, kw_only=True, eq=False)
class ModalSystem:
    """Transfer function H(s) = direct + sum of residues / (s - poles), its poles distinct.

    Parameters
    ----------
    poles, residues : ndarray of complex, shape (m,)
        In 1/s. Conjugate poles must both be there, with conjugate residues.
    direct : float
        Gain at infinite frequency.
    """

    poles: Complex
    residues: Complex
    direct: float

    @classmethod
    def from_state_space(cls, a: ArrayLike, b: ArrayLike, c: ArrayLike, d: float) -> ModalSystem:
        """Diagonalise dx/dt = A x + b u, y = c x + d u.

        Raises
        ------
        ForgeError
            If the poles coincide so nearly that the terms cannot be told apart, or are not stable.
        """
        poles, vectors = np.linalg.eig(np.asarray(a, dtype=float))
        if np.linalg.cond(vectors) > 1e9:
            raise ForgeError(
                "repeated-poles", "two modes of a linear instrument coincide", hint="change a value"
            )
        left = np.linalg.solve(vectors, np.asarray(b, dtype=complex))
        return cls._checked(poles, (np.asarray(c, dtype=float) @ vectors) * left, d)

    @classmethod
    def all_pole(cls, poles: ArrayLike, gain: complex) -> ModalSystem:
        """Build H(s) = gain / product of (s - poles).

        Raises
        ------
        ForgeError
            If a pole is not in the left half plane.
        """
        roots = np.asarray(poles, dtype=complex)
        gaps = roots[:, None] - roots[None, :]
        np.fill_diagonal(gaps, 1.0)
        return cls._checked(roots, gain / np.prod(gaps, axis=1), 0.0)

    @classmethod
    def _checked(cls, poles: Complex, residues: Complex, direct: float) -> ModalSystem:
        if not np.all(poles.real < 0):
            raise ForgeError("unstable-instrument", "a linear instrument has a mode that does not decay")
        return cls(
            poles=np.asarray(poles, dtype=complex), residues=np.asarray(residues, complex), direct=direct
        )

    def response(self, freq_hz: ArrayLike) -> Complex:
        """Complex gain at the given frequencies, shape as given."""
        s = 2j * np.pi * np.asarray(freq_hz, dtype=float)[..., None]
        return np.asarray(self.direct + (self.residues / (s - self.poles)).sum(axis=-1))

    def group_delay_s(self, freq_hz: float) -> float:
        """Minus the derivative of the phase with respect to angular frequency, exactly."""
        s = 2j * np.pi * freq_hz
        slope = -(self.residues / (s - self.poles) ** 2).sum()
        return float(-(slope / self.response(freq_hz)).real)

    @cached_property
    def slowest_s(self) -> float:
        """Longest time constant of its modes."""
        return float(-1 / self.poles.real.max()) if self.poles.size else 0.0


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Tones:
    """Steady sinusoids that a signal consists of before its first sample.

    Parameters
    ----------
    freqs_hz : ndarray, shape (k,)
    amplitudes : ndarray of complex, shape (k, channels)
        Peak values; the signal is the real part of amplitudes·exp(j 2 pi f t), t counted from the first
        sample.
    """

    freqs_hz: Real
    amplitudes: Complex


def fit_tones(signal: Real, *, sample_rate_hz: float, freqs_hz: ArrayLike, n_samples: int) -> Tones:
    """Find the steady sinusoids in the first samples by least squares.

    Parameters
    ----------
    signal : ndarray, shape (channels, n)
    freqs_hz : array_like, shape (k,)
        Frequencies known to be there. [Hz]
    n_samples : int
        How many samples, at least two per tone, belong to the steady state.
    """
    freqs = np.atleast_1d(np.asarray(freqs_hz, dtype=float))
    t = np.arange(n_samples) / sample_rate_hz
    angle = 2 * np.pi * np.outer(t, freqs)
    basis = np.hstack([np.cos(angle), -np.sin(angle)])
    # Normal equations: a few tones over whole cycles are well conditioned, and a small system keeps the
    # linear algebra library from starting threads, which cost more than they save on busy cores.
    gram, moments = basis.T @ basis, basis.T @ signal[:, :n_samples].T
    coefficients = np.linalg.lstsq(gram, moments, rcond=None)[0]
    return Tones(freqs_hz=freqs, amplitudes=coefficients[: freqs.size] + 1j * coefficients[freqs.size :])


def hold_weights(pole: complex, step_s: float) -> Complex:
    """Weights of samples k-1, k, k+1, k+2 in the state of one mode after the step from k to k+1."""
    x = (_NODES + 1) / 2
    kernel = np.exp(pole * step_s * (1 - x)) * _WEIGHTS / 2 * step_s
    cubic = np.stack(
        [
            -x * (x - 1) * (x - 2) / 6,
            (x + 1) * (x - 1) * (x - 2) / 2,
            -(x + 1) * x * (x - 2) / 2,
            (x + 1) * x * (x - 1) / 6,
        ]
    )
    return np.asarray(cubic @ kernel)


def run_linear(system: ModalSystem, signal: Real, *, sample_rate_hz: float, tones: Tones) -> Real:
    """Response of a linear element to sampled signals, in the steady state of `tones` at the first sample.

    Parameters
    ----------
    system : ModalSystem
    signal : ndarray, shape (channels, n)
        Uniformly sampled, n at least 4.
    sample_rate_hz : float
    tones : Tones
        What the signal consists of before its first sample; anything else in it starts there.

    Returns
    -------
    ndarray, shape (channels, n)
        The cubic reaches one sample ahead, so the last sample rests on an extrapolation.
    """
    step = 1 / sample_rate_hz
    out = system.direct * signal
    before = 4 * signal[:, :1] - 6 * signal[:, 1:2] + 4 * signal[:, 2:3] - signal[:, 3:4]
    after = 4 * signal[:, -1:] - 6 * signal[:, -2:-1] + 4 * signal[:, -3:-2] - signal[:, -4:-3]
    padded = np.hstack([before, signal, after])
    s_tone = 2j * np.pi * tones.freqs_hz[:, None]
    for pole, residue in zip(system.poles, system.residues, strict=True):
        if pole.imag < 0:
            continue  # its conjugate stands for both
        start = 0.5 * (
            tones.amplitudes / (s_tone - pole) + tones.amplitudes.conj() / (s_tone.conj() - pole)
        ).sum(axis=0)
        weights = hold_weights(pole, step)[::-1]
        if pole.imag == 0:
            state = _recursive(padded, weights.real, float(np.exp(pole.real * step)), start.real)
            out += residue.real * state
        else:
            state = _recursive(padded, weights, np.exp(pole * step), start)
            out += 2 * (residue * state).real
    return out


def _recursive(
    padded: Real, weights: NDArray[np.inexact], ratio: complex, start: NDArray[np.inexact]
) -> Complex:
    """x[k+1] = ratio x[k] + weights · padded[k+3 … k], x[0] = start."""
    u0, u1, u2 = padded[:, 0], padded[:, 1], padded[:, 2]
    delay = np.stack(
        [
            weights[1] * u2 + weights[2] * u1 + weights[3] * u0 + ratio * start,
            weights[2] * u2 + weights[3] * u1,
            weights[3] * u2,
        ],
        axis=-1,
    )
    rest, _ = lfilter(weights, np.array([1, -ratio]), padded[:, 3:], axis=-1, zi=delay)
    return np.hstack([start[:, None], rest])
