"""From a scenario to a record with its truth: network, instruments and channels joined on one clock."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from pydantic import ValidationError

from analyzer.forge.amounts import settled
from analyzer.forge.build import build_network, under
from analyzer.forge.build_events import build_schedule, naming_events
from analyzer.forge.build_instruments import build_chain
from analyzer.forge.draw import Draw, draw_scenario
from analyzer.forge.errors import ForgeError
from analyzer.forge.instruments.chain import Recording, record_signals
from analyzer.forge.instruments.chain_spec import fine_grid
from analyzer.forge.scenario import Scenario
from analyzer.forge.scenario_file import as_forge_error
from analyzer.forge.solution import Solution, solve
from analyzer.forge.truth_builder import build_truth
from analyzer.forge.truth_document import TrueRecord, TruthDocument
from analyzer.records.channels import AnalogChannel, unique_ids
from analyzer.records.model import Origin, Record
from analyzer.records.moment import Moment
from analyzer.records.output import Existing, written_beside
from analyzer.records.sources import ArraySource
from analyzer.records.timebase import TimeBase

TRUTH_SUFFIX = ".truth.json"


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class ForgedRecord:
    """A record and what is true of it.

    Parameters
    ----------
    record : Record
        In memory, as the recorder of the scenario stores it.
    truth : TruthDocument
    scenario : Scenario
        As it was drawn.
    """

    record: Record
    truth: TruthDocument
    scenario: Scenario


def forge_record(
    scenario: Scenario, *, seed: int | None = None, index: int = 0, name: str | None = None
) -> ForgedRecord:
    """Forge the record of a scenario.

    Parameters
    ----------
    scenario : Scenario
        With or without distributions.
    seed, index : int
        As `analyzer.forge.draw.draw_scenario`.
    name : str or None
        Of the record in its truth; None is the scenario's own, or ``record``.

    Returns
    -------
    ForgedRecord
        The same for the same arguments.

    Raises
    ------
    ForgeError
        If the scenario is impossible; `where` is its key.

    Notes
    -----
    The network is solved from whole cycles before the first sample, since the instruments have to be in their
    steady state there; with whole cycles all angles of the scenario hold at the first sample.
    """
    try:
        draw = draw_scenario(scenario, seed=seed, index=index)
    except ValidationError as error:
        raise as_forge_error(error) from error
    try:
        with np.errstate(over="raise", invalid="raise"):
            return _forge(draw, name=name or scenario.record.name or "record")
    except (FloatingPointError, OverflowError) as error:
        raise ForgeError(
            "forge-impossible",
            "values are so large or so small beside each other that the record cannot be computed",
            hint="look for one that is off by orders of magnitude",
        ) from error


def _forge(draw: Draw, *, name: str) -> ForgedRecord:
    scenario = draw.scenario
    network, chain = build_network(scenario.network), build_chain(scenario)
    actual = scenario.network.actual_frequency_hz
    prefault_hz = scenario.network.frequency_hz if actual is None else settled(actual)
    if not 0.5 < prefault_hz / scenario.network.frequency_hz < 1.5:
        raise ForgeError(
            "bad-value",
            f"{prefault_hz:g} Hz is not within half and one and a half of nominal",
            where="network.actual_frequency_hz",
        )
    names = {"sample_rate_hz": "record.sample_rate_hz", "n_samples": "record.duration_s"}
    with under("instruments", **names):
        grid = fine_grid(chain, start_s=0.0, n_samples=scenario.n_samples, prefault_freq_hz=prefault_hz)
    lead_s = math.ceil(-grid.start_s * prefault_hz) / prefault_hz
    schedule = build_schedule(scenario, network, lead_s=lead_s)
    with naming_events(scenario):
        solution = solve(network, schedule, duration_s=lead_s + grid.end_s)
        primary = _until(solution, lead_s + (scenario.n_samples - 1) / scenario.sample_rate_hz).truth()

    def within(time_s: NDArray[np.float64]) -> NDArray[np.float64]:
        # Rounding may put the first and the last fine sample beyond the solution.
        return np.clip(time_s + lead_s, 0.0, solution.duration_s)

    with under("instruments", **names):
        recording = record_signals(
            chain,
            current=lambda t: solution.current(within(t)),
            voltage=lambda t: solution.voltage(within(t)),
            start_s=0.0,
            n_samples=scenario.n_samples,
            prefault_freq_hz=prefault_hz,
            rng=draw.instruments_rng,
            breaks_s=[mark.time_s - lead_s for mark in solution.marks],
        )
    first_event_s = primary.events[0].inception_s - lead_s if primary.events else 0.0
    record = _record(scenario, recording, first_event_s=max(first_event_s, 0.0))
    truth = build_truth(
        record=TrueRecord(
            name=name,
            title=scenario.title,
            station=record.station,
            device=record.device,
            start_time=None if record.start is None else record.start.isoformat(),
            nominal_frequency_hz=scenario.network.frequency_hz,
            sample_rate_hz=scenario.sample_rate_hz,
            n_samples=record.n_samples,
            duration_s=record.duration_s,
            channels=dict(
                zip(scenario.record.channels, (channel.id for channel in record.analog), strict=True)
            ),
            seed=draw.seed,
            index=draw.index,
        ),
        scenario=scenario,
        primary=primary,
        chain=recording.truth,
        channels=scenario.record.channels,
        lead_s=lead_s,
    )
    return ForgedRecord(record=record, truth=truth, scenario=scenario)


def _until(solution: Solution, end_s: float) -> Solution:
    """The solution up to the record's last sample; the instruments look a little further."""
    return replace(
        solution,
        duration_s=end_s,
        stretches=tuple(
            replace(stretch, stop_s=min(stretch.stop_s, end_s))  # type: ignore[type-var]
            for stretch in solution.stretches
            if stretch.start_s < end_s
        ),
        marks=tuple(mark for mark in solution.marks if mark.time_s < end_s),
    )


