"""faultassay: does a recorded short circuit agree with RL-circuit theory?

The public face. What it names is imported when it is first asked for, so that importing the package is
quick.
"""

from __future__ import annotations

import sys
from types import ModuleType
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from analyzer.examine import examine
    from analyzer.findings import Findings
    from analyzer.records import Record, read
    from analyzer.theory.rl import RLFault

    __version__: str

__all__ = ["Findings", "RLFault", "Record", "__version__", "examine", "read"]

_HOMES = {
    "examine": "analyzer.examine",
    "Findings": "analyzer.findings",
    "Record": "analyzer.records",
    "read": "analyzer.records",
    "RLFault": "analyzer.theory.rl",
}


def __getattr__(name: str) -> Any:
    if name == "__version__":
        return _version()
    home = _HOMES.get(name)
    if home is None:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    from importlib import import_module

    value = getattr(import_module(home), name)
    globals()[name] = value
    return value


class _Face(ModuleType):
    """This module: a function keeps its name when the submodule of that name is imported."""

    def __setattr__(self, name: str, value: Any) -> None:
        if not (name in _HOMES and isinstance(value, ModuleType)):
            super().__setattr__(name, value)


sys.modules[__name__].__class__ = _Face


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})


def _version() -> str:
    from importlib.metadata import PackageNotFoundError, version

    try:
        return version("faultassay")
    except PackageNotFoundError:  # a checkout that was never installed
        return "0+unknown"
