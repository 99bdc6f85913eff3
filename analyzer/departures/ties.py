"""``offset-mismatch`` and ``xr-mismatch``: what the comparison rows found to disagree."""

from __future__ import annotations

from typing import Literal

from analyzer.findings import Comparison, DepartureInfo

_CODES: dict[str, Literal["offset-mismatch", "xr-mismatch"]] = {
    "offset-continuity": "offset-mismatch",
    "x-over-r-routes": "xr-mismatch",
}
_SIGMAS = 3.0


def ties_broken(rows: tuple[Comparison, ...]) -> tuple[DepartureInfo, ...]:
    """Return a departure for each comparison row that departs and has a code of its own."""
    return tuple(
        DepartureInfo(
            code=_CODES[row.check],
            severity="warning",
            time_s=None,
            channels=(),
            statistic=row.in_sigmas,
            threshold=_SIGMAS,
            says=row.says,
        )
        for row in rows
        if row.verdict == "departs" and row.check in _CODES
    )
