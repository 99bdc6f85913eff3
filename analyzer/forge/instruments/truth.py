"""What a chain did to a record, in the terms of the findings."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from analyzer.forge.instruments.chain_spec import InstrumentChain, residual_connection
from analyzer.forge.instruments.class_errors import TransformerError
from analyzer.forge.instruments.ct import CtResult, SaturationTruth, saturation_truth

Real = NDArray[np.float64]

# Our choice: a voltage error below a thousandth of the primary is not a transient that anybody put in.
_VT_TRANSIENT_FLOOR = 1e-3


@dataclass(frozen=True, slots=True, kw_only=True)
class PutIn:
    """A departure that was put in.

    Parameters
    ----------
    code : str
        Departure code of the findings.
    channels : tuple of str
        Recorded channels that show it.
    strength : float
        How strong it is, in terms of `measure`.
    measure : str
        What `strength` counts, with its unit.
    time_s : float or None
        When it begins at the transformers, on the record's clock, if it has a beginning. [s]
    """

    code: str
    channels: tuple[str, ...]
    strength: float
    measure: str
    time_s: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class ChainTruth:
    """Everything the chain did, exactly.

    Instants are those at the transformers; the recorded waveform is later by the filter's delay.

    Parameters
    ----------
    departures : tuple of PutIn
    saturation : SaturationTruth or None
        Per phase, over the record; None without a current transformer that has a knee.
    ct_time_constant_s : float or None
        Secondary time constant of the unsaturated current transformer. [s]
    ct_errors, vt_errors : tuple of TransformerError
        Per phase; empty where none were applied.
    filter_delay_s : float
        Group delay of the anti-alias filter at the nominal frequency, common to all channels. [s]
    filter_delay_at_zero_s : float
        The same for slow signals, such as an offset. [s]
    filter_gain : complex
        Gain of the anti-alias filter at the nominal frequency.
    relay_filter_gain : complex
        Gain of the relay's filter at the nominal frequency; 1 without one.
    skew_s : tuple of float
        How much later each channel was sampled. [s]
    noise_rms : tuple of float
        Per channel, in its unit, in front of the converter.
    value_per_count : tuple of float
        Per channel; empty without a converter.
    clipped_samples : tuple of int
        Per channel, samples at the end of the range.
    solver_error_a : float
        How far currents may be off because the core is solved numerically. [A]
    """

    departures: tuple[PutIn, ...]
    saturation: SaturationTruth | None
    ct_time_constant_s: float | None
    ct_errors: tuple[TransformerError, ...]
    vt_errors: tuple[TransformerError, ...]
    filter_delay_s: float
    filter_delay_at_zero_s: float
    filter_gain: complex
    relay_filter_gain: complex
    skew_s: tuple[float, ...]
    noise_rms: tuple[float, ...]
    value_per_count: tuple[float, ...]
    clipped_samples: tuple[int, ...]
    solver_error_a: float

    def to_dict(self) -> dict[str, Any]:
        """Plain values for JSON: complex gains as magnitude and angle, no NaN."""
        plain: dict[str, Any] = _plain(dataclasses.asdict(self))
        return plain


def collect_truth(
    chain: InstrumentChain,
    *,
    terminals: Real,
    ct_result: CtResult | None,
    vt_error: tuple[Real, Real] | None,
    time_s: Real,
    window_s: tuple[float, float],
    errors: tuple[tuple[TransformerError, ...], tuple[TransformerError, ...]],
    skew: tuple[float, ...],
    noise_rms: tuple[float, ...],
    step: Real | None,
    clipped: tuple[int, ...],
) -> ChainTruth:
    """Gather what a chain did from its parts' results.

    Parameters
    ----------
    chain : InstrumentChain
    terminals : ndarray, shape (channels, 6)
        Recorded channels from the phases' secondaries, as wired.
    ct_result : CtResult or None
    vt_error : pair of ndarray, shape (3, n), or None
        What the voltage transformers added, and their input.
    time_s : ndarray, shape (n,)
        Instants of both.
    window_s : (float, float)
        Of the record.
    errors : pair of tuple of TransformerError
        Of current and voltage transformers.
    skew, noise_rms, step, clipped
        Per channel, see `ChainTruth`.
    """
    put_in: list[PutIn] = []
    saturation = None
    inside = (time_s >= window_s[0]) & (time_s <= window_s[1])

    def fed_by(sources: Sequence[int]) -> tuple[str, ...]:
        seen = np.any(terminals[:, list(sources)] != 0, axis=1)
        return tuple(name for name, yes in zip(chain.channels, seen, strict=True) if yes)

    if chain.ct is not None and ct_result is not None:
        if chain.ct.knee is not None:
            saturation = saturation_truth(ct_result, time_s=time_s, start_s=window_s[0], end_s=window_s[1])
            phases = [k for k, t in enumerate(saturation.first_crossing_s) if t is not None]
            if phases:
                put_in.append(
                    PutIn(
                        code="ct-saturation",
                        channels=fed_by(phases),
                        strength=max(saturation.peak_magnetising_a),
                        measure="largest magnetising current, primary A",
                        time_s=min(t for t in saturation.first_crossing_s if t is not None),
                    )
                )
        if chain.ct.core == "gapped":
            put_in.append(
                PutIn(
                    code="gapped-ct",
                    channels=fed_by((0, 1, 2)),
                    strength=chain.ct.time_constant_s,
                    measure="secondary time constant, s",
                )
            )
    if vt_error is not None:
        error, crest = vt_error[0][:, inside], float(np.abs(vt_error[1]).max())
        # Harmonics pass with an error of their own, which was there before the record and is no transient.
        level = _VT_TRANSIENT_FLOOR * crest + np.abs(vt_error[0][:, time_s < window_s[0]]).max()
        cycle = max(1, round(1 / (chain.nominal_freq_hz * (time_s[1] - time_s[0]))))
        strength = np.sqrt(2 * _largest_mean(error**2, cycle)) / crest
        hit = [int(k) for k in np.flatnonzero(strength * crest > level)]
        if hit:
            begun = np.abs(error[hit]).max(axis=0) > level
            put_in.append(
                PutIn(
                    code="voltage-transformer-transient",
                    channels=fed_by([3 + k for k in hit]),
                    strength=float(strength.max()),
                    measure="largest RMS over a cycle of the voltage error, over that of the primary",
                    time_s=float(time_s[inside][np.argmax(begun)]),
                )
            )
    if any(clipped):
        put_in.append(
            PutIn(
                code="clipped-channel",
                channels=tuple(c for c, n in zip(chain.channels, clipped, strict=True) if n),
                strength=float(max(clipped)),
                measure="samples at the end of the range",
            )
        )
    relay_gain = 1 + 0j
    if chain.relay_filter is not None:
        rates = {"sample_rate_hz": chain.sample_rate_hz, "nominal_freq_hz": chain.nominal_freq_hz}
        relay_gain = chain.relay_filter.response(chain.nominal_freq_hz, **rates)
        every = chain.relay_filter.applies_to == "all"
        put_in.append(
            PutIn(
                code="filtered-record",
                channels=tuple(c for c in chain.channels if every or c[0] == "i"),
                strength=chain.relay_filter.memory_samples(**rates) / chain.sample_rate_hz,
                measure="memory of the filter, s",
            )
        )
    wrong = terminals - residual_connection(chain.channels)
    if wrong.any():
        put_in.append(
            PutIn(
                code="wiring",
                channels=tuple(c for c, row in zip(chain.channels, wrong, strict=True) if row.any()),
                strength=float(np.abs(wrong).max()),
                measure="largest wrong coefficient between true and recorded phases",
            )
        )
    delay, delay_zero, gain = 0.0, 0.0, 1 + 0j
    if chain.anti_alias is not None:
        system = chain.anti_alias.system()
        delay, delay_zero = system.group_delay_s(chain.nominal_freq_hz), system.group_delay_s(0.0)
        gain = complex(system.response(chain.nominal_freq_hz))
    return ChainTruth(
        departures=tuple(put_in),
        saturation=saturation,
        ct_time_constant_s=None if chain.ct is None else chain.ct.time_constant_s,
        ct_errors=errors[0],
        vt_errors=errors[1],
        filter_delay_s=delay,
        filter_delay_at_zero_s=delay_zero,
        filter_gain=gain,
        relay_filter_gain=relay_gain,
        skew_s=skew,
        noise_rms=noise_rms,
        value_per_count=() if step is None else tuple(float(v) for v in step),
        clipped_samples=clipped,
        solver_error_a=0.0 if ct_result is None else ct_result.error_a,
    )


def _largest_mean(squares: Real, length: int) -> Real:
    """Largest mean over `length` neighbours, or over all if there are fewer; one value per row."""
    length = min(length, squares.shape[1])
    total = np.pad(np.cumsum(squares, axis=1), ((0, 0), (1, 0)))
    return np.asarray((total[:, length:] - total[:, :-length]).max(axis=1) / length)


def _plain(value: Any) -> Any:
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    if isinstance(value, complex):
        return {"magnitude": abs(value), "angle_deg": math.degrees(math.atan2(value.imag, value.real))}
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value
