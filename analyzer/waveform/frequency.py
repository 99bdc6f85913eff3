"""The power frequency of a record: what the wave says, held against what the file says."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from analyzer.records import Problem, Record
from analyzer.terminals import Terminal
from analyzer.waveform.prefault import coarse_frequency
from analyzer.waveform.sampling import aligned_signals
from analyzer.waveform.scan import LONG_S, LONG_SAMPLES
from analyzer.waveform.stretches import usable_stretches

_LOOKED_AT_CYCLES = 12.0
_CONTRADICTION_HZ = 3.0
_STANDARD_HZ = (50.0, 60.0)


def power_frequency(record: Record, terminal: Terminal) -> tuple[float, tuple[Problem, ...]]:
    """Return the power frequency to within a few hertz.

    Parameters
    ----------
    record : Record
    terminal : Terminal

    Returns
    -------
    frequency_hz : float
        The stated nominal one, or the standard one nearest to the wave where that contradicts it. [Hz]
    problems : tuple of Problem
        The contradiction, or the lack of a statement.
    """
    stated_hz = record.nominal_frequency_hz
    assumed_hz = stated_hz or 50.0
    stretches, _ = usable_stretches(record, frequency_hz=assumed_hz)
    if not stretches:
        return assumed_hz, ()
    whole = stretches[0]
    loaded = min(whole.stop - whole.first, LONG_SAMPLES, round(LONG_S * whole.rate_hz))
    times_s, currents, voltages = aligned_signals(record, terminal, replace(whole, stop=whole.first + loaded))
    span = slice(0, round(_LOOKED_AT_CYCLES * whole.rate_hz / assumed_hz))
    guide = (voltages if voltages is not None and np.ptp(voltages) > 0 else currents)[:, span]
    seen_hz = coarse_frequency(times_s[span], guide, nominal_hz=assumed_hz)
    nearest_hz = min(_STANDARD_HZ, key=lambda hz: abs(hz - seen_hz))
    if stated_hz is None:
        message = f"no nominal frequency is stated; {nearest_hz:g} Hz by the wave"
        return nearest_hz, (Problem(code="frequency-assumed", message=message),)
    if abs(seen_hz - stated_hz) > _CONTRADICTION_HZ and abs(seen_hz - nearest_hz) < _CONTRADICTION_HZ:
        message = (
            f"a nominal frequency of {stated_hz:g} Hz is stated, the wave has {seen_hz:.1f} Hz; "
            f"{nearest_hz:g} Hz used"
        )
        return nearest_hz, (Problem(code="frequency-contradicted", severity="warning", message=message),)
    return stated_hz, ()
