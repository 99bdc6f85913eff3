"""The table of results in Markdown: ``python -m tests.bench.table results.json``."""

from __future__ import annotations

import json
import sys
from pathlib import Path
from typing import Any


def table_of(results: dict[str, Any]) -> str:
    """Return the Markdown of what one run of the benchmarks wrote."""
    lines = ["| Measured | Here | Compared with | Ratio | Limit |", "|---|---:|---:|---:|---:|"]
    for row in results["rows"]:
        ratio = "" if row["ratio"] is None else f"{row['ratio']:.2f}"
        lines.append(f"| {row['what']} | {row['here']} | {row['beside']} | {ratio} | {row['limit']} |")
    run = ", ".join(f"{name} {value}" for name, value in results["run"].items())
    return "\n".join([*lines, "", f"Measured with: {run}."])


if __name__ == "__main__":
    if len(sys.argv) != 2:
        sys.exit("usage: python -m tests.bench.table results.json")
    sys.stdout.write(table_of(json.loads(Path(sys.argv[1]).read_text(encoding="utf-8"))) + "\n")
