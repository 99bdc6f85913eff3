"""Time and memory of code beside other code, and the rows that the table of results is made from."""

from __future__ import annotations

import datetime
import importlib.metadata
import json
import os
import platform
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

from tests.bench.files import SEED

_PROJECT = Path(__file__).resolve().parents[2]


def best_times_s(
    *sides: Callable[[], object], rounds: int = 7, clock: Callable[[], float] = time.perf_counter
) -> list[float]:
    """The shortest time of each side; they take turns, and the first turn of each is not timed."""
    best = [float("inf")] * len(sides)
    for n in range(rounds + 1):
        for k, side in enumerate(sides):
            begin = clock()
            result = side()
            took_s = clock() - begin
            del result  # before the other side runs, and not within the time of either
            if n:
                best[k] = min(best[k], took_s)
    return best


def run_apart(task: str, path: Path, *, module: str = "tests.bench.apart") -> dict[str, Any]:
    """What such a module measures of a task in a process of its own."""
    done = subprocess.run(
        [sys.executable, "-m", module, task, str(path)],
        cwd=_PROJECT,
        capture_output=True,
        text=True,
        encoding="utf-8",
        timeout=600,
    )
    assert done.returncode == 0, done.stderr
    figures: dict[str, Any] = json.loads(done.stdout)
    return figures


def note(*, what: str, here: str, beside: str = "", ratio: float | None = None, limit: str = "") -> None:
    """Put a row into the file that FAULTASSAY_BENCH_OUT names, in place of an earlier one of that name."""
    name = os.environ.get("FAULTASSAY_BENCH_OUT")
    if not name:
        return
    path = Path(name)
    rows: list[dict[str, Any]] = []
    if path.exists():
        rows = json.loads(path.read_text(encoding="utf-8"))["rows"]
    row = {"what": what, "here": here, "beside": beside, "ratio": ratio, "limit": limit}
    known = [k for k, earlier in enumerate(rows) if earlier["what"] == what]
    if known:
        rows[known[0]] = row
    else:
        rows.append(row)
    text = json.dumps({"run": _this_run(), "rows": rows}, indent=2, ensure_ascii=False)
    path.write_text(text + "\n", encoding="utf-8")


def _this_run() -> dict[str, str | int | None]:
    versions = {name: importlib.metadata.version(name) for name in ("numpy", "pandas", "pyarrow")}
    return {
        "Python": platform.python_version(),
        **versions,
        "system": f"{platform.system()} {platform.machine()}",
        "processors": os.cpu_count(),
        "date": datetime.datetime.now(tz=datetime.UTC).date().isoformat(),
        "seed": SEED,
    }
