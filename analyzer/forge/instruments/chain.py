"""The instruments in their physical order: from primary quantities to recorded samples, with truth.

background → transformers → class errors → wiring → residual connection → anti-alias filter → sampling with
skew → noise → converter → relay's own filter. Everything analogue runs on a grid several times finer than
the record, which starts a few cycles earlier; each element starts in the steady state found there, so that
the record holds no start-up of its own.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.background import background_signal
from analyzer.forge.instruments.chain_spec import (
    LEAD_CYCLES,
    Errors,
    FineGrid,
    InstrumentChain,
    fine_grid,
    reach,
    residual_connection,
)
from analyzer.forge.instruments.class_errors import (
    ErrorsByClass,
    TransformerError,
    apply_errors,
    draw_errors,
)
from analyzer.forge.instruments.converter import Noise, draw_noise, quantise
from analyzer.forge.instruments.ct import transform_current
from analyzer.forge.instruments.filters import apply_relay_filter
from analyzer.forge.instruments.linear import Tones, fit_tones, run_linear
from analyzer.forge.instruments.sampling import evaluate, sample_primary
from analyzer.forge.instruments.truth import ChainTruth, collect_truth
from analyzer.forge.instruments.vt import transform_voltage

Real = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Recording:
    """What the recorder stored, in primary terms.

    Parameters
    ----------
    channels : tuple of str
    sample_rate_hz : float
        Of what is stored. [Hz]
    time_s : ndarray, shape (n,)
    values : ndarray, shape (channels, n)
        Counts times the value of a count, or the samples themselves without a converter. [A], [V]
    counts : ndarray of int, shape (channels, n), or None
    value_per_count : ndarray, shape (channels,), or None
    truth : ChainTruth
    """

    channels: tuple[str, ...]
    sample_rate_hz: float
    time_s: Real
    values: Real
    counts: NDArray[np.int64] | None
    value_per_count: Real | None
    truth: ChainTruth


def record_signals(
    chain: InstrumentChain,
    *,
    current: Callable[[Real], Real],
    voltage: Callable[[Real], Real],
    start_s: float,
    n_samples: int,
    prefault_freq_hz: float,
    rng: np.random.Generator,
    breaks_s: Sequence[float] = (),
) -> Recording:
    """Record primary currents and voltages that are known at any instant.

    Parameters
    ----------
    chain : InstrumentChain
    current, voltage : callable
        From instants, shape (n,), to values, shape (3, n). They are also asked for a few cycles before
        `start_s`, where they must be in the steady state. [A], [V]
    start_s, n_samples, prefault_freq_hz
        As for `fine_grid`.
    rng : numpy.random.Generator
        Class errors and noise each draw from their own child of it, so that one does not change the other.
    breaks_s : sequence of float
        Instants at which a primary quantity or its slope jumps (inception, each pole's opening), without
        which a jump of voltage is only known to half a fine sample.

    Returns
    -------
    Recording

    Raises
    ------
    ForgeError
        If something in the chain cannot be simulated as stated.
    """
    grid = fine_grid(chain, start_s=start_s, n_samples=n_samples, prefault_freq_hz=prefault_freq_hz)
    currents, voltages = (
        sample_primary(
            quantity,
            start_s=grid.start_s,
            sample_rate_hz=grid.rate_hz,
            n_samples=grid.n_samples,
            breaks_s=breaks_s,
        )
        for quantity in (current, voltage)
    )
    return record_samples(
        chain, current=currents, voltage=voltages, grid=grid, prefault_freq_hz=prefault_freq_hz, rng=rng
    )


def record_samples(
    chain: InstrumentChain,
    *,
    current: Real,
    voltage: Real,
    grid: FineGrid,
    prefault_freq_hz: float,
    rng: np.random.Generator,
) -> Recording:
    """Record primary quantities given on the chain's fine grid; see `record_signals`.

    Parameters
    ----------
    current, voltage : ndarray, shape (3, grid.n_samples)
    """
    for name, signal in (("current", current), ("voltage", voltage)):
        if signal.shape != (3, grid.n_samples):
            raise ForgeError("bad-value", f"shape {signal.shape} is not (3, {grid.n_samples})", where=name)
        if not np.isfinite(signal).all():
            raise ForgeError("bad-value", "not all values are finite", where=name)
    error_rng, noise_rng = rng.spawn(2)
    time = grid.times_s()
    first_s = time[grid.first_converted]
    last_s = time[grid.first_converted + (grid.n_converted - 1) * chain.fine_per_sample]
    rate = grid.rate_hz

    def steady(signal: Real, *kinds: str) -> Tones:
        others = {part.freq_hz for part in chain.background if part.on in kinds and part.rms > 0}
        freqs = [prefault_freq_hz, *sorted(others - {prefault_freq_hz})]
        count = math.ceil(LEAD_CYCLES * rate / prefault_freq_hz)
        return fit_tones(signal, sample_rate_hz=rate, freqs_hz=freqs, n_samples=count)

    if chain.background:
        current = current + background_signal(chain.background, on="current", time_s=time)
        voltage = voltage + background_signal(chain.background, on="voltage", time_s=time)
    ct_result = None
    if chain.ct is not None:
        tones = steady(current, "current")
        ct_result = transform_current(current, chain.ct, sample_rate_hz=rate, tones=tones)
    primary_voltage = voltage
    if chain.vt is not None:
        voltage = transform_voltage(voltage, chain.vt, sample_rate_hz=rate, tones=steady(voltage, "voltage"))

    ct_errors = _errors(chain.ct_errors, error_rng, gapped=chain.ct is not None and chain.ct.core == "gapped")
    vt_errors = _errors(chain.vt_errors, error_rng, gapped=False)
    secondary = np.vstack([current if ct_result is None else ct_result.secondary_a, voltage])
    for rows, errors in ((slice(0, 3), ct_errors), (slice(3, 6), vt_errors)):
        if errors:
            secondary[rows] = apply_errors(
                secondary[rows], errors, sample_rate_hz=rate, freq_hz=chain.nominal_freq_hz
            )
    cut = reach(chain)
    wiring = np.eye(6) if chain.wiring is None else chain.wiring.matrix()
    terminals = residual_connection(chain.channels) @ wiring
    signal = terminals @ secondary[:, cut : secondary.shape[1] - cut]
    if chain.anti_alias is not None:
        tones = steady(signal, "current", "voltage")
        signal = run_linear(chain.anti_alias.system(), signal, sample_rate_hz=rate, tones=tones)

    skew = tuple(dict(chain.skew_s).get(name, 0.0) for name in chain.channels)
    samples = _take(signal, grid=grid, cut=cut, step=chain.fine_per_sample, skew=skew)
    noise = chain.noise or Noise()
    noise_rms = tuple(noise.current_rms_a if c[0] == "i" else noise.voltage_rms_v for c in chain.channels)
    if any(noise_rms):
        samples += draw_noise(
            noise_rms,
            n_samples=grid.n_converted,
            lag1_autocorrelation=noise.lag1_autocorrelation,
            rng=noise_rng,
        )
    values, counts, step, clipped = _convert(samples, chain)
    keep = 1 if chain.relay_filter is None else chain.relay_filter.keep_every
    stored_rate = chain.sample_rate_hz / keep
    memory = grid.n_converted - 1 - (values.shape[1] - 1) * keep
    start_s = first_s + memory / chain.sample_rate_hz
    truth = collect_truth(
        chain,
        terminals=terminals,
        ct_result=ct_result,
        vt_error=None if chain.vt is None else (voltage - primary_voltage, primary_voltage),
        time_s=time,
        window_s=(start_s, last_s),
        errors=(ct_errors, vt_errors),
        skew=skew,
        noise_rms=noise_rms,
        step=step,
        clipped=clipped,
    )
    return Recording(
        channels=chain.channels,
        sample_rate_hz=stored_rate,
        time_s=start_s + np.arange(values.shape[1]) / stored_rate,
        values=values,
        counts=counts,
        value_per_count=step,
        truth=truth,
    )


def _errors(errors: Errors, rng: np.random.Generator, *, gapped: bool) -> tuple[TransformerError, ...]:
    if isinstance(errors, ErrorsByClass):
        return draw_errors(errors, rng=rng, count=3, middle="in-core" if gapped else "added")
    return errors or ()


def _take(signal: Real, *, grid: FineGrid, cut: int, step: int, skew: tuple[float, ...]) -> Real:
    """Samples of the converter, each channel at its own instants."""
    rows = []
    for row, late in zip(signal, skew, strict=True):
        first = grid.first_converted - cut + late * grid.rate_hz
        rows.append(evaluate(row[None, :], first=first, step=step, n_samples=grid.n_converted)[0])
    return np.array(rows)


def _convert(
    samples: Real, chain: InstrumentChain
) -> tuple[Real, NDArray[np.int64] | None, Real | None, tuple[int, ...]]:
    """Stored values, counts and the value of a count, and how many samples were clipped."""
    full_scale, largest = None, 0
    clipped: tuple[int, ...] = (0,) * len(chain.channels)
    counts, step, values = None, None, samples
    if chain.converter is not None:
        largest = chain.converter.largest_count
        full_scale = [
            chain.converter.current_range_a if name[0] == "i" else chain.converter.voltage_range_v
            for name in chain.channels
        ]
        counts, step = quantise(samples, full_scale=full_scale, largest_count=largest)
        clipped = tuple(int(v) for v in (np.abs(counts) == largest).sum(axis=1))
        values = counts * step[:, None]
    spec = chain.relay_filter
    if spec is None:
        return values, counts, step, clipped
    filtered = apply_relay_filter(
        values, spec, sample_rate_hz=chain.sample_rate_hz, nominal_freq_hz=chain.nominal_freq_hz
    )
    if spec.applies_to == "currents":
        past = values.shape[1] - filtered.shape[1]
        voltages = [k for k, name in enumerate(chain.channels) if name[0] == "v"]
        filtered[voltages] = values[voltages, past:]
    values = filtered[:, :: spec.keep_every]
    if full_scale is not None:
        # The relay stores its filtered samples in the same counts.
        counts, step = quantise(values, full_scale=full_scale, largest_count=largest)
        values = counts * step[:, None]
    return values, counts, step, clipped
