"""Anti-alias filters before the converter, and the band-pass filters that some relays put behind it."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.signal import buttap, lfilter

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.checks import need_not_negative, need_one_of, need_positive
from analyzer.forge.instruments.linear import ModalSystem

Real = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class AntiAlias:
    """Analogue low-pass in front of the converter.

    Parameters
    ----------
    kind : {"butterworth", "rc"}
        An RC element is of the first order.
    cutoff_hz : float
        Where the gain has fallen by 3 dB. [Hz]
    order : int
        1 to 8.

    Raises
    ------
    ForgeError
        If a value is outside its range.
    """

    kind: Literal["butterworth", "rc"]
    cutoff_hz: float
    order: int = 1

    def __post_init__(self) -> None:
        need_one_of(self.kind, ("butterworth", "rc"), where="kind")
        need_positive(cutoff_hz=self.cutoff_hz)
        if not 1 <= self.order <= 8:
            raise ForgeError("bad-value", f"order {self.order} is not between 1 and 8", where="order")
        if self.kind == "rc" and self.order != 1:
            raise ForgeError("bad-value", "an RC element is of order 1", where="order")

    def system(self) -> ModalSystem:
        """Transfer function, gain one at frequency zero."""
        omega = 2 * math.pi * self.cutoff_hz
        poles = omega * np.asarray(buttap(self.order)[1], dtype=complex)
        poles.imag[np.abs(poles.imag) < 1e-9 * omega] = 0.0  # an odd order's own pole is real
        return ModalSystem.all_pole(poles, complex(np.prod(-poles)))


@dataclass(frozen=True, slots=True, kw_only=True)
class RelayFilter:
    """Digital band-pass that a relay puts before it stores its samples.

    Parameters
    ----------
    kind : {"full-cycle-cosine", "half-cycle-cosine", "mimic-full-cycle-cosine"}
        The cosine filters take the fundamental out of a cycle or half of one; the mimic takes an exponential
        of its own time constant off first.
    mimic_time_constant_s : float
        Of the mimic; not used by the others. [s]
    keep_every : int
        Of the filtered samples only each such one is stored.
    applies_to : {"currents", "all"}

    Raises
    ------
    ForgeError
        If a value is outside its range.

    References
    ----------
    Cosine filters and digital mimic as in the relaying literature (Phadke and Thorp, Computer Relaying for
    Power Systems; Benmouyal, IEEE Trans. PWRD 10(2), 1995), from memory.
    """

    kind: Literal["full-cycle-cosine", "half-cycle-cosine", "mimic-full-cycle-cosine"]
    mimic_time_constant_s: float = 0.0
    keep_every: int = 1
    applies_to: Literal["currents", "all"] = "currents"

    def __post_init__(self) -> None:
        need_one_of(
            self.kind, ("full-cycle-cosine", "half-cycle-cosine", "mimic-full-cycle-cosine"), where="kind"
        )
        need_one_of(self.applies_to, ("currents", "all"), where="applies_to")
        need_not_negative(mimic_time_constant_s=self.mimic_time_constant_s)
        if self.kind.startswith("mimic") and self.mimic_time_constant_s == 0:
            raise ForgeError("bad-value", "a mimic needs its time constant", where="mimic_time_constant_s")
        if self.keep_every < 1:
            raise ForgeError("bad-value", f"{self.keep_every} is not at least 1", where="keep_every")

    def taps(self, *, sample_rate_hz: float, nominal_freq_hz: float) -> Real:
        """Impulse response; the gain at the nominal frequency is one.

        Raises
        ------
        ForgeError
            If a cycle does not hold a whole number of samples, a multiple of four.
        """
        per_cycle = sample_rate_hz / nominal_freq_hz
        n = round(per_cycle)
        if abs(per_cycle - n) > 1e-6 * per_cycle or n % 4 or n < 4:
            raise ForgeError(
                "bad-value",
                f"{per_cycle:g} samples per cycle do not suit a cycle filter",
                where="relay_filter",
                hint="use a whole multiple of four",
            )
        length = n // 2 if self.kind == "half-cycle-cosine" else n
        taps = np.cos(2 * np.pi * np.arange(length) / n)
        if self.kind.startswith("mimic"):
            memory = self.mimic_time_constant_s * sample_rate_hz
            taps = np.convolve(taps, [1 + memory, -memory])
        return np.asarray(taps / abs(self._at(taps, 1 / n)))

    @staticmethod
    def _at(taps: Real, cycles_per_sample: float) -> complex:
        return complex((taps * np.exp(-2j * np.pi * cycles_per_sample * np.arange(taps.size))).sum())

    def response(self, freq_hz: float, *, sample_rate_hz: float, nominal_freq_hz: float) -> complex:
        """Complex gain at a frequency."""
        taps = self.taps(sample_rate_hz=sample_rate_hz, nominal_freq_hz=nominal_freq_hz)
        return self._at(taps, freq_hz / sample_rate_hz)

    def memory_samples(self, *, sample_rate_hz: float, nominal_freq_hz: float) -> int:
        """Earlier samples that an output rests on."""
        return self.taps(sample_rate_hz=sample_rate_hz, nominal_freq_hz=nominal_freq_hz).size - 1


def apply_relay_filter(
    samples: Real, spec: RelayFilter, *, sample_rate_hz: float, nominal_freq_hz: float
) -> Real:
    """Filter recorded samples; the leading ones, for which there is no whole past, are dropped.

    Parameters
    ----------
    samples : ndarray, shape (channels, n)

    Returns
    -------
    ndarray, shape (channels, n - memory)
        Before any are left out by `keep_every`.
    """
    taps = spec.taps(sample_rate_hz=sample_rate_hz, nominal_freq_hz=nominal_freq_hz)
    return np.asarray(lfilter(taps, [1.0], samples, axis=-1)[:, taps.size - 1 :])
