"""Output files: written beside their final name, then renamed; never over an input."""

from __future__ import annotations

import os
import secrets
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Literal

from analyzer.records.model import Origin
from analyzer.records.problems import RecordError

Existing = Literal["refuse", "replace"]

_MEMBER_SUFFIXES = frozenset({".cfg", ".dat", ".hdr", ".inf", ".cff"})


@contextmanager
def written_beside(
    path: Path, *, existing: Existing = "refuse", inputs: Sequence[Path] = ()
) -> Iterator[Path]:
    """Hand out an empty file in the folder of `path`; it takes that name when all is written.

    When the body raises, the file is removed and whatever had the name `path` stays as it was.

    Parameters
    ----------
    path : Path
        Final name of the output.
    existing : {"refuse", "replace"}
        What to do when there is such a file already.
    inputs : sequence of Path
        Files that must not be replaced in any case; see :func:`input_files`.

    Yields
    ------
    Path
        The file to write to.

    Raises
    ------
    RecordError
        If `path` is one of `inputs` (code ``would-overwrite-input``), is there already (``exists``), is a
        folder (``not-a-file``), or cannot be written (``cannot-write``).
    ValueError
        If `existing` is none of the choices.
    """
    if existing not in ("refuse", "replace"):
        raise ValueError(f"existing must be 'refuse' or 'replace', not {existing!r}")
    _refuse(path, existing=existing, inputs=inputs)
    draft = path.with_name(f".{secrets.token_hex(8)}.part")
    try:
        # Opened here and not by tempfile, whose files nobody else may read.
        draft.open("xb").close()
        try:
            yield draft
            _refuse(path, existing=existing, inputs=inputs)  # it may have come into being meanwhile
            draft.replace(path)
        finally:
            draft.unlink(missing_ok=True)
    except OSError as error:
        reason = error.strerror or str(error) or type(error).__name__
        raise RecordError(
            "cannot-write",
            f"cannot be written: {reason}",
            path=str(path),
            hint="check that the folder is there, may be written to, and has room",
        ) from error


def input_files(origin: Origin) -> tuple[Path, ...]:
    """Return the files a record came from: its data file, the members beside it, the archive around it."""
    files: list[Path] = []
    if origin.data is not None and origin.data.path is not None:
        files.append(origin.data.path)
    parts = origin.path.split("!")
    files += [Path("!".join(parts[:k])) for k in range(1, len(parts) + 1) if parts[0]]
    if origin.format == "comtrade":
        for member in tuple(files):
            files += _members_beside(member)
    return tuple(dict.fromkeys(files))


def _members_beside(member: Path) -> list[Path]:
    try:
        with os.scandir(member.parent) as entries:
            names = [entry.name for entry in entries]
    except OSError:
        return []
    stem = member.stem.casefold()
    beside = (member.with_name(name) for name in names)
    return [
        path for path in beside if path.stem.casefold() == stem and path.suffix.lower() in _MEMBER_SUFFIXES
    ]


def _refuse(path: Path, *, existing: Existing, inputs: Sequence[Path]) -> None:
    if any(_same_file(path, other) for other in inputs):
        raise RecordError(
            "would-overwrite-input",
            "is the file that is being read",
            path=str(path),
            hint="choose another name for the output",
        )
    if path.is_dir():
        raise RecordError("not-a-file", "is a folder", path=str(path), hint="give the name of a file")
    if existing == "refuse" and os.path.lexists(path):
        raise RecordError(
            "exists",
            "is there already",
            path=str(path),
            hint="choose another name or let it be replaced",
        )


def _same_file(one: Path, other: Path) -> bool:
    try:
        return one.samefile(other)
    except (OSError, ValueError):  # one of them does not exist, or is no name for a file
        return False
