"""Formats, and the way from a path to the records behind it.

Another package adds a format by an entry point of the group ``faultassay.formats`` that names a
:class:`Format`.
"""

from __future__ import annotations

import logging
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from importlib.metadata import entry_points
from pathlib import Path

from analyzer.records.archive import is_archive, zip_shelves
from analyzer.records.blobs import FolderShelf, Shelf
from analyzer.records.model import Record
from analyzer.records.options import ReadOptions
from analyzer.records.problems import RecordError

ENTRY_POINT_GROUP = "faultassay.formats"
_HEAD_BYTES = 1 << 16
_log = logging.getLogger(__name__)


@dataclass(frozen=True, slots=True, kw_only=True)
class Format:
    """A file format that can be read.

    Attributes
    ----------
    name : str
        As in the findings.
    claims : callable
        ``claims(name, head)`` tells whether a file is of this format; `head` is a callable that returns its
        first bytes, so that a name that suffices costs no reading. It must not raise.
    key : callable
        ``key(name)`` is equal for all files of one record.
    leader : callable
        ``leader(names)`` is the name, of those with an equal key, that the record is shown under; empty when
        these files make no record, such as a header alone.
    read : callable
        ``read(shelf, name, options)`` returns the Record or raises RecordError.
    """

    name: str
    claims: Callable[[str, Callable[[], bytes]], bool]
    key: Callable[[str], str]
    leader: Callable[[list[str]], str]
    read: Callable[[Shelf, str, ReadOptions], Record]


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """A record that has been found and not yet read."""

    shelf: Shelf
    name: str
    format: Format

    @property
    def shown(self) -> str:
        """Where it is: a path, or archive and member."""
        return self.shelf.blob(self.name).shown if isinstance(self.shelf, FolderShelf) else self._inside()

    def _inside(self) -> str:
        separator = "" if self.shelf.shown.endswith("/") else "!"
        return f"{self.shelf.shown}{separator}{self.name}"

    def read(self, *, options: ReadOptions) -> Record:
        """Read the record.

        Raises
        ------
        RecordError
            If it cannot be read.
        """
        return self.format.read(self.shelf, self.name, options)


def formats() -> tuple[Format, ...]:
    """Return the built-in formats and those of other packages, in the order in which they are asked."""
    added = []
    for point in entry_points(group=ENTRY_POINT_GROUP):
        try:
            loaded = point.load()
        except (ImportError, AttributeError) as error:
            # One broken package must not keep every other format from being read.
            _log.warning("format %s cannot be loaded: %s", point.name, error)
            continue
        if isinstance(loaded, Format):
            added.append(loaded)
        else:
            _log.warning("entry point %s of %s is not a Format", point.name, ENTRY_POINT_GROUP)
    return (*added, _COMTRADE, _DELIMITED)


def find_records(path: Path) -> Iterator[Found]:
    """Yield the records behind a path, in the order of their names.

    Parameters
    ----------
    path : Path
        A file of a record, its stem, a folder, an archive, or ``archive.zip!member``.

    Yields
    ------
    Found

    Raises
    ------
    RecordError
        If there is nothing of that name (code ``no-such-file``), it is of no known format
        (``unknown-format``) or cannot be reached (``unreadable-file``).
    """
    try:
        kind = "folder" if path.is_dir() else ("file" if path.is_file() else "none")
    except OSError as error:
        message = f"cannot be reached: {error.strerror}"
        raise RecordError("unreadable-file", message, path=str(path)) from error
    inside = _split_member(path) if kind == "none" else None
    if inside is not None:
        yield _member_of(*inside)
    elif kind == "folder":
        yield from _on_shelf(FolderShelf(path))
    elif kind == "file" and is_archive(path):
        for shelf in zip_shelves(path):
            yield from _on_shelf(shelf)
    else:
        yield _single(FolderShelf(path.parent), path)


def read(path: Path | str, *, options: ReadOptions | None = None) -> Record:
    """Read one record.

    Parameters
    ----------
    path : Path or str
        Any file of the record, their common stem, or ``archive.zip!member``.
    options : ReadOptions, optional
        Statements that go before what the file says.

    Returns
    -------
    Record

    Raises
    ------
    RecordError
        If it cannot be read, is none (``no-record``), or is several (``several-records``).
    """
    found = list(find_records(Path(path)))
    if len(found) == 1:
        return found[0].read(options=options or ReadOptions())
    if not found:
        raise RecordError("no-record", "holds no record of a known format", path=str(path))
    raise RecordError(
        "several-records",
        f"holds {len(found)} records",
        path=str(path),
        hint=f"name one of them, such as {found[0].shown}",
    )


