"""Small records on disk for the tests of the commands, written by hand and not by the package."""

from __future__ import annotations

import math
from pathlib import Path

HOSTILE = "\x1b[31mI\x07[red]A[/red]\x1b]0;owned\x07\u202e[link=file:///etc]x" + "W" * 300


def write_record(
    folder: Path,
    stem: str = "trip",
    *,
    names: tuple[str, ...] = ("IA", "IB", "IC"),
    station: str = "Riverbend",
) -> Path:
    """Write 0.1 s of 50 Hz currents at 1000 Hz, 1000 A peak, as COMTRADE 1999 ASCII; return the .cfg."""
    n_samples, n_digital = 101, 2
    lines = [f"{station},Feeder 4,1999", f"{len(names) + n_digital},{len(names)}A,{n_digital}D"]
    for k, name in enumerate(names, start=1):
        lines.append(f"{k},{name},{'ABC'[(k - 1) % 3]},Line,A,0.5,0,0,-99999,99999,600,5,P")
    lines += ["1,TRIP,,,0", "2,52A,,,1", "50", "1", f"1000,{n_samples}"]
    lines += ["01/05/2024,12:00:00.000000", "01/05/2024,12:00:00.040000", "ASCII", "1"]
    cfg = folder / f"{stem}.cfg"
    cfg.write_text("\r\n".join(lines) + "\r\n", encoding="utf-8", newline="")
    rows = []
    for n in range(n_samples):
        counts = [round(2000 * math.sin(2 * math.pi * (50 * n / 1000 - k / 3))) for k in range(len(names))]
        rows.append(",".join(map(str, [n + 1, n * 1000, *counts, int(40 <= n < 60), 1])))
    cfg.with_suffix(".dat").write_text("\r\n".join(rows) + "\r\n", encoding="ascii", newline="")
    return cfg
