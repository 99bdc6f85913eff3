"""The scan of a long record, or all of its examination, in a process of its own: prints figures as JSON."""

from __future__ import annotations

import json
import sys
import time
from dataclasses import replace
from pathlib import Path

from analyzer.examine import examine
from analyzer.records import Record, read
from analyzer.waveform.scan import active_windows
from analyzer.waveform.stretches import stretches_of
from tests.bench.apart import peak_bytes


def main(task: str, path: Path) -> None:
    """Scan all channels of the record's beginning, `task` being the share of it; or ``examine`` it all."""
    record = read(path)
    begin, begin_processor = time.perf_counter(), time.process_time()
    if task == "examine":
        findings = examine(record)
        found: list[object] = [
            (event.kind, event.fault_type, event.inception.time_s.value) for event in findings.events
        ]
    else:
        record = replace(record, stop=round(float(task) * record.n_samples))
        found = _scan(record)
    figures = {
        "seconds": time.perf_counter() - begin,
        "processor_seconds": time.process_time() - begin_processor,
        "peak_bytes": peak_bytes(),
        "n_numbers": record.n_samples * len(record.analog),
        "found": found,
    }
    sys.stdout.write(json.dumps(figures) + "\n")


def _scan(record: Record) -> list[object]:
    (stretch,) = stretches_of(record)
    signals = [((channel.id, 1.0),) for channel in record.analog]
    windows = active_windows(record, signals, stretch, frequency_hz=50.0)
    return [(part.first / part.rate_hz, part.stop / part.rate_hz) for part in windows]


if __name__ == "__main__":
    main(sys.argv[1], Path(sys.argv[2]))
