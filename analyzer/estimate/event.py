"""One fault's estimate: window, loops, inception, phases and impedances, in this order."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from analyzer.estimate.evolution import change_within
from analyzer.estimate.impedance import Impedances, ZeroSequence, estimate_impedances
from analyzer.estimate.meeting import Meeting, meeting
from analyzer.estimate.phases import ChannelFit, fit_channel, half_sum
from analyzer.estimate.regression import Regression, regress_loop
from analyzer.estimate.rlfit import LoopFit, fit_frequency, fit_loop
from analyzer.theory.modes import PHASES, FaultType, Loop, Phase, faulted_phases, loops_of
from analyzer.waveform.events import Event
from analyzer.waveform.prefault import fit_prefault

_AFTER_INCEPTION = 3  # samples left out: an anti-alias filter's edge
_BEFORE_OPENING_CYCLES = 1 / 16
_MAX_CYCLES = 12.0
_MIN_CYCLES = 0.75
_FREQUENCY_FROM_CYCLES = 1.5
_LATER_STARTS = 2
_BEGIN_EXCESS = 2.0  # of mean square over the rest of the window
_MEDIAN_CHI2 = 0.455  # median of chi-square of one degree of freedom over its mean
_BEFORE_CHANGE_CYCLES = 1 / 32
_ALIKE = 0.005  # decay rates closer than this cannot both be in one linear fit
_SEARCH_CYCLES = 0.15  # before the first departing sample; a start at a voltage zero is seen late


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Estimate:
    """What the samples of one fault tell.

    Attributes
    ----------
    window : slice
        Samples of the event that the fit used.
    inception : Meeting
        Where the models before and during meet; the sampling interval before the first departing sample
        where they do not.
    inception_met : bool
        Whether they do.
    changed : int or None
        Sample at which the fault becomes another one, which ends the window.
    loops : tuple of (Loop, LoopFit)
    channels : tuple of ChannelFit
        Three currents, then three voltages where there are any, all by the same linear fit, so that what
        ties them together linearly also ties the fits; origin at inception.
    phases : mapping of phase to ChannelFit
        The currents of the faulted phases.
    impedances : Impedances or None
        None without voltages.
    regression : Regression or None
        R/L of the first loop by its waveforms; None without voltages.
    """

    window: slice
    inception: Meeting
    inception_met: bool
    changed: int | None
    loops: tuple[tuple[Loop, LoopFit], ...]
    channels: tuple[ChannelFit, ...]
    phases: dict[Phase, ChannelFit]
    impedances: Impedances | None
    regression: Regression | None


def estimate_fault(
    event: Event,
    fault_type: FaultType,
    *,
    k0: complex | None = None,
    zero_sequence_voltage: ZeroSequence = "known",
) -> Estimate | None:
    """Return the estimate of a fault, None where less than three quarters of a cycle are left of it.

    Parameters
    ----------
    event : Event
        A fault.
    fault_type : str
        Its type.
    k0, zero_sequence_voltage
        As in `estimate_impedances`.

    Returns
    -------
    Estimate or None
    """
    window = _window(event)
    cycle = 1.0 / (event.prefault.frequency_hz * event.sample_interval_s)
    if window.stop - window.start < max(_MIN_CYCLES * cycle, 6):
        return None
    if event.prefault.frequency_std_hz == 0.0:
        event = _with_own_frequency(event, fault_type, window)
    loops = _fit_loops(event, fault_type, window, event.first_s)
    changed = change_within(event, fault_type, window, tuple(fit for _, fit in loops))
    if changed is not None:
        window = slice(window.start, changed - max(1, round(_BEFORE_CHANGE_CYCLES * cycle)))
        loops = _fit_loops(event, fault_type, window, event.first_s)
    window, loops = _past_short_transient(event, fault_type, window, loops)
    met = None if event.follows_fault else _meeting(event, loops[0], window)
    inception = met or _unmet(event)
    loops = _fit_loops(event, fault_type, window, inception.time_s)
    channels = _fit_channels(event, window, loops, inception.time_s)
    impedances = None
    if len(channels) == 6:
        impedances = estimate_impedances(
            fault_type,
            event.prefault,
            channels,
            loops[0][1],
            inception_s=inception.time_s,
            k0=k0,
            zero_sequence_voltage=zero_sequence_voltage,
        )
    return Estimate(
        window=window,
        inception=inception,
        inception_met=met is not None,
        changed=changed,
        loops=loops,
        channels=channels,
        phases=_phase_fits(fault_type, loops, channels),
        impedances=impedances,
        regression=_regression(event, window, loops[0], impedances) if impedances else None,
    )


def _window(event: Event) -> slice:
    cycle = 1.0 / (event.prefault.frequency_hz * event.sample_interval_s)
    start = event.first + _AFTER_INCEPTION
    stop = event.end
    if stop < len(event.times_s):
        stop -= max(2, math.ceil(_BEFORE_OPENING_CYCLES * cycle))
    return slice(start, max(start, min(stop, start + round(_MAX_CYCLES * cycle))))


def _with_own_frequency(event: Event, fault_type: FaultType, window: slice) -> Event:
    """The event with the frequency that its fault currents have, where nothing before told it."""
    cycles = (window.stop - window.start) * event.sample_interval_s * event.prefault.frequency_hz
    if cycles < _FREQUENCY_FROM_CYCLES:
        return event
    loop = loops_of(fault_type)[0]
    rows = np.array(loop.weights)
    omega, std = fit_frequency(
        event.times_s[window],
        loop.of(event.currents_a[:, window]),
        omega_rad_per_s=event.prefault.omega_rad_per_s,
        in_band_rms=np.sqrt(rows**2 @ event.prefault.in_band_rms[:3] ** 2),
    )
    start_s, end_s = event.prefault.window_s
    before = slice(*np.searchsorted(event.times_s, (start_s, end_s + event.sample_interval_s / 2)))
    values = [event.currents_a] if event.voltages_v is None else [event.currents_a, event.voltages_v]
    prefault = fit_prefault(
        event.times_s[before],
        np.vstack(values)[:, before],
        t_ref_s=event.prefault.t_ref_s,
        frequency_hz=omega / (2 * math.pi),
        refine=False,
        n_currents=3,
    )
    return replace(event, prefault=replace(prefault, frequency_std_hz=std / (2 * math.pi)))


def _fit_loops(
    event: Event, fault_type: FaultType, window: slice, t_ref_s: float
) -> tuple[tuple[Loop, LoopFit], ...]:
    times_s, currents = event.times_s[window], event.currents_a[:, window]
    noise, in_band = event.prefault.noise_rms[:3], event.prefault.in_band_rms[:3]
    fits = []
    for loop in loops_of(fault_type):
        rows = np.array(loop.weights)
        fit = fit_loop(
            times_s,
            loop.of(currents),
            omega_rad_per_s=event.prefault.omega_rad_per_s,
            omega_std_rad_per_s=event.prefault.omega_std_rad_per_s,
            noise_rms=np.sqrt(rows**2 @ noise**2),
            in_band_rms=np.sqrt(rows**2 @ in_band**2),
            zero_std=np.sqrt(rows**2 @ event.prefault.covariance[:3, 0, 0]),
            t_ref_s=t_ref_s,
        )
        fits.append((loop, fit))
    return tuple(fits)


def _past_short_transient(
    event: Event, fault_type: FaultType, window: slice, loops: tuple[tuple[Loop, LoopFit], ...]
) -> tuple[slice, tuple[tuple[Loop, LoopFit], ...]]:
    """Begin the window later where its first eighth of a cycle, or two, is not of the model.

    A load beside the fault, or a filter's edge, leaves a transient of a millisecond or two there, which
    would bend everything else.
    """
    cycle = 1.0 / (event.prefault.frequency_hz * event.sample_interval_s)
    eighth = max(3, round(cycle / 8))
    for _ in range(_LATER_STARTS):
        if window.stop - window.start < 1.25 * cycle + eighth:
            break
        if not any(_begins_out_of_model(event, window, loop, fit, eighth) for loop, fit in loops):
            break
        window = slice(window.start + eighth, window.stop)
        loops = _fit_loops(event, fault_type, window, event.first_s)
    return window, loops


def _begins_out_of_model(event: Event, window: slice, loop: Loop, fit: LoopFit, eighth: int) -> bool:
    times_s = event.times_s[window]
    left = (loop.of(event.currents_a[:, window]) - fit.current(times_s)) / fit.noise_before_rms[:, None]
    power = np.mean(left**2, axis=0)
    begin, rest = float(power[:eighth].mean()), float(np.median(power[eighth:]) / _MEDIAN_CHI2)
    return begin > _BEGIN_EXCESS * max(rest, 1.0)


def _meeting(event: Event, loop_fit: tuple[Loop, LoopFit], window: slice) -> Meeting | None:
    loop, fit = loop_fit
    rows = np.array(loop.weights)
    period_s = 1.0 / event.prefault.frequency_hz
    earliest_s = event.first_s - max(_SEARCH_CYCLES * period_s, 3 * event.sample_interval_s)
    seen = slice(
        int(np.searchsorted(event.times_s, earliest_s)), max(event.first + _AFTER_INCEPTION + 1, window.start)
    )
    return meeting(
        event.prefault,
        rows,
        fit,
        times_s=event.times_s[seen],
        currents=loop.of(event.currents_a[:, seen]),
        earliest_s=earliest_s,
        latest_s=event.first_s + event.sample_interval_s / 2,  # that sample has departed, but for noise
    )


def _unmet(event: Event) -> Meeting:
    """The first departing sample and the one before it are all that is known of the inception."""
    step_s = event.sample_interval_s
    return Meeting(
        time_s=event.first_s - step_s / 2,
        std_s=step_s / math.sqrt(12),
        low_s=event.first_s - step_s,
        high_s=event.first_s,
        mismatch=0.0,
        freedom=0,
    )


def _fit_channels(
    event: Event, window: slice, loops: tuple[tuple[Loop, LoopFit], ...], t_ref_s: float
) -> tuple[ChannelFit, ...]:
    rates = np.array([fit.rate_used_per_s for _, fit in loops])
    stds = np.array([fit.decay_rate_std or 0.0 for _, fit in loops])
    rates, stds = _distinct(rates, stds)
    values = [event.currents_a] if event.voltages_v is None else [event.currents_a, event.voltages_v]
    stacked = np.vstack(values)[:, window]
    return tuple(
        fit_channel(
            event.times_s[window],
            stacked[k],
            t_ref_s=t_ref_s,
            omega_rad_per_s=event.prefault.omega_rad_per_s,
            omega_std_rad_per_s=event.prefault.omega_std_rad_per_s,
            rates_per_s=rates,
            rate_stds_per_s=stds,
            noise_rms=float(event.prefault.noise_rms[k]),
            in_band_rms=float(event.prefault.in_band_rms[k]),
            zero_std=math.sqrt(float(event.prefault.covariance[k, 0, 0])),
        )
        for k in range(len(stacked))
    )


def _regression(
    event: Event, window: slice, loop_fit: tuple[Loop, LoopFit], impedances: Impedances
) -> Regression | None:
    loop, fit = loop_fit
    zero_variance = event.prefault.covariance[:3, 0, 0]
    return regress_loop(
        event.times_s[window],
        loop.of(event.currents_a[:, window]),
        driving=impedances.driving,
        omega_rad_per_s=event.prefault.omega_rad_per_s,
        omega_std_rad_per_s=event.prefault.omega_std_rad_per_s,
        t_ref_s=fit.t_ref_s,
        noise_rms=fit.noise_rms,
        zero_std=np.sqrt(np.array(loop.weights) ** 2 @ zero_variance),
    )


def _phase_fits(
    fault_type: FaultType, loops: tuple[tuple[Loop, LoopFit], ...], channels: tuple[ChannelFit, ...]
) -> dict[Phase, ChannelFit]:
    """The faulted phases: of two loops from their fits, whose decays are apart even where nearly equal."""
    phases = faulted_phases(fault_type)
    if len(loops) == 1:
        return {phase: channels[PHASES.index(phase)] for phase in phases}
    (_, difference), (_, total) = loops
    return {phase: half_sum(difference, total, sign) for phase, sign in zip(phases, (1.0, -1.0), strict=True)}


def _distinct(
    rates: NDArray[np.float64], stds: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """For the other channels, alike decays are taken as one: two equal exponentials have no solution."""
    if len(rates) == 2 and abs(rates[0] - rates[1]) <= _ALIKE * abs(rates).max():
        return rates[:1], stds[:1]
    return rates, stds
