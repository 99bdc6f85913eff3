"""Factors that published standards put in place of the exact course of the current."""

from __future__ import annotations

import math

from analyzer.theory.closed_form import TheoryError


def kappa_iec60909(r_over_x: float) -> float:
    r"""Return the standard's factor from the symmetrical peak to the asymmetrical peak current.

    .. math:: \kappa = 1.02 + 0.98\,e^{-3R/X}

    Parameters
    ----------
    r_over_x : float
        R/X of the fault loop at the power frequency, 0 or more. [1]

    Returns
    -------
    float
        Factor, between 1.02 and 2. [1]

    Raises
    ------
    TheoryError
        If `r_over_x` is negative or not a number.

    Notes
    -----
    An approximation to the exact factor of a fault at voltage zero without load (`RLFault.kappa`): above it
    by 0.05 to 0.56 % for X/R of 5 and more, off by up to 2 % below. It must not be inverted to find X/R.

    References
    ----------
    IEC 60909-0, clause 4.3.1.1 in the 2001 edition, 8.1 in that of 2016 (clause numbers from memory); the
    formula as restated by (retrieved)
    https://github.com/e2nIEE/pandapower/blob/v2.3.0/doc/shortcircuit/ip.rst

    Examples
    --------
    >>> round(kappa_iec60909(0.1), 6)
    1.746002
    """
    if not r_over_x >= 0:
        raise TheoryError("negative-resistance", f"R/X is {r_over_x}", where="r_over_x", hint="0 or more")
    return 1.02 + 0.98 * math.exp(-3 * r_over_x)
