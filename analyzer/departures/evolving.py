"""``evolving-fault``: a fault that becomes another one while it lasts."""

from __future__ import annotations

from analyzer.estimate.event import Estimate
from analyzer.findings import DepartureInfo
from analyzer.waveform.events import Event


def evolving_fault(event: Event, estimate: Estimate) -> tuple[DepartureInfo, ...]:
    """Return the departure where the fit ends because the currents jump to another state.

    What is stated of the event is fitted before the jump, and the state after it is an event of its own: a
    note, since RL theory explains each.
    """
    if estimate.changed is None:
        return ()
    time_s = float(event.times_s[estimate.changed])
    after_s = time_s - estimate.inception.time_s
    return (
        DepartureInfo(
            code="evolving-fault",
            severity="note",
            time_s=time_s,
            channels=(),
            statistic=None,
            threshold=None,
            says=f"The currents jump again {after_s * 1e3:.1f} ms after inception, at {time_s:.4f} s; what "
            "is stated here is fitted before that, and what follows is an event of its own.",
        ),
    )
