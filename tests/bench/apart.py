"""One task in a process of its own: prints seconds and the most memory it ever had, as JSON."""

from __future__ import annotations

import json
import sys
import time
from pathlib import Path

from analyzer.records import read  # its memory counts, and that of the interpreter


def main(task: str, path: Path) -> None:
    """Run `task` on the record at `path`."""
    begin = time.perf_counter()
    record = read(path)
    if task == "second":
        middle_s = record.duration_s / 2
        values = record.between(middle_s, middle_s + 1.0).signals(["I1", "I2"])
    elif task == "channels":
        values = record.signals(["I1", "I2"])
    elif task == "all":
        values = record.signals()
    else:
        raise SystemExit(f"unknown task {task}")
    took_s = time.perf_counter() - begin
    figures = {
        "seconds": took_s,
        "peak_bytes": peak_bytes(),
        "result_bytes": values.nbytes,
        "n_samples": values.shape[1],
        "mean_a": float(abs(values).mean()),
    }
    sys.stdout.write(json.dumps(figures) + "\n")


def peak_bytes() -> int:
    """The most resident memory of this process so far; mapped parts of files count."""
    status = Path("/proc/self/status")  # ru_maxrss would begin with the memory of the process that started it
    if status.exists():
        line = next(x for x in status.read_text(encoding="utf-8").splitlines() if x.startswith("VmHWM"))
        return 1024 * int(line.split()[1])
    if sys.platform == "win32":
        import psutil

        return int(psutil.Process().memory_info().peak_wset)
    import resource

    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss  # in bytes on macOS


if __name__ == "__main__":
    main(sys.argv[1], Path(sys.argv[2]))
