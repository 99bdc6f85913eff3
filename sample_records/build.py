"""Rebuild the sample records from the scenarios beside them.

    python sample_records/build.py [FOLDER]

writes to FOLDER, or over the records here when it is left out.
"""

from __future__ import annotations

import sys
from pathlib import Path

from analyzer.forge import forge_record, read_scenario, write_forged

HERE = Path(__file__).resolve().parent
SCENARIOS = HERE / "scenarios"


def build(scenario: Path, folder: Path) -> tuple[Path, ...]:
    """Forge one record and return its files, the truth last."""
    file = read_scenario(scenario)
    with file.naming():
        forged = forge_record(file.scenario, name=scenario.stem)
    return write_forged(forged, folder, existing="replace")


def main() -> None:
    folder = Path(sys.argv[1]) if len(sys.argv) > 1 else HERE
    for scenario in sorted(SCENARIOS.glob("*.toml")):
        files = build(scenario, folder)
        print(f"{scenario.stem}: {', '.join(f'{path.name} {path.stat().st_size} B' for path in files)}")


if __name__ == "__main__":
    main()