def _record(scenario: Scenario, recording: Recording, *, first_event_s: float) -> Record:
    section = scenario.record
    # Only files of whole numbers keep counts; text of values and real numbers hold the values themselves.
    counted = recording.counts is not None and section.format == "comtrade" and section.encoding != "float32"
    names = [section.names.get(role, role.upper()) for role in section.channels]
    ids = unique_ids(names, kind="analog")
    channels, rows = [], []
    for k, role in enumerate(section.channels):
        current = role[0] == "i"
        unit = section.current_unit if current else section.voltage_unit
        sides = section.current_ratio if current else section.voltage_ratio
        scale = 1e-3 if unit.startswith("k") else 1.0
        if section.side == "secondary" and sides is not None:
            scale *= sides.secondary / sides.primary
        if counted:
            assert recording.counts is not None
            assert recording.value_per_count is not None
            rows.append(recording.counts[k].astype(np.float64))
            multiplier = float(recording.value_per_count[k]) * scale
        else:
            rows.append(recording.values[k] * scale)
            multiplier = 1.0
        channels.append(
            AnalogChannel(
                number=k,
                id=ids[k],
                name=names[k],
                unit=unit,
                phase={"a": "A", "b": "B", "c": "C", "n": "N"}[role[1]],
                circuit=section.circuit,
                multiplier=multiplier,
                skew_s=recording.truth.skew_s[k] if scenario.instruments.skew_stated else 0.0,
                primary=None if sides is None else sides.primary,
                secondary=None if sides is None else sides.secondary,
                side=section.side,
            )
        )
    stored = np.array(rows)
    stored.setflags(write=False)
    n = stored.shape[1]
    start = None
    if section.start_time is not None:
        moment = section.start_time
        start = Moment(second=moment.replace(microsecond=0), nanosecond=moment.microsecond * 1000)
    trigger_s = first_event_s if section.trigger_s is None else section.trigger_s
    return Record(
        origin=Origin(path="", format="memory"),
        timebase=TimeBase.from_rates([scenario.sample_rate_hz], [n], n_samples=n),
        source=ArraySource(stored, np.zeros((0, n), dtype=np.uint8)),
        analog=tuple(channels),
        station=section.station,
        device=section.device,
        nominal_frequency_hz=scenario.network.frequency_hz,
        start=start,
        trigger=None if start is None else start.later(trigger_s),
    )


def write_forged(forged: ForgedRecord, folder: Path, *, existing: Existing = "refuse") -> tuple[Path, ...]:
    """Write a forged record in the format of its scenario, and its truth beside it.

    Parameters
    ----------
    forged : ForgedRecord
        Its truth's record name is that of the files.
    folder : Path
        Is there already.
    existing : {"refuse", "replace"}
        What to do about files of these names.

    Returns
    -------
    tuple of Path
        The files, the truth last.

    Raises
    ------
    RecordError
        If a file exists or cannot be written.
    """
    section = forged.scenario.record
    name = forged.truth.record.name
    truth = folder / f"{name}{TRUTH_SUFFIX}"
    with written_beside(truth, existing=existing) as draft:
        draft.write_text(forged.truth.to_json(), encoding="utf-8", newline="\n")
        if section.format == "csv":
            from analyzer.records.delimited import write_delimited

            text = folder / f"{name}.csv"
            written: tuple[Path, ...] = (write_delimited(forged.record, text, existing=existing),)
        else:
            from analyzer.records.comtrade import write_comtrade

            written = write_comtrade(
                forged.record,
                folder / f"{name}{'.cff' if section.combined else '.cfg'}",
                revision=section.revision,
                encoding=section.encoding,
                existing=existing,
            )
    return (*written, truth)
