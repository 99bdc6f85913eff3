"""Files and archive members as one thing: a name, a size, and bytes that are mapped and not copied."""

from __future__ import annotations

import hashlib
import mmap
import os
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from analyzer.records.problems import RecordError

_AROUND_BYTES = 1 << 20


@dataclass(frozen=True, slots=True, eq=False)
class Blob:
    """Bytes with a name, from a file or from memory.

    Attributes
    ----------
    name : str
        File name without folder.
    shown : str
        The name for messages: a path, or archive and member.
    path : Path or None
        The file, None for bytes in memory.
    data : bytes-like or None
        The bytes, None for a file.
    """

    name: str
    shown: str
    path: Path | None = None
    data: bytes | memoryview | None = None

    @property
    def size(self) -> int:
        """Number of bytes.

        Raises
        ------
        RecordError
            If the file cannot be reached (code ``unreadable-file``).
        """
        if self.data is not None:
            return len(self.data)
        assert self.path is not None
        try:
            return self.path.stat().st_size
        except OSError as error:
            raise _unreadable(self.shown, error) from error

    def view(self) -> memoryview:
        """Return the bytes, read-only; a file is memory-mapped.

        Raises
        ------
        RecordError
            If the file cannot be opened (code ``unreadable-file``).
        """
        if self.data is not None:
            return memoryview(self.data)
        if self.size == 0:  # an empty file cannot be mapped
            return memoryview(b"")
        assert self.path is not None
        try:
            with self.path.open("rb") as file:
                return memoryview(mmap.mmap(file.fileno(), 0, access=mmap.ACCESS_READ))
        except (OSError, ValueError) as error:  # ValueError: the file was emptied meanwhile
            raise _unreadable(self.shown, error) from error

    def read(self, *, limit_bytes: int) -> bytes:
        """Return all bytes of a member that ought to be small.

        Raises
        ------
        RecordError
            If it is larger than `limit_bytes` (code ``too-large``) or cannot be opened.
        """
        if self.size > limit_bytes:
            raise RecordError(
                "too-large",
                f"{self.size} bytes, more than the {limit_bytes} that such a file may have",
                path=self.shown,
                hint="check that this is the file you mean",
            )
        return bytes(self.view())

    def head(self, n_bytes: int) -> bytes:
        """Return the first bytes, at most `n_bytes`, without reading further."""
        if self.data is not None:
            return bytes(self.data[:n_bytes])
        assert self.path is not None
        try:
            with self.path.open("rb") as file:
                return file.read(n_bytes)
        except OSError as error:
            raise _unreadable(self.shown, error) from error

    def sha256(self) -> str:
        """Return the SHA-256 of the bytes, in hexadecimal."""
        if self.data is not None:
            return hashlib.sha256(self.data).hexdigest()
        assert self.path is not None
        try:
            with self.path.open("rb") as file:  # mapped, all of it would stay in memory
                return hashlib.file_digest(file, "sha256").hexdigest()
        except OSError as error:
            raise _unreadable(self.shown, error) from error


def let_go(mapped: NDArray[Any], first: int, stop: int) -> None:
    """Let the memory under `mapped[first:stop]` go where it is that of a mapped file; it can be read again.

    Parameters
    ----------
    mapped : ndarray
        As :func:`numpy.frombuffer` made it of :meth:`Blob.view`.
    first, stop : int
        Elements.

    Notes
    -----
    Else a file that is read through once counts as memory of the process in full. Windows takes pages back by
    itself, there nothing is done.
    """
    owner = mapped.base.obj if isinstance(mapped.base, memoryview) else None
    if not isinstance(owner, mmap.mmap) or not hasattr(owner, "madvise") or first >= stop:
        return
    offset = mapped.ctypes.data - np.frombuffer(owner, dtype=np.uint8).ctypes.data
    # The system maps pages around those that are touched; they have to go too, and may be mapped again.
    begin = (offset + first * mapped.itemsize) // _AROUND_BYTES * _AROUND_BYTES
    end = min(offset + stop * mapped.itemsize + _AROUND_BYTES, len(owner))
    owner.madvise(mmap.MADV_DONTNEED, begin, end - begin)


class Shelf(Protocol):
    """Where a record's members lie side by side: a folder, or an archive."""

    @property
    def shown(self) -> str:
        """Name for messages."""

    def names(self) -> tuple[str, ...]:
        """Names of all members."""

    def has(self, name: str) -> bool:
        """Whether a member of exactly that name is there."""

    def blob(self, name: str) -> Blob:
        """Return the member of that name."""


@dataclass(frozen=True, slots=True)
class FolderShelf:
    """The files of one folder."""

    folder: Path

    @property
    def shown(self) -> str:
        """Name for messages."""
        return str(self.folder)

    def names(self) -> tuple[str, ...]:
        """Names of the folder's files.

        Raises
        ------
        RecordError
            If the folder cannot be listed (code ``unreadable-file``).
        """
        try:
            with os.scandir(self.folder) as entries:
                return tuple(sorted(entry.name for entry in entries if _is_file(entry)))
        except OSError as error:
            raise _unreadable(self.shown, error) from error

    def has(self, name: str) -> bool:
        """Whether a file of exactly that name is there."""
        try:
            return (self.folder / name).is_file()
        except OSError:  # too long a name, or a folder that may not be entered
            return False

    def blob(self, name: str) -> Blob:
        """Return the file of that name."""
        path = self.folder / name
        return Blob(name=name, shown=str(path), path=path)


@dataclass(frozen=True, slots=True, eq=False)
class MemoryShelf:
    """Members held in memory, as they come out of an archive."""

    shown: str
    members: Mapping[str, bytes]

    def names(self) -> tuple[str, ...]:
        """Names of the members."""
        return tuple(sorted(self.members))

    def has(self, name: str) -> bool:
        """Whether a member of exactly that name is there."""
        return name in self.members

    def blob(self, name: str) -> Blob:
        """Return the member of that name."""
        return Blob(name=name, shown=f"{self.shown}!{name}", data=self.members[name])


def _is_file(entry: os.DirEntry[str]) -> bool:
    try:
        return entry.is_file()
    except OSError:  # links in a circle
        return False


def _unreadable(shown: str, error: OSError | ValueError) -> RecordError:
    reason = (error.strerror if isinstance(error, OSError) else "") or type(error).__name__
    return RecordError("unreadable-file", f"cannot be opened: {reason}", path=shown)
