"""How much memory reading takes, each time in a process of its own; run with -m bench."""

from __future__ import annotations

import os
import shutil
from pathlib import Path

import numpy as np
import pytest

from tests.bench.files import (
    ADDENDS,
    MULTIPLIERS,
    RATE_HZ,
    ascii_file,
    binary_file,
    sparse_file,
    stamped_file,
)
from tests.bench.measuring import note, run_apart

pytestmark = pytest.mark.bench

_LONG_BYTES = 3_000_000_000


def test_a_second_of_two_channels_of_a_long_record(tmp_path: Path) -> None:
    if os.name == "nt":
        pytest.skip("a file of 3 GB would be written in full")
    file = sparse_file(tmp_path, n_bytes=_LONG_BYTES)
    if file.data.stat().st_blocks * 512 > _LONG_BYTES // 2:
        pytest.skip("this file system fills the gaps of sparse files")
    took = run_apart("second", file.configuration)
    assert took["n_samples"] == RATE_HZ + 1
    assert took["mean_a"] > 10 * np.abs(MULTIPLIERS[:2] + ADDENDS[:2]).max()  # not the gap's zeros
    note(
        what="BINARY, 3 GB: two channels of one second, time",
        here=f"{took['seconds']:.3f} s",
        limit="1 s",
    )
    note(
        what="BINARY, 3 GB: two channels of one second, memory of the process",
        here=f"{took['peak_bytes'] / 1e6:.0f} MB",
        limit="150 MB",
    )
    assert took["seconds"] < 1.0
    assert took["peak_bytes"] < 150e6


def test_a_second_of_a_long_record_timed_by_stamps(tmp_path: Path) -> None:
    if shutil.disk_usage(tmp_path).free < 2 * _LONG_BYTES:
        pytest.skip("not enough room on the disk for a file of 3 GB")
    file = stamped_file(tmp_path, n_bytes=_LONG_BYTES)
    try:
        took = run_apart("second", file.configuration)
        beyond_file = took["peak_bytes"] - file.n_bytes
    finally:
        file.data.unlink()
    assert took["n_samples"] == 12_501
    note(
        what="BINARY, 3 GB, times from its 52 million stamps: two channels of one second, time",
        here=f"{took['seconds']:.1f} s",
    )
    note(
        what="the same, memory beyond the mapped file",
        here=f"{beyond_file / 1e6:.0f} MB",
        beside=f"the times alone {8 * file.n_samples / 1e6:.0f} MB",
        ratio=beyond_file / (8 * file.n_samples),
    )


def test_two_channels_of_a_whole_binary_record(tmp_path: Path) -> None:
    file = binary_file(tmp_path, n_bytes=200_000_000)
    took = run_apart("channels", file.configuration)
    note(
        what="BINARY, 200 MB: two of 24 channels, whole length, memory with the mapped file",
        here=f"{took['peak_bytes'] / 1e6:.0f} MB",
        beside=f"file and result {(file.n_bytes + took['result_bytes']) / 1e6:.0f} MB",
        limit="100 MB more",
    )
    assert took["peak_bytes"] < file.n_bytes + took["result_bytes"] + 100e6


def test_a_whole_ascii_record(tmp_path: Path) -> None:
    file = ascii_file(tmp_path, n_bytes=100_000_000, numbers="whole")
    took = run_apart("all", file.configuration)
    note(
        what="ASCII, 100 MB: read and scale all, memory with the mapped file",
        here=f"{took['peak_bytes'] / 1e6:.0f} MB",
        beside=f"file {file.n_bytes / 1e6:.0f} MB",
        ratio=took["peak_bytes"] / file.n_bytes,
        limit="6",
    )
    assert took["peak_bytes"] < 6 * file.n_bytes
