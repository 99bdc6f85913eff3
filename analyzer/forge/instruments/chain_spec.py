"""Specification of a whole instrument chain, and the instants at which it wants the primary quantities."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.background import Component
from analyzer.forge.instruments.checks import need_positive
from analyzer.forge.instruments.class_errors import ErrorsByClass, TransformerError
from analyzer.forge.instruments.converter import Converter, Noise
from analyzer.forge.instruments.ct import CurrentTransformer
from analyzer.forge.instruments.filters import AntiAlias, RelayFilter
from analyzer.forge.instruments.vt import CapacitiveVT
from analyzer.forge.instruments.wiring import PHASE_CHANNELS, Wiring

Real = NDArray[np.float64]
Errors = ErrorsByClass | tuple[TransformerError, ...] | None

CHANNELS = ("ia", "ib", "ic", "in", "va", "vb", "vc", "vn")
LEAD_CYCLES = 2  # of steady state before the first sample
_MIN_FINE_RATE_HZ = 20e3
_EDGE = 8  # fine samples beyond those used, for interpolation


def residual_connection(channels: tuple[str, ...]) -> Real:
    """Recorded channels from the six phase quantities, wired rightly, shape (channels, 6)."""
    rows = []
    for name in channels:
        if name in PHASE_CHANNELS:
            rows.append([float(name == phase) for phase in PHASE_CHANNELS])
        else:
            rows.append([float(name[0] == phase[0]) for phase in PHASE_CHANNELS])
    return np.array(rows)


@dataclass(frozen=True, slots=True, kw_only=True)
class InstrumentChain:
    """Everything between the primary and the record; None leaves an element out, which is an ideal one.

    Parameters
    ----------
    sample_rate_hz : float
        Of the converter. [Hz]
    nominal_freq_hz : float
        Of the system. [Hz]
    channels : tuple of str
        Among `CHANNELS`; "in" and "vn" are sums of the three secondaries.
    ct : CurrentTransformer or None
    vt : CapacitiveVT or None
    ct_errors, vt_errors : ErrorsByClass, tuple of three TransformerError, or None
        To be drawn or as stated, on top of what `ct` and `vt` do.
    background : tuple of Component
        Added to the primary quantities.
    wiring : Wiring or None
    anti_alias : AntiAlias or None
    skew_s : tuple of (str, float)
        Channels sampled later than the record's instants, and by how much. [s]
    noise : Noise or None
    converter : Converter or None
    relay_filter : RelayFilter or None
    oversampling : int
        Fine samples per record sample; raised where needed to 20 kHz.

    Raises
    ------
    ForgeError
        If a value is outside its range; `where` names it.
    """

    sample_rate_hz: float
    nominal_freq_hz: float
    channels: tuple[str, ...] = CHANNELS
    ct: CurrentTransformer | None = None
    vt: CapacitiveVT | None = None
    ct_errors: Errors = None
    vt_errors: Errors = None
    background: tuple[Component, ...] = ()
    wiring: Wiring | None = None
    anti_alias: AntiAlias | None = None
    skew_s: tuple[tuple[str, float], ...] = ()
    noise: Noise | None = None
    converter: Converter | None = None
    relay_filter: RelayFilter | None = None
    oversampling: int = 8

    def __post_init__(self) -> None:
        need_positive(sample_rate_hz=self.sample_rate_hz, nominal_freq_hz=self.nominal_freq_hz)
        if not self.channels or len(set(self.channels)) != len(self.channels):
            raise ForgeError("bad-value", "channels must be given once each", where="channels")
        for name in (*self.channels, *(c for c, _ in self.skew_s)):
            if name not in CHANNELS:
                raise ForgeError(
                    "bad-choice", f"{name!r} is not one of {', '.join(CHANNELS)}", where="channels"
                )
        for name, skew in self.skew_s:
            if not abs(skew) <= 1 / self.nominal_freq_hz:
                raise ForgeError("bad-value", f"{skew} s is more than a cycle for {name}", where="skew_s")
        if self.oversampling < 1:
            raise ForgeError("bad-value", f"{self.oversampling} is not at least 1", where="oversampling")
        for key, errors in (("ct_errors", self.ct_errors), ("vt_errors", self.vt_errors)):
            if isinstance(errors, tuple) and len(errors) != 3:
                raise ForgeError("bad-value", "three errors are needed", where=key)
            if isinstance(errors, ErrorsByClass) and errors.kind != key[:2]:
                raise ForgeError("bad-choice", f"{errors.class_name} is for a {errors.kind}", where=key)
        if self.relay_filter is not None:
            self.relay_filter.taps(sample_rate_hz=self.sample_rate_hz, nominal_freq_hz=self.nominal_freq_hz)

    @property
    def fine_per_sample(self) -> int:
        """Fine samples per sample of the converter."""
        return max(self.oversampling, math.ceil(_MIN_FINE_RATE_HZ / self.sample_rate_hz))


@dataclass(frozen=True, slots=True, kw_only=True)
class FineGrid:
    """Instants at which a chain wants the primary quantities, and where the converter samples among them."""

    start_s: float
    rate_hz: float
    n_samples: int
    first_converted: int
    n_converted: int

    @property
    def end_s(self) -> float:
        """The last instant."""
        return self.start_s + (self.n_samples - 1) / self.rate_hz

    def times_s(self) -> Real:
        """All instants."""
        return self.start_s + np.arange(self.n_samples) / self.rate_hz


def fine_grid(chain: InstrumentChain, *, start_s: float, n_samples: int, prefault_freq_hz: float) -> FineGrid:
    """Instants at which `record_samples` needs the primary quantities.

    Parameters
    ----------
    chain : InstrumentChain
    start_s : float
        Instant of the first stored sample. [s]
    n_samples : int
        Stored samples, at least 2.
    prefault_freq_hz : float
        Frequency before the record. [Hz]
    """
    need_positive(prefault_freq_hz=prefault_freq_hz)
    if n_samples < 2:
        raise ForgeError("bad-value", f"{n_samples} is not at least 2", where="n_samples")
    per_sample = chain.fine_per_sample
    rate = chain.sample_rate_hz * per_sample
    memory, keep = 0, 1
    if chain.relay_filter is not None:
        keep = chain.relay_filter.keep_every
        memory = chain.relay_filter.memory_samples(
            sample_rate_hz=chain.sample_rate_hz, nominal_freq_hz=chain.nominal_freq_hz
        )
    n_converted = memory + (n_samples - 1) * keep + 1
    slack = math.ceil(rate * max((abs(s) for _, s in chain.skew_s), default=0.0)) + 2 * reach(chain)
    lead = math.ceil(LEAD_CYCLES * rate / prefault_freq_hz) + slack
    return FineGrid(
        start_s=start_s - memory / chain.sample_rate_hz - lead / rate,
        rate_hz=rate,
        n_samples=lead + (n_converted - 1) * per_sample + 1 + slack,
        first_converted=lead,
        n_converted=n_converted,
    )


def reach(chain: InstrumentChain) -> int:
    """Fine samples that class errors may take from either end."""
    largest = 4 * 60.0  # minutes; no class permits more
    for errors in (chain.ct_errors, chain.vt_errors):
        if isinstance(errors, tuple):
            largest = max(largest, *(abs(e.phase_minutes) for e in errors))
    rate = chain.sample_rate_hz * chain.fine_per_sample
    return _EDGE + math.ceil(rate * largest / (60 * 360 * chain.nominal_freq_hz))
