"""How much memory a piece of work takes at its peak, of this process and all its threads.

Asked of the operating system: tracing Python's allocations sees nothing of compiled libraries, and starting
and stopping it is not safe beside their threads on every Python supported.
"""

from __future__ import annotations

import re
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from pathlib import Path


@contextmanager
def grown_memory() -> Iterator[Callable[[], int]]:
    """Hand out a function that tells by how many bytes memory has grown at most since the block began.

    Only Linux lets the peak be set back; elsewhere growth below an earlier peak goes unseen.
    """
    with suppress(OSError):
        Path("/proc/self/clear_refs").write_text("5", encoding="ascii")
    before = _peak_bytes()
    yield lambda: _peak_bytes() - before


def _peak_bytes() -> int:
    if sys.platform == "linux":
        match = re.search(r"VmHWM:\s+(\d+) kB", Path("/proc/self/status").read_text(encoding="ascii"))
        assert match is not None
        return int(match[1]) << 10
    if sys.platform == "win32":
        import psutil

        return int(psutil.Process().memory_info().peak_wset)
    import resource

    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return int(peak if sys.platform == "darwin" else peak << 10)
