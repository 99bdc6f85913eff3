"""``short-window``: too few cycles to tell a time constant."""

from __future__ import annotations

import math

from analyzer.estimate.event import Estimate
from analyzer.findings import DepartureInfo
from analyzer.waveform.events import Event

# At one cycle the Cramér-Rao bound of a decay is two to four times that at two cycles (sinusoid, offset and
# decay free, X/R 5 to 40, computed); where between the two to draw the line is our choice.
_CYCLES = 1.5


def short_window(event: Event, estimate: Estimate) -> tuple[DepartureInfo, ...]:
    """Return the departure where the window is short and the first loop's decay is unknown for it."""
    fit = estimate.loops[0][1]
    samples = estimate.window.stop - estimate.window.start
    span_s = samples * event.sample_interval_s
    cycles = span_s * fit.omega_rad_per_s / (2 * math.pi)
    if cycles >= _CYCLES or fit.decay_rate_per_s is not None:
        return ()
    return (_said(cycles, "too few to tell a time constant"),)


def no_window(event: Event) -> tuple[DepartureInfo, ...]:
    """Return the departure of a fault that left no window to fit."""
    samples = event.end - event.first
    cycles = samples * event.sample_interval_s * event.prefault.frequency_hz
    return (_said(cycles, "too few to tell anything of it but its type"),)


def _said(cycles: float, why: str) -> DepartureInfo:
    return DepartureInfo(
        code="short-window",
        severity="note",
        time_s=None,
        channels=(),
        statistic=cycles,
        threshold=_CYCLES,
        says=f"The fault lasts {cycles:.2f} cycles of usable samples, {why}.",
    )
