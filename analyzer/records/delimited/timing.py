"""Sample times from a column of numbers or of time stamps."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from datetime import datetime, timedelta
from decimal import Decimal
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from analyzer.records.moment import Moment
from analyzer.records.problems import Problem, RecordError
from analyzer.records.timebase import TimeBase

if TYPE_CHECKING:
    import pyarrow as pa

_ENDS = 100
_FINE = 0.1  # rounding below a tenth of the sampling step leaves no doubt which sample is meant; our choice
_RATE_DOUBT = 0.01  # beyond that, the record must be long enough to tell its rate to one in a hundred
_BOUNDING_SAMPLES = 20_000
_HALVINGS = 40
_NOT_RISING_SHARE = 0.01
_PLAUSIBLE_STEPS_S = (5e-6, 5e-3)  # 200 kHz to 200 Hz, the sampling of disturbance recorders; common practice
_UNITS_TO_TRY = (("s", 1.0), ("ms", 1e3), ("us", 1e6), ("ns", 1e9))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Times:
    """Times of the rows as printed.

    Attributes
    ----------
    seconds : ndarray of float64, shape (n,)
        NaN where missing; counted from any instant. [s]
    quantum_s : float
        One unit of the last printed decimal. [s]
    start : Moment or None
        Instant of the first row.
    problems : tuple of Problem
    """

    seconds: NDArray[np.float64]
    quantum_s: float
    start: Moment | None = None
    problems: tuple[Problem, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Fitted:
    """A time base, the rows that it keeps (all when None), and what was guessed or left out for it."""

    timebase: TimeBase
    kept: NDArray[np.bool_] | None
    problems: tuple[Problem, ...]


def guess_divisor(values: NDArray[np.float64]) -> tuple[str, float] | None:
    """Return the unit of time, and how many make a second, for which the sampling rate is a usual one."""
    finite = values[np.isfinite(values)]
    if finite.size < 2:
        return None
    step = abs(finite[-1] - finite[0]) / (finite.size - 1)
    low_s, high_s = _PLAUSIBLE_STEPS_S
    for unit, divisor in _UNITS_TO_TRY:
        if low_s <= step / divisor <= high_s:
            return unit, divisor
    return None


def times_from_numbers(values: NDArray[np.float64], divisor: float) -> Times:
    """Return the times of a column of numbers, `divisor` of which make a second."""
    finite = values[np.isfinite(values)]
    # Trailing zeros may not be printed, so the finest of many counts; but numbers of a fixed count of digits
    # get coarser as they grow, so both ends are looked at.
    quantum = max(_quantum(finite[:_ENDS]), _quantum(finite[-_ENDS:]))
    return Times(seconds=values / divisor, quantum_s=quantum / divisor)


def times_from_stamps(text: pa.ChunkedArray, *, path: str, first_line: int) -> Times:
    """Return the times of a column of ISO 8601 time stamps, or of times of day.

    Raises
    ------
    RecordError
        If none of them can be read (code ``time-stamps-not-read``).
    """
    import pyarrow as pa
    import pyarrow.compute as pc

    pattern = r"^(?P<stem>[^:]*[0-9]{2}:[0-9]{2}[0-9:.,]*)\s?(?P<zone>Z|z|[+-][0-9]{2}(?::?[0-9]{2})?|)$"
    parts = pc.extract_regex(pc.utf8_trim_whitespace(text.combine_chunks()), pattern)
    stem = pc.replace_substring(pc.struct_field(parts, "stem"), ",", ".")
    stem = pc.replace_substring_regex(pc.replace_substring(stem, "/", "-"), r"[T\s]+", "T")
    stem = pc.replace_substring_regex(stem, r"(\.\d{9})\d+$", r"\1")
    has_date = pc.any(pc.match_substring(stem, "T")).as_py()
    if not has_date:
        stem = pc.binary_join_element_wise("1970-01-01", stem, "T")
    try:
        instants = stem.cast(pa.timestamp("ns"))
    except pa.ArrowInvalid as error:
        raise RecordError(
            "time-stamps-not-read",
            f"a time stamp is none: {str(error).splitlines()[0][:120]}",
            path=path,
            line=first_line,
            hint="time stamps must be in ISO 8601, such as 2024-05-01T12:00:00.000250",
        ) from error
    present = np.asarray(pc.is_valid(instants).to_numpy(zero_copy_only=False), dtype=bool)
    if not present.any():
        raise RecordError(
            "time-stamps-not-read",
            "no time stamp can be read",
            path=path,
            line=first_line,
            hint="time stamps must be in ISO 8601, such as 2024-05-01T12:00:00.000250",
        )
    ns = np.asarray(pc.fill_null(instants.cast(pa.int64()), 0).to_numpy(zero_copy_only=False), dtype=np.int64)
    ns, offset, problems = _one_zone(ns, pc.fill_null(pc.struct_field(parts, "zone"), ""), present)
    if not has_date:
        ns = _over_midnight(ns, present)
    digits = pc.fill_null(pc.utf8_length(pc.replace_substring_regex(stem, r"^[^.]*\.?", "")), 0)
    n_digits = int(pc.max(digits).as_py())
    first = int(np.argmax(present))
    seconds = (ns - ns[first]) / 1e9
    seconds[~present] = np.nan
    start = _moment(int(ns[first]), offset, n_digits) if has_date and first == 0 else None
    return Times(seconds=seconds, quantum_s=10.0**-n_digits, start=start, problems=problems)


def fit_timebase(times: Times, *, path: str, first_line: int) -> Fitted:
    """Return the time base of printed times: a constant rate where they agree with one, else as they are.

    Raises
    ------
    RecordError
        If they do not rise (code ``time-not-rising``), or are too coarse to tell the samples apart
        (``time-too-coarse``).
    """
    kept = None
    regular = regular_rate(times.seconds, times.quantum_s)
    problems: list[Problem] = []
    if regular is None and np.isnan(times.seconds).any():
        kept = np.isfinite(times.seconds)
        regular = regular_rate(times.seconds[kept], times.quantum_s)
        problems.append(_left_out(int((~kept).sum()), "have no time that can be read", "time-missing"))
    if regular is not None:
        rate_hz, deviation_s = regular
        n = int(times.seconds.size if kept is None else kept.sum())
        message = (
            f"times agree with a constant {rate_hz:.10g} Hz and are taken from it; "
            f"the printed ones deviate by at most {deviation_s:.2g} s, within their rounding"
        )
        problems.append(Problem(code="rate-guessed", message=message, where="time column"))
        timebase = TimeBase.from_rates([rate_hz], [n], n_samples=n)
        return Fitted(timebase=timebase, kept=kept, problems=tuple(problems))
    return _irregular(times, kept, problems, path=path, first_line=first_line)


def regular_rate(times_s: NDArray[np.float64], quantum_s: float) -> tuple[float, float] | None:
    """Return the constant rate that times rounded to `quantum_s` agree with, and their largest deviation.

    Of all rates that agree, the one with the fewest digits is taken, counted in the rate or in its period.
    The deviation counts from the first time.

    Parameters
    ----------
    times_s : ndarray of float64, shape (n,)
        NaN where missing. [s]
    quantum_s : float
        One unit of the last printed decimal. [s]

    Returns
    -------
    tuple of float, or None
        Rate [Hz] and deviation [s]; None if no constant rate agrees or the times are too coarse to tell.
    """
    index = np.flatnonzero(np.isfinite(times_s))
    if index.size < 2:
        return None
    steps = (index - index[0]).astype(np.float64)
    times = times_s[index] - times_s[index[0]]
    exact_s = 4 * float(np.spacing(np.abs(times_s[index]).max()))
    rounded_s = quantum_s + exact_s
    is_fine = rounded_s <= _FINE * float(times[-1] / steps[-1])
    for slack_s, doubt in ((exact_s, np.inf), (rounded_s, np.inf if is_fine else _RATE_DOUBT)):
        # A part of a long record bounds the rate nearly as well as all of it, and sooner.
        for stride in dict.fromkeys((max(1, steps.size // _BOUNDING_SAMPLES), 1)):
            bounds = _periods(steps[::stride], times[::stride], slack_s)
            if bounds is None or bounds[1] > (1 + doubt) * bounds[0]:
                break
            for rate_hz in _roundest(1 / bounds[1], 1 / bounds[0]):
                deviation = times - steps / rate_hz
                if np.ptp(deviation) <= slack_s * (1 + 1e-9):
                    return rate_hz, float(np.abs(deviation).max())
    return None


def _periods(
    steps: NDArray[np.float64], times: NDArray[np.float64], slack_s: float
) -> tuple[float, float] | None:
    """Return the least and the greatest period with which times deviate from multiples by `slack_s` at most.

    The range of the deviations is convex in the period, and its slope is the number of steps between its
    extremes, so that halving finds a period that agrees and then both ends of all that do.
    """

    def spread(period_s: float) -> tuple[float, bool]:
        deviation = times - steps * period_s
        latest, earliest = int(np.argmax(deviation)), int(np.argmin(deviation))
        return float(deviation[latest] - deviation[earliest]), latest > earliest

    shortest, longest = (times[-1] - slack_s) / steps[-1], (times[-1] + slack_s) / steps[-1]
    if shortest <= 0:
        return None
    low, high = shortest, longest
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        width_s, is_too_short = spread(middle)
        if width_s <= slack_s:
            break
        low, high = (middle, high) if is_too_short else (low, middle)
    else:
        return None
    ends = []
    for outside in (low, high):
        inside = middle
        for _ in range(_HALVINGS):
            between = (outside + inside) / 2
            if spread(between)[0] <= slack_s:
                inside = between
            else:
                outside = between
        ends.append(inside)
    return ends[0], ends[1]


def _roundest(low_hz: float, high_hz: float) -> Iterator[float]:
    middle_hz = (low_hz + high_hz) / 2
    tried: set[float] = set()
    for decimals in range(17):
        for rate_hz in (float(f"{middle_hz:.{decimals}e}"), 1 / float(f"{1 / middle_hz:.{decimals}e}")):
            if low_hz <= rate_hz <= high_hz and rate_hz not in tried:
                tried.add(rate_hz)
                yield rate_hz


def _irregular(
    times: Times, kept: NDArray[np.bool_] | None, problems: list[Problem], *, path: str, first_line: int
) -> Fitted:
    kept = np.isfinite(times.seconds) if kept is None else kept
    rows = np.flatnonzero(kept)
    seconds = times.seconds[rows]
    if rows.size:
        before = np.concatenate(([-np.inf], np.maximum.accumulate(seconds)[:-1]))
        rising = seconds > before
        n_bad = int((~rising).sum())
        if n_bad > _NOT_RISING_SHARE * rows.size:
            _refuse_order(
                seconds, rising, times.quantum_s, path=path, line=first_line + int(rows[np.argmin(rising)])
            )
        if n_bad:
            problems.append(_left_out(n_bad, "are not later than the row before", "time-not-rising"))
        kept = kept.copy()
        kept[rows[~rising]] = False
        seconds = seconds[rising]
    if seconds.size > 1:
        steps = np.diff(seconds)
        message = (
            f"times agree with no constant rate and are used as printed; "
            f"steps are {steps.min():.6g} s to {steps.max():.6g} s"
        )
        problems.append(
            Problem(code="irregular-times", message=message, where="time column", severity="warning")
        )
    return Fitted(timebase=TimeBase.from_stamps(seconds.copy()), kept=kept, problems=tuple(problems))


def _refuse_order(
    seconds: NDArray[np.float64], rising: NDArray[np.bool_], quantum_s: float, *, path: str, line: int
) -> None:
    steps = np.diff(seconds)
    if np.all(steps >= 0):
        raise RecordError(
            "time-too-coarse",
            f"times are printed to {quantum_s:g} s, too coarse to tell the samples apart",
            path=path,
            line=line,
            hint="state the sampling rate",
        )
    raise RecordError(
        "time-not-rising",
        f"{int((~rising).sum())} rows are not later than the ones before",
        path=path,
        line=line,
        hint="state which column holds the times, or the sampling rate, or cut the file where time goes back",
    )


def _left_out(count: int, why: str, code: str) -> Problem:
    return Problem(
        code=code,
        message=f"{count} row{'s' if count > 1 else ''} left out, which {why}",
        where="time column",
        severity="warning",
    )


def _quantum(values: NDArray[np.float64]) -> float:
    exponents = [Decimal(repr(float(value))).normalize().as_tuple().exponent for value in values if value]
    return 10.0 ** min((int(exponent) for exponent in exponents if int(exponent) < 0), default=0)


def _one_zone(
    ns: NDArray[np.int64], zones: pa.Array, present: NDArray[np.bool_]
) -> tuple[NDArray[np.int64], timedelta | None, tuple[Problem, ...]]:
    encoded = zones.dictionary_encode()
    names = [str(name) for name in encoded.dictionary.to_pylist()]
    codes = encoded.indices.to_numpy(zero_copy_only=False)
    used = sorted({int(code) for code in np.unique(codes[present])})
    if len(used) == 1:
        return ns, _offset(names[used[0]]), ()
    offsets_ns = np.array(
        [round((_offset(name) or timedelta()).total_seconds()) * 10**9 for name in names], dtype=np.int64
    )
    note = Problem(
        code="time-zones-differ",
        message=f"time stamps are in {len(used)} time zones; all were converted to UTC",
        where="time column",
    )
    return ns - offsets_ns[codes], timedelta(), (note,)


def _offset(zone: str) -> timedelta | None:
    if not zone:
        return None
    if zone in "Zz":
        return timedelta()
    digits = zone[1:].replace(":", "").ljust(4, "0")
    minutes = int(digits[:2]) * 60 + int(digits[2:])
    return timedelta(minutes=-minutes if zone[0] == "-" else minutes)


def _over_midnight(ns: NDArray[np.int64], present: NDArray[np.bool_]) -> NDArray[np.int64]:
    """Add a day wherever the time of day falls by more than half a day."""
    rows = np.flatnonzero(present)
    day_ns = 86_400 * 10**9
    falls = np.concatenate(([0], np.cumsum(np.diff(ns[rows]) < -day_ns // 2)))
    out = ns.copy()
    out[rows] += falls * day_ns
    return out


def _moment(ns: int, offset: timedelta | None, digits: int) -> Moment:
    second, fraction = divmod(ns, 10**9)
    return Moment(
        second=datetime(1970, 1, 1) + timedelta(seconds=second),
        nanosecond=fraction,
        utc_offset=offset,
        digits=digits,
    )