def _split_member(path: Path) -> tuple[Path, str] | None:
    """Return archive and member of ``archive.zip!member``; folders may hold exclamation marks too."""
    parts = str(path).split("!")
    for k in range(1, len(parts)):
        archive, member = Path("!".join(parts[:k])), "!".join(parts[k:])
        if member and is_archive(archive) and archive.is_file():
            return archive, member.replace("\\", "/")
    return None


def _single(shelf: FolderShelf, path: Path) -> Found:
    if not shelf.has(path.name) and not _is_stem(shelf, path.name):
        raise RecordError(
            "no-such-file", "there is no such file", path=str(path), hint="check the spelling and the folder"
        )
    found = _claim(shelf, path.name)
    if found is None:
        raise RecordError(
            "unknown-format",
            "is of no format that can be read",
            path=str(path),
            hint="COMTRADE files and delimited text can be read",
        )
    return found


def _is_stem(shelf: Shelf, stem: str) -> bool:
    try:
        names = shelf.names()
    except RecordError:
        return False
    return any(name.lower() in (f"{stem}.cfg".lower(), f"{stem}.cff".lower()) for name in names)


def _member_of(archive: Path, member: str) -> Found:
    folder, _, name = member.rpartition("/")
    folder = f"{folder}/" if folder else ""
    for shelf in zip_shelves(archive):
        if shelf.folder == folder:
            found = _claim(shelf, name) if shelf.has(name) or _is_stem(shelf, name) else None
            if found is not None:
                return found
    raise RecordError(
        "no-such-file", f"there is no record {member} in the archive", path=str(archive), hint="list it first"
    )


def _on_shelf(shelf: Shelf) -> Iterator[Found]:
    groups: dict[tuple[str, str], tuple[Format, list[str]]] = {}
    known = formats()
    for name in shelf.names():
        if name.startswith("._"):  # what macOS leaves beside files on other systems' disks
            continue
        kind = _format_of(shelf, name, known)
        if kind is not None:
            groups.setdefault((kind.name, kind.key(name)), (kind, []))[1].append(name)
    for kind, names in groups.values():
        if leader := kind.leader(names):
            yield Found(shelf, leader, kind)


def _claim(shelf: Shelf, name: str) -> Found | None:
    if not shelf.has(name):
        return Found(shelf, name, _COMTRADE)  # the stem of a record
    kind = _format_of(shelf, name, formats())
    return None if kind is None else Found(shelf, name, kind)


def _format_of(shelf: Shelf, name: str, known: tuple[Format, ...]) -> Format | None:
    def head() -> bytes:
        return shelf.blob(name).head(_HEAD_BYTES)

    return next((kind for kind in known if kind.claims(name, head)), None)


def _comtrade_claims(name: str, head: Callable[[], bytes]) -> bool:
    from analyzer.records.comtrade.members import is_member_name

    return is_member_name(name)


def _comtrade_key(name: str) -> str:
    stem, _, extension = name.rpartition(".")
    return f"{stem}.cff".lower() if extension.lower() == "cff" else stem.lower()


def _comtrade_leader(names: list[str]) -> str:
    beside_only = (".hdr", ".inf")  # text that may lie about by itself
    if all(name.lower().endswith(beside_only) for name in names):
        return ""
    return next((name for name in names if name.lower().endswith(".cfg")), names[0])


def _comtrade_read(shelf: Shelf, name: str, options: ReadOptions) -> Record:
    from analyzer.records.comtrade import read_comtrade

    return read_comtrade(shelf, name, options=options)


def _delimited_claims(name: str, head: Callable[[], bytes]) -> bool:
    from analyzer.records.delimited import sniff_delimited

    extensions = (".csv", ".tsv", ".txt", ".tab", ".asc", ".prn")
    return name.lower().endswith(extensions) and sniff_delimited(head(), name)


def _delimited_read(shelf: Shelf, name: str, options: ReadOptions) -> Record:
    from analyzer.records.delimited import read_delimited

    return read_delimited(shelf.blob(name), options=options)


_COMTRADE = Format(
    name="comtrade",
    claims=_comtrade_claims,
    key=_comtrade_key,
    leader=_comtrade_leader,
    read=_comtrade_read,
)
_DELIMITED = Format(
    name="csv",
    claims=_delimited_claims,
    key=lambda name: name,
    leader=lambda names: names[0],
    read=_delimited_read,
)
