"""The error a forged network raises, and the checks that raise it."""

from __future__ import annotations

import math

from analyzer.errors import FaultassayError


class ForgeError(FaultassayError):
    """A network or schedule that cannot exist; `where` names the parameter."""


def impossible(where: str, message: str, *, hint: str = "", code: str = "forge-impossible") -> ForgeError:
    """Return the error for a parameter that no network can have.

    Parameters
    ----------
    where : str
        The parameter, as ``element.field``.
    message, hint : str
        What is wrong, and what to do.
    code : str
        Stable code of the error.

    Returns
    -------
    ForgeError
        To be raised by the caller.
    """
    return ForgeError(code, message, where=where, hint=hint)


def require_at_least(value: float, limit: float, where: str) -> None:
    """Raise unless `value` is finite and not below `limit`.

    Raises
    ------
    ForgeError
        Naming `where`.
    """
    if not math.isfinite(value) or value < limit:
        raise impossible(where, f"must be a finite number not below {limit:g}, got {value!r}")


def require_positive(value: float, where: str) -> None:
    """Raise unless `value` is finite and greater than zero.

    Raises
    ------
    ForgeError
        Naming `where`.
    """
    if not math.isfinite(value) or value <= 0.0:
        raise impossible(where, f"must be a finite number greater than zero, got {value!r}")


def require_finite(value: float, where: str) -> None:
    """Raise unless `value` is finite.

    Raises
    ------
    ForgeError
        Naming `where`.
    """
    if not math.isfinite(value):
        raise impossible(where, f"must be a finite number, got {value!r}")


def require_passive(z_ohm: complex, where: str, *, inductive: bool = False) -> None:
    """Raise unless an impedance has R >= 0, X >= 0 and is not zero.

    Parameters
    ----------
    z_ohm : complex
        Impedance at nominal frequency. [ohm]
    where : str
        The parameter's name.
    inductive : bool
        Ask for X > 0 as well: what stands behind an ideal voltage source must hold a flux.

    Raises
    ------
    ForgeError
        Naming `where`.
    """
    r_ohm, x_ohm = z_ohm.real, z_ohm.imag
    if not (math.isfinite(r_ohm) and math.isfinite(x_ohm)):
        raise impossible(where, f"must be finite, got {z_ohm!r}")
    if r_ohm < 0.0:
        raise impossible(where, f"has a negative resistance, {r_ohm:g} ohm")
    if x_ohm < 0.0:
        raise impossible(
            where, f"has a negative reactance, {x_ohm:g} ohm", hint="only R-L impedances are built"
        )
    if r_ohm == 0.0 and x_ohm == 0.0:
        raise impossible(where, "is zero: nothing would limit the current")
    if inductive and x_ohm == 0.0:
        raise impossible(where, "needs a reactance above zero", hint="a purely resistive source is not built")
