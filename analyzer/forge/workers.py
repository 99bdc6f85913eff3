"""Setting up a worker process before it loads numpy; imports nothing of weight, for that reason."""

from __future__ import annotations

import os


def one_thread() -> None:
    """Let numpy's libraries use one thread: the processes already share the cores."""
    for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
        os.environ[name] = "1"
