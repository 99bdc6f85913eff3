"""Where in a long stretch something happens: one pass, part by part, in bounded memory.

In every half cycle each signal is held against its own last two cycles: a sinusoid of any frequency obeys
``x[n] - 2 cos(w T) x[n - T] + x[n - 2 T] = 0`` for every lag T, and a load that rises evenly does so nearly
with a lag of a cycle. What is left over, RMS of the half cycle, tells a change that comes at once.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from itertools import chain, pairwise

import numpy as np
from numpy.typing import NDArray

from analyzer.records import Record
from analyzer.waveform.stretches import Stretch, part_of

Sum = tuple[tuple[str, float], ...]

# A longer stretch than either is scanned: the search of 2**19 samples takes a second and 250 MB.
LONG_S = 20.0
LONG_SAMPLES = 1 << 19
_PART_NUMBERS = 1 << 20  # samples of all channels together that are in memory at once
_LEAST_HALF_CYCLES = 64  # of a part, so that their median tells what is quiet
_LONGEST_WINDOW = 1 << 18  # samples
# Prefault takes ten cycles, and a fifth of a window's half cycles are to be quiet ones.
_BEFORE_CYCLES = 20.0
_AFTER_CYCLES = 50.0
# The search takes no change for an event below a tenth of the current; these leave room below that.
_NOISE_FACTOR = 3.0  # times the median; white noise gets there once in 1e10 half cycles of eight samples
_SHARE = 0.05  # of the RMS one cycle before
_STEPS = 3.0  # of the converter
_STILL_ON = 1.5  # times the level before: the fault is not over


@dataclass(frozen=True, slots=True, eq=False)
class _Run:
    """Half cycles with a change, one after the other: samples, and each signal's RMS before and after."""

    first: int
    stop: int
    before: NDArray[np.float64]
    after: NDArray[np.float64]


def is_long(stretch: Stretch) -> bool:
    """Return whether a stretch is to be scanned: more than 20 s, or than 2**19 samples."""
    n_samples = stretch.stop - stretch.first
    return n_samples > LONG_SAMPLES or n_samples > LONG_S * stretch.rate_hz


def searched_parts(
    record: Record, signals: Sequence[Sum], stretch: Stretch, *, frequency_hz: float
) -> tuple[Stretch, ...]:
    """Return the stretch itself where it is short, and the windows in which something happens of a long one.

    Parameters and errors as of :func:`active_windows`.
    """
    if not is_long(stretch):
        return (stretch,)
    return active_windows(record, signals, stretch, frequency_hz=frequency_hz)


def active_windows(
    record: Record, signals: Sequence[Sum], stretch: Stretch, *, frequency_hz: float
) -> tuple[Stretch, ...]:
    """Return the short windows of a stretch in which any signal changes from one cycle to the next.

    Parameters
    ----------
    record : Record
    signals : sequence of Sum
        Of each signal the channels that are summed, and the factor of each.
    stretch : Stretch
        Samples of `record`, at a rate that carries the power frequency.
    frequency_hz : float
        Power frequency, to within a few percent. [Hz]

    Returns
    -------
    tuple of Stretch
        In the order of time, each with 20 cycles before its first change and 50 after its last where there
        are as many. No change is in two of them. A window is 2**18 samples at most, and its margins.

    Raises
    ------
    RecordError
        If a channel is not there, or its unit or ratio is not known.

    Notes
    -----
    A half cycle counts as changed when in any signal what is left over exceeds three times its median in
    this part of the record or the one before, whichever is less, 5 % of the signal one cycle before, and
    three steps of the converter. Windows are joined where their margins meet, and where a signal has not come
    back to 1.5 times its level before: a fault and its clearing a while later are one window. Missing samples
    show no change. Limits: our choice.
    """
    half, lag = max(2, round(0.5 * stretch.rate_hz / frequency_hz)), round(stretch.rate_hz / frequency_hz)
    runs: list[_Run] = []
    first, before = -1, np.zeros(len(signals))
    level = np.zeros((len(signals), 1))
    was_active = False
    for active, level, begin in _active_half_cycles(record, signals, stretch, half=half, lag=lag):
        for block in map(int, np.flatnonzero(active != np.concatenate(([was_active], active[:-1])))):
            if active[block]:
                # Levels are of one cycle before: at the first half cycle of a run from before the change,
                # at the first after it from after the change, which has shown for two cycles.
                first, before = begin + block * half, level[:, block].copy()
            else:
                runs.append(_Run(first, begin + block * half, before, level[:, block].copy()))
        was_active = bool(active[-1])
    if was_active:
        runs.append(_Run(first, stretch.stop, before, level[:, -1]))
    return _windows(runs, stretch, half=half, cycle=stretch.rate_hz / frequency_hz)


