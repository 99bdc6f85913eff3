"""The real records beside the project: what its list says of each, and each under one name."""

from __future__ import annotations

import csv
import shutil
from dataclasses import dataclass
from pathlib import Path


@dataclass(frozen=True)
class Listed:
    """One row of the list of real records, and its files."""

    id: str
    row: dict[str, str]
    files: tuple[Path, ...]

    def path(self, folder: Path) -> Path:
        """A path to read it by; copied to `folder` where configuration and data have different names."""
        if len(self.files) < 2 or self.files[0].stem == self.files[1].stem:
            return self.files[0]
        for file in self.files:
            shutil.copy(file, folder / f"rec{file.suffix}")
        return folder / f"rec{self.files[0].suffix}"


def listed(records: Path) -> dict[str, Listed]:
    """All rows of the list by their ids; `records` is the folder that holds it."""
    with (records / "MANIFEST.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    found = {}
    for row in rows:
        first, *others = (Path(name) for name in row["file"].split(" + "))
        files = [records / first, *((records / first).with_name(other.name) for other in others)]
        found[row["id"]] = Listed(row["id"], row, tuple(files))
    return found


# The ids, so that each record is a test of its own even where the folder is absent and all are skipped.
IDS = [
    *(f"pct{k:02d}" for k in range(1, 11)), "drews01", "drews02", "drews03", "wisp01", "wisp02", "wisp03",
    "wisp04", "wisp05", "gocom01", "gocom02", "ctio01", "ctio02", "ctpy01", "ctpy02", "ctpy03", "pycom01",
    "pycom02", "pycom03", "keating01", "pnnl01", "pnnl02", "pnnl03", "qcom01", "qcom02", "nazir01", "hvdc01",
    "hvdc04", "tshort01", "tshort02", "tshort03", "gdlp01",
]  # fmt: skip
