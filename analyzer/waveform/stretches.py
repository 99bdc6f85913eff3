"""The parts of a record in which a wave of power frequency can be seen at all."""

from __future__ import annotations

from dataclasses import dataclass, replace

from analyzer.records import Problem, Record

# A sinusoid, a decay and an inception need more than the two samples a cycle of the sampling theorem.
MIN_SAMPLES_PER_CYCLE = 8.0
_MIN_CYCLES = 2.0
_SAME_RATE = 0.02  # recorders that follow the frequency write rates that differ by far less


@dataclass(frozen=True, slots=True, kw_only=True)
class Stretch:
    """Consecutive samples at, within two percent, one rate; `first` and `stop` count within the record."""

    first: int
    stop: int
    rate_hz: float


def stretches_of(record: Record) -> tuple[Stretch, ...]:
    """Return the stretches of a record, its segments joined where their rates are within two percent."""
    joined: list[Stretch] = []
    for segment in record.segments:
        last = joined[-1] if joined else None
        if last is not None and abs(segment.rate_hz / last.rate_hz - 1.0) < _SAME_RATE:
            joined[-1] = Stretch(first=last.first, stop=segment.stop, rate_hz=last.rate_hz)
        else:
            joined.append(Stretch(first=segment.first, stop=segment.stop, rate_hz=segment.rate_hz))
    return tuple(joined)


def part_of(record: Record, stretch: Stretch) -> Record:
    """Return the part of a record that a stretch is, its times as before; nothing is read yet."""
    return replace(record, first=record.first + stretch.first, stop=record.first + stretch.stop)


def usable_stretches(
    record: Record, *, frequency_hz: float
) -> tuple[tuple[Stretch, ...], tuple[Problem, ...]]:
    """Return the stretches that carry the power frequency, and what is said of the others.

    Parameters
    ----------
    record : Record
    frequency_hz : float
        Power frequency. [Hz]

    Returns
    -------
    stretches : tuple of Stretch
    problems : tuple of Problem
    """
    usable, problems = [], []
    for stretch in stretches_of(record):
        ends = (record.first + k for k in (stretch.first, stretch.stop - 1))
        where = " to ".join(f"{record.timebase.times(k, k + 1)[0]:.4f} s" for k in ends)
        if stretch.rate_hz < MIN_SAMPLES_PER_CYCLE * frequency_hz:
            problems.append(
                Problem(
                    code="rate-too-low",
                    severity="warning",
                    message=f"sampling at {stretch.rate_hz:g} Hz, too low for {frequency_hz:g} Hz: left out",
                    where=where,
                )
            )
        elif stretch.stop - stretch.first < _MIN_CYCLES * stretch.rate_hz / frequency_hz:
            problems.append(
                Problem(code="stretch-too-short", message="shorter than two cycles: left out", where=where)
            )
        else:
            usable.append(stretch)
    return tuple(usable), tuple(problems)