def _active_half_cycles(
    record: Record, signals: Sequence[Sum], stretch: Stretch, *, half: int, lag: int
) -> Iterator[tuple[NDArray[np.bool_], NDArray[np.float64], int]]:
    """Yield part by part which half cycles show a change, the levels one cycle before, and the first sample.

    Every part is read from two cycles before its first half cycle, so that nothing is lost between parts.
    """
    keys = list(dict.fromkeys(key for parts in signals for key, _ in parts))
    n_half_cycles = (stretch.stop - stretch.first - 2 * lag) // half
    at_once = max(_LEAST_HALF_CYCLES, _PART_NUMBERS // (half * max(1, len(keys))))
    n_parts = max(1, n_half_cycles // at_once)
    limits = [n_half_cycles * k // n_parts for k in range(n_parts + 1)]
    quiet_before = np.full(len(signals), np.inf)
    for begin, end in pairwise(limits):
        if begin >= end:
            continue
        first, stop = stretch.first + begin * half, stretch.first + end * half + 2 * lag
        rows = _formed(record, keys, signals, replace(stretch, first=first, stop=stop))
        changes, levels = np.empty((2, len(signals), end - begin))
        quiet = np.empty(len(signals))
        for k, row in enumerate(rows):
            changes[k], levels[k], quiet[k] = _left_over(row, half=half, lag=lag)
        threshold = np.maximum(_NOISE_FACTOR * np.minimum(quiet, quiet_before)[:, None], _SHARE * levels)
        exceeds = changes > threshold
        for k in map(int, np.flatnonzero(exceeds.any(axis=1))):
            exceeds[k] &= changes[k] > _STEPS * _step(rows[k])
        quiet_before = quiet
        yield exceeds.any(axis=0), levels, first + 2 * lag


def _formed(
    record: Record, keys: Sequence[str], signals: Sequence[Sum], stretch: Stretch
) -> list[NDArray[np.float64]]:
    by_key = dict(zip(keys, part_of(record, stretch).signals(keys), strict=True))
    rows = []
    for parts in signals:
        (key, factor), *others = parts
        row = by_key[key] if factor == 1.0 else factor * by_key[key]
        for other, other_factor in others:
            row = row + other_factor * by_key[other]
        rows.append(row)
    return rows


def _left_over(
    row: NDArray[np.float64], *, half: int, lag: int
) -> tuple[NDArray[np.float64], NDArray[np.float64], float]:
    """RMS per half cycle of what the two cycles before do not tell, the signal's one cycle before, a median.

    Sums of squares stand in for the difference itself, since the factor comes out of them: its median over
    the half cycles is that of the quiet wave, whatever its frequency.
    """
    n = (row.size - 2 * lag) // half
    outer = (row[: n * half] + row[2 * lag : 2 * lag + n * half]).reshape(n, half)
    middle = row[lag : lag + n * half].reshape(n, half)
    seen = np.ones(n, dtype=np.bool_)
    squares = _products(outer, middle)
    if not np.isfinite(squares).all():
        present = np.isfinite(outer) & np.isfinite(middle)
        seen = 2 * present.sum(axis=1) > half
        outer, middle = np.where(present, outer, 0.0), np.where(present, middle, 0.0)
        squares = _products(outer, middle)
    of_outer, of_both, of_middle = squares
    alive = of_middle > 0.0
    turn = float(np.clip(np.median(of_both[alive] / of_middle[alive]), -2.0, 2.0)) if alive.any() else 2.0
    energy = of_outer - 2.0 * turn * of_both + turn**2 * of_middle
    change = np.where(seen, np.sqrt(np.maximum(energy, 0.0) / half), 0.0)
    return change, np.sqrt(of_middle / half), float(np.median(change[seen])) if seen.any() else np.inf


def _products(outer: NDArray[np.float64], middle: NDArray[np.float64]) -> NDArray[np.float64]:
    pairs = ((outer, outer), (outer, middle), (middle, middle))
    return np.array([np.einsum("ij,ij->i", one, other) for one, other in pairs])


def _step(row: NDArray[np.float64]) -> float:
    """The smallest step between two samples: one of the converter, where there is one."""
    steps = np.abs(np.diff(row))
    steps = steps[steps > 0.0]
    return float(steps.min()) if steps.size else 0.0


def _windows(runs: Sequence[_Run], stretch: Stretch, *, half: int, cycle: float) -> tuple[Stretch, ...]:
    before, after = round(_BEFORE_CYCLES * cycle), round(_AFTER_CYCLES * cycle)
    groups: list[list[_Run]] = []
    for run in chain.from_iterable(map(_pieces, runs)):
        if groups and _belongs(run, groups[-1], margins=before + after):
            groups[-1].append(run)
        else:
            groups.append([run])
    windows = []
    for k, group in enumerate(groups):
        # Neighbours may share what is quiet between them, but no change; one may begin half a cycle early.
        least = groups[k - 1][-1].stop if k else stretch.first
        most = groups[k + 1][0].first - half if k + 1 < len(groups) else stretch.stop
        first = max(group[0].first - before, least)
        windows.append(replace(stretch, first=first, stop=min(group[-1].stop + after, most)))
    return tuple(windows)


def _pieces(run: _Run) -> Iterator[_Run]:
    for first in range(run.first, run.stop, _LONGEST_WINDOW):
        yield replace(run, first=first, stop=min(first + _LONGEST_WINDOW, run.stop))


def _belongs(run: _Run, group: Sequence[_Run], *, margins: int) -> bool:
    if run.stop - group[0].first > _LONGEST_WINDOW:
        return False
    is_on = bool(np.any(group[-1].after > _STILL_ON * group[0].before))
    return is_on or run.first - group[-1].stop <= margins
