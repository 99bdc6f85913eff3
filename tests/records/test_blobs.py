"""Mapped files: what has been let go reads the same again; and the fingerprint of what is in them."""

from __future__ import annotations

import hashlib
import mmap
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.records import RecordError
from analyzer.records.blobs import Blob, let_go

CONTENT = np.random.default_rng(2).integers(0, 256, size=5_000_003, dtype=np.uint8).tobytes()


@pytest.fixture(scope="module")
def file(tmp_path_factory: pytest.TempPathFactory) -> Blob:
    path = tmp_path_factory.mktemp("blobs") / "file.dat"
    path.write_bytes(CONTENT)
    return Blob(name=path.name, shown=str(path), path=path)


@settings(deadline=None, derandomize=True, max_examples=50)
@given(
    offset=st.integers(0, 70_000),
    size=st.sampled_from([1, 7, 58]),
    ends=st.tuples(st.floats(0.0, 1.0), st.floats(0.0, 1.0)),
)
def test_what_has_been_let_go_reads_the_same(file, offset, size, ends):
    n = (len(CONTENT) - offset) // size
    rows = np.frombuffer(file.view()[offset:], dtype=f"V{size}", count=n)
    first, stop = (round(end * n) for end in sorted(ends))
    assert rows[first:stop].tobytes() == CONTENT[offset + first * size : offset + stop * size]
    let_go(rows, first, stop)
    assert rows.tobytes() == CONTENT[offset : offset + n * size]


@pytest.mark.skipif(not Path("/proc/self/statm").exists(), reason="optional: only Linux tells mapped memory")
def test_what_is_let_go_is_no_longer_in_memory(tmp_path):
    path = tmp_path / "large.dat"
    path.write_bytes(bytes(64 << 20))
    rows = np.frombuffer(Blob(name="large.dat", shown="", path=path).view(), dtype=np.uint64)

    def mapped_bytes() -> int:
        return mmap.PAGESIZE * int(Path("/proc/self/statm").read_text(encoding="utf-8").split()[2])

    before = mapped_bytes()
    assert rows.sum() == 0
    assert mapped_bytes() - before > 60 << 20
    let_go(rows, 0, rows.size)
    assert mapped_bytes() - before < 4 << 20


def test_bytes_in_memory_cannot_be_let_go(file):
    rows = np.frombuffer(Blob(name="m", shown="m", data=CONTENT).view(), dtype=np.uint8)
    let_go(rows, 0, rows.size)
    let_go(np.arange(5), 0, 5)
    assert rows.tobytes() == CONTENT


def test_the_fingerprint_is_that_of_the_bytes(file):
    expected = hashlib.sha256(CONTENT).hexdigest()
    assert file.sha256() == expected
    assert Blob(name="m", shown="m", data=memoryview(CONTENT)).sha256() == expected


def test_no_fingerprint_of_a_file_that_is_gone(tmp_path):
    with pytest.raises(RecordError, match="cannot be opened"):
        Blob(name="x", shown="x", path=tmp_path / "x").sha256()
