"""The record: channels, times and samples of one disturbance, whatever file they came from."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from analyzer.records.blobs import Blob
from analyzer.records.channels import AnalogChannel, DigitalChannel, unique_ids
from analyzer.records.moment import Clock, Moment
from analyzer.records.problems import Problem, RecordError, gathered
from analyzer.records.sources import ArraySource, SampleSource
from analyzer.records.timebase import RateSegment, TimeBase

if TYPE_CHECKING:
    import pandas as pd

_SURVEY_NUMBERS = 1 << 21  # samples of all channels together that are in memory at once


@dataclass(frozen=True, slots=True, kw_only=True)
class Origin:
    """Where a record came from.

    Attributes
    ----------
    path : str
        The data file, or archive and member.
    format : str
        Name of the format, such as ``comtrade`` or ``csv``.
    revision : int or None
        Revision of the standard that the record follows.
    encoding : str or None
        ``ascii``, ``binary``, ``binary32``, ``float32``, or None where the format has only one.
    data : Blob or None
        The data file's bytes.
    header_text, information_text : str
        Free text beside the record (the HDR and INF members), empty when there is none.
    """

    path: str
    format: str
    revision: int | None = None
    encoding: str | None = None
    data: Blob | None = field(default=None, repr=False)
    header_text: str = field(default="", repr=False)
    information_text: str = field(default="", repr=False)

    def sha256(self) -> str | None:
        """Return the SHA-256 of the data file, None for a record made in memory."""
        return self.data.sha256() if self.data is not None else None


@dataclass(frozen=True, slots=True, eq=False)
class Edges:
    """Changes of a digital channel.

    Attributes
    ----------
    times_s : ndarray of float64, shape (m,)
        Time of the first sample in the new state. [s]
    states : ndarray of uint8, shape (m,)
        The new state.
    initial : int or None
        State of the first sample; None when there is no sample.
    """

    times_s: NDArray[np.float64]
    states: NDArray[np.uint8]
    initial: int | None


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Record:
    """A disturbance record; nothing in it can be changed by its users.

    Values come scaled to primary SI units when asked for; until then a binary file stays on disk. A record
    returned by :meth:`between` or :meth:`select` is a view: its times still count from the first sample of
    the whole record.

    Attributes
    ----------
    origin : Origin
    station, device : str
    nominal_frequency_hz : float or None
        As stated in the file. [Hz]
    start, trigger : Moment or None
        Instants of the first sample and of the trigger.
    clock : Clock
    analog : tuple of AnalogChannel
    digital : tuple of DigitalChannel
    problems : tuple of Problem
        What was wrong in the file and was repaired or tolerated; :meth:`survey` adds what only the
        samples tell.
    """

    origin: Origin
    timebase: TimeBase
    source: SampleSource = field(repr=False)
    analog: tuple[AnalogChannel, ...]
    digital: tuple[DigitalChannel, ...] = ()
    station: str = ""
    device: str = ""
    nominal_frequency_hz: float | None = None
    start: Moment | None = None
    trigger: Moment | None = None
    clock: Clock = field(default_factory=Clock)
    problems: tuple[Problem, ...] = ()
    first: int = 0
    stop: int | None = None

    @classmethod
    def from_arrays(
        cls,
        signals: Mapping[str, tuple[ArrayLike, str]],
        *,
        sample_rate_hz: float | None = None,
        times_s: ArrayLike | None = None,
        digital: Mapping[str, ArrayLike] | None = None,
        station: str = "",
        device: str = "",
        nominal_frequency_hz: float | None = None,
        start: Moment | None = None,
        trigger: Moment | None = None,
    ) -> Record:
        """Return a record of primary values held in memory.

        Parameters
        ----------
        signals : mapping of str to (array_like, str)
            Channel name to its values, shape (n,), and their unit.
        sample_rate_hz : float, optional
            Sampling rate; either this or `times_s`. [Hz]
        times_s : array_like, shape (n,), optional
            Rising sample times. [s]
        digital : mapping of str to array_like, optional
            States, shape (n,).
        station, device, nominal_frequency_hz, start, trigger
            As in the class.

        Returns
        -------
        Record

        Raises
        ------
        ValueError
            If the lengths differ, not exactly one of `sample_rate_hz` and `times_s` is given, the rate is
            not positive or the times do not rise.
        """
        if (sample_rate_hz is None) == (times_s is None):
            raise ValueError("give either sample_rate_hz or times_s")
        stored = np.array([np.asarray(values, dtype=np.float64) for values, _ in signals.values()])
        digital = digital or {}
        states = np.array([np.asarray(values, dtype=np.uint8) for values in digital.values()])
        n = stored.shape[1] if stored.size else (states.shape[1] if states.size else 0)
        stored = stored.reshape(len(signals), n)
        states = states.reshape(len(digital), n)
        for array in (stored, states):
            array.setflags(write=False)
        if times_s is not None:
            timebase = TimeBase.from_stamps(np.array(times_s, dtype=np.float64))
        else:
            assert sample_rate_hz is not None
            timebase = TimeBase.from_rates([sample_rate_hz], [n], n_samples=n)
        if timebase.n_samples != n:
            raise ValueError("as many times as samples are needed")
        ids = unique_ids(signals, kind="analog")
        return cls(
            origin=Origin(path="", format="memory"),
            timebase=timebase,
            source=ArraySource(stored, states),
            analog=tuple(
                AnalogChannel(number=k, id=ids[k], name=name, unit=unit)
                for k, (name, (_, unit)) in enumerate(signals.items())
            ),
            digital=tuple(DigitalChannel(number=k, id=name, name=name) for k, name in enumerate(digital)),
            station=station,
            device=device,
            nominal_frequency_hz=nominal_frequency_hz,
            start=start,
            trigger=trigger,
        )

    @property
    def _stop(self) -> int:
        return self.timebase.n_samples if self.stop is None else self.stop

    @property
    def n_samples(self) -> int:
        """Number of samples of each channel."""
        return self._stop - self.first

    @property
    def duration_s(self) -> float:
        """Time from the first sample to the last. [s]"""
        if self.n_samples < 1:
            return 0.0
        ends = (self.timebase.times(k, k + 1)[0] for k in (self.first, self._stop - 1))
        start_s, end_s = ends
        return float(end_s - start_s)

    @property
    def segments(self) -> tuple[RateSegment, ...]:
        """Stretches at one sampling rate, in samples of this record (a view's count from its own first)."""
        parts = []
        for segment in self.timebase.segments:
            first, stop = max(segment.first, self.first), min(segment.stop, self._stop)
            if first < stop:
                start_s = float(self.timebase.times(first, first + 1)[0])
                parts.append(
                    replace(segment, first=first - self.first, stop=stop - self.first, start_s=start_s)
                )
        return tuple(parts)

    @property
    def sample_rates_hz(self) -> tuple[float, ...]:
        """Distinct sampling rates, in the order of their first use. [Hz]"""
        return tuple(dict.fromkeys(segment.rate_hz for segment in self.segments))

    @property
    def trigger_s(self) -> float | None:
        """Time of the trigger after the first sample; None when the file does not tell it. [s]"""
        if self.start is None or self.trigger is None:
            return None
        return self.trigger.seconds_after(self.start)

    def times(self) -> NDArray[np.float64]:
        """Return the sample times after the record's first sample, shape (n_samples,). [s]"""
        return self.timebase.times(self.first, self._stop)

    def channel_times(self, key: str) -> NDArray[np.float64]:
        """Return the instants at which one analog channel was sampled, its skew included. [s]

        Raises
        ------
        RecordError
            If there is no such channel (code ``no-such-channel``).
        """
        times_s = self.times() + self.channel(key).skew_s
        times_s.setflags(write=False)
        return times_s

    def channel(self, key: str) -> AnalogChannel:
        """Return the analog channel with id `key`.

        Raises
        ------
        RecordError
            If there is none (code ``no-such-channel``).
        """
        for channel in self.analog:
            if channel.id == key:
                return channel
        raise self._no_such_channel(key, [channel.id for channel in self.analog])

    def digital_channel(self, key: str) -> DigitalChannel:
        """Return the digital channel with id `key`.

        Raises
        ------
        RecordError
            If there is none (code ``no-such-channel``).
        """
        for channel in self.digital:
            if channel.id == key:
                return channel
        raise self._no_such_channel(key, [channel.id for channel in self.digital])

    def signal(self, key: str) -> NDArray[np.float64]:
        """Return one channel in primary SI units, shape (n_samples,), NaN where a sample is missing.

        Raises
        ------
        RecordError
            If there is no such channel, or its unit or ratio is not known.
        """
        row: NDArray[np.float64] = self.signals([key])[0]
        return row

    def signals(self, keys: Sequence[str] | None = None) -> NDArray[np.float64]:
        """Return channels in primary SI units, NaN where a sample is missing.

        Parameters
        ----------
        keys : sequence of str, optional
            Channel ids; all channels when left out.

        Returns
        -------
        ndarray of float64, shape (len(keys), n_samples)

        Raises
        ------
        RecordError
            If there is no such channel, or its unit or ratio is not known (codes ``no-such-channel``,
            ``unknown-unit``, ``unknown-ratio``).
        """
        channels = self.analog if keys is None else [self.channel(key) for key in keys]
        gain, offset = np.empty(len(channels)), np.empty(len(channels))
        for k, channel in enumerate(channels):
            refusal, unit, ratio = channel.refusal, channel.known_unit, channel.ratio
            if refusal is not None or unit is None or ratio is None:
                assert refusal is not None
                raise RecordError(
                    refusal.code, refusal.message, path=self.origin.path, field=f"channel {channel.id}"
                )
            gain[k] = channel.multiplier * unit.factor * ratio
            offset[k] = channel.addend * unit.factor * ratio
        return self._read([channel.number for channel in channels], gain, offset)

    def as_written(self, keys: Sequence[str] | None = None) -> NDArray[np.float64]:
        """Return channels in the units and on the side the file has them, shape (len(keys), n_samples).

        Raises
        ------
        RecordError
            If there is no such channel (code ``no-such-channel``).
        """
        channels = self.analog if keys is None else [self.channel(key) for key in keys]
        gain = np.array([channel.multiplier for channel in channels])
        offset = np.array([channel.addend for channel in channels])
        return self._read([channel.number for channel in channels], gain, offset)

    def stored(self, keys: Sequence[str] | None = None) -> NDArray[np.float64]:
        """Return the numbers as stored, before any scaling, shape (len(keys), n_samples)."""
        channels = self.analog if keys is None else [self.channel(key) for key in keys]
        numbers = [channel.number for channel in channels]
        return self._read(numbers, np.ones(len(numbers)), np.zeros(len(numbers)))

    def states(self, key: str) -> NDArray[np.uint8]:
        """Return the states of a digital channel, shape (n_samples,).

        Raises
        ------
        RecordError
            If there is no such channel (code ``no-such-channel``).
        """
        number = self.digital_channel(key).number
        row: NDArray[np.uint8] = self.source.digital([number], self.first, self._stop)[0]
        row.setflags(write=False)
        return row

    def edges(self, key: str) -> Edges:
        """Return the changes of a digital channel.

        Raises
        ------
        RecordError
            If there is no such channel (code ``no-such-channel``).
        """
        states = self.states(key)
        after = np.flatnonzero(states[1:] != states[:-1]) + 1
        return Edges(
            times_s=self.times()[after],
            states=states[after],
            initial=int(states[0]) if states.size else None,
        )

    def between(self, start_s: float, end_s: float) -> Record:
        """Return the part of the record from `start_s` to `end_s`, both included; nothing is read yet.

        Parameters
        ----------
        start_s, end_s : float
            Times after the first sample of the whole record. [s]
        """
        first = min(max(self.timebase.index_at(start_s), self.first), self._stop)
        after_end = self.timebase.index_at(float(np.nextafter(end_s + 2e-9, np.inf)))
        return replace(self, first=first, stop=max(first, min(after_end, self._stop)))

    def select(self, keys: Sequence[str]) -> Record:
        """Return the record with only these analog channels; nothing is read yet.

        Raises
        ------
        RecordError
            If there is no such channel (code ``no-such-channel``).
        """
        return replace(self, analog=tuple(self.channel(key) for key in keys))

    def to_frame(self) -> pd.DataFrame:
        """Return the channels as a DataFrame over the sample times.

        Columns are channel ids; ``frame.attrs["units"]`` has the unit of each. A channel whose unit or ratio
        is not known comes as written, and its unit there says so.
        """
        import pandas as pd

        usable = [channel.id for channel in self.analog if channel.refusal is None]
        values = dict(zip(usable, self.signals(usable), strict=True))
        units = {channel.id: channel.si_unit for channel in self.analog}
        for channel in self.analog:
            if channel.refusal is not None:
                values[channel.id] = self.as_written([channel.id])[0]
                units[channel.id] = f"as written: {channel.unit}"
        columns: dict[str, NDArray[np.float64] | NDArray[np.uint8]] = {
            channel.id: values[channel.id] for channel in self.analog
        }
        for digital in self.digital:
            name = digital.id
            while name in columns:
                name += " (digital)"
            columns[name] = self.states(digital.id)
        frame = pd.DataFrame(columns, index=pd.Index(self.times(), name="time_s"))
        frame.attrs["units"] = units
        return frame

    def survey(self) -> Record:
        """Read every sample once and return the record with all that was found among its problems."""
        missing = np.zeros(len(self.analog), dtype=np.int64)
        numbers = [channel.number for channel in self.analog]
        ones, zeros = np.ones(len(numbers)), np.zeros(len(numbers))
        block = max(1, _SURVEY_NUMBERS // max(1, len(numbers)))
        for first in range(self.first, self._stop, block):
            stop = min(first + block, self._stop)
            missing += np.isnan(self.source.analog(numbers, first, stop, ones, zeros)).sum(axis=1)
        found = [channel.refusal for channel in self.analog if channel.refusal is not None]
        for channel, count in zip(self.analog, missing, strict=True):
            if count:
                found.append(
                    Problem(
                        code="missing-samples",
                        severity="warning",
                        message=f"{count} of {self.n_samples} samples are missing and read as not a number",
                        where=f"channel {channel.id}",
                    )
                )
        found.extend(self.source.survey())
        # A second survey finds the same, and must not list it twice.
        new = [problem for problem in gathered(found) if problem not in self.problems]
        return replace(self, problems=(*self.problems, *new))

    def _read(
        self, numbers: Sequence[int], gain: NDArray[np.float64], offset: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        with np.errstate(over="ignore", invalid="ignore"):
            values = self.source.analog(numbers, self.first, self._stop, gain, offset)
        values.setflags(write=False)
        return values

    def _no_such_channel(self, key: str, known: Sequence[str]) -> RecordError:
        shown = ", ".join(known[:12]) + (" …" if len(known) > 12 else "")
        return RecordError(
            "no-such-channel",
            f"there is no channel {key!r}",
            path=self.origin.path,
            hint=f"channels are: {shown}" if known else "the record has no such channels",
        )
