"""Many records of one scenario, each the same whatever the number of records and of processes."""

from __future__ import annotations

import multiprocessing
from collections.abc import Callable, Iterator
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, wait
from dataclasses import dataclass
from itertools import islice
from pathlib import Path

from analyzer.forge.errors import ForgeError
from analyzer.forge.record import forge_record, write_forged
from analyzer.forge.scenario import Scenario
from analyzer.forge.workers import one_thread
from analyzer.records.output import Existing

_MOST_WORKERS = 61  # what Windows can wait for at once
_RECORDS_AT_A_TIME = 8  # a few tenths of a second for a process, and progress that is seen to move


@dataclass(frozen=True, slots=True, kw_only=True)
class CampaignRecord:
    """One record of a campaign.

    Parameters
    ----------
    index : int
        Counted from 0.
    name : str
        Of its files.
    files : tuple of Path
        The truth last.
    """

    index: int
    name: str
    files: tuple[Path, ...]


@dataclass(frozen=True, slots=True, kw_only=True)
class _Order:
    scenario: Scenario
    seed: int | None
    base: str
    numbered: bool
    folder: Path
    existing: Existing

    def name(self, index: int) -> str:
        return f"{self.base}-{index + 1:04d}" if self.numbered else self.base

    def forge(self, indices: range) -> list[CampaignRecord]:
        return [self._forge_one(index) for index in indices]

    def _forge_one(self, index: int) -> CampaignRecord:
        name = self.name(index)
        try:
            forged = forge_record(self.scenario, seed=self.seed, index=index, name=name)
        except ForgeError as error:
            if not self.numbered:
                raise
            # Another draw of the same scenario may have been possible: say which one was not.
            raise ForgeError(
                error.code, f"{error.message}, in record {index + 1}", where=error.where, hint=error.hint
            ) from error
        files = write_forged(forged, self.folder, existing=self.existing)
        return CampaignRecord(index=index, name=name, files=files)


def forge_campaign(
    scenario: Scenario,
    folder: Path,
    *,
    count: int = 1,
    seed: int | None = None,
    name: str | None = None,
    workers: int = 1,
    existing: Existing = "refuse",
    progress: Callable[[int], None] | None = None,
) -> tuple[CampaignRecord, ...]:
    """Forge records of a scenario into a folder.

    Parameters
    ----------
    scenario : Scenario
    folder : Path
        Made when it is not there.
    count : int
        Number of records. One is called `name`, several ``name-0001`` and so on.
    seed : int or None
        None is the scenario's own. Record k depends on the seed and k only.
    name : str or None
        None is the scenario's own, or ``record``.
    workers : int
        Processes; with one all is done in this process. They are started afresh, so that a program calling
        this needs the usual ``if __name__ == "__main__":``.
    existing : {"refuse", "replace"}
        What to do about files of these names.
    progress : callable, optional
        Called with the number of records done, as it grows.

    Returns
    -------
    tuple of CampaignRecord
        In order.

    Raises
    ------
    ForgeError
        If the scenario, or one drawn from it, is impossible; records before it may have been written.
    RecordError
        If a file exists or cannot be written.
    ValueError
        If `count` or `workers` is not at least 1.
    """
    if count < 1 or workers < 1:
        raise ValueError("count and workers are at least 1")
    base = name or scenario.record.name or "record"
    order = _Order(
        scenario=scenario, seed=seed, base=base, numbered=count > 1, folder=folder, existing=existing
    )
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise ForgeError("cannot-write", f"cannot be made: {reason}", where=str(folder)) from error
    batches = [
        range(first, min(first + _RECORDS_AT_A_TIME, count)) for first in range(0, count, _RECORDS_AT_A_TIME)
    ]
    done: list[CampaignRecord] = []
    for batch in _results(order, batches, workers=min(workers, len(batches), _MOST_WORKERS)):
        done += batch
        if progress is not None:
            progress(len(done))
    return tuple(sorted(done, key=lambda record: record.index))


def _results(order: _Order, batches: list[range], *, workers: int) -> Iterator[list[CampaignRecord]]:
    if workers == 1:
        yield from map(order.forge, batches)
        return
    context = multiprocessing.get_context("spawn")
    with ProcessPoolExecutor(workers, mp_context=context, initializer=one_thread) as pool:
        waiting = iter(batches)
        running: set[Future[list[CampaignRecord]]] = {
            pool.submit(order.forge, batch) for batch in islice(waiting, 2 * workers)
        }
        # Few are handed out at a time, so that an error ends the campaign and not the whole queue.
        while running:
            finished, running = wait(running, return_when=FIRST_COMPLETED)
            for future in finished:
                yield future.result()
                running |= {pool.submit(order.forge, batch) for batch in islice(waiting, 1)}
