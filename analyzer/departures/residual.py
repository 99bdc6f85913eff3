"""``residual-structure``: something that the model leaves, beyond the noise and large enough to matter."""

from __future__ import annotations

import numpy as np

from analyzer.estimate.event import Estimate
from analyzer.findings import DepartureInfo

_SHARE = 0.03  # of the symmetrical peak, RMS: our choice
_CHI = 3.0  # root of the reduced chi-square


def residual_structure(estimate: Estimate, channels: tuple[str, ...]) -> tuple[DepartureInfo, ...]:
    """Return the departure of each loop whose residual is significant and material.

    Parameters
    ----------
    estimate : Estimate
    channels : tuple of str
        Channel ids of the phase currents.
    """
    found = []
    for loop, fit in estimate.loops:
        amplitude = np.hypot(fit.coefficients[0], fit.coefficients[1])
        share = float(np.sqrt(np.sum(fit.residual_rms**2) / np.sum(amplitude**2)))
        chi = float(np.sqrt(fit.reduced_chi_square))
        if share <= _SHARE or chi <= _CHI:
            continue
        used = np.any(np.array(loop.weights) != 0, axis=0)
        found.append(
            DepartureInfo(
                code="residual-structure",
                severity="warning",
                time_s=None,
                channels=tuple(c for c, is_used in zip(channels, used, strict=True) if is_used),
                statistic=share,
                threshold=_SHARE,
                says=f"The model of loop {loop.name} leaves {share:.1%} of the symmetrical peak (RMS), "
                f"{chi:.0f} times the noise before inception: something else than one decaying offset and "
                "a steady sinusoid is in this current.",
            )
        )
    return tuple(found)
