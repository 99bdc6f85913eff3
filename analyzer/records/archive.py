"""Zip archives as folders: read member by member with limits, nothing ever written to disk."""

from __future__ import annotations

import struct
import zipfile
import zlib
from dataclasses import dataclass, field
from pathlib import Path, PurePosixPath

from analyzer.records.blobs import Blob
from analyzer.records.problems import RecordError

_MAX_MEMBERS = 100_000
_MAX_DIRECTORY_BYTES = 12 << 20
_MAX_MEMBER_BYTES = 256 << 20
# Samples of a real record compress by 20 at most, long quiet ones by some more; deflate's limit is 1032.
_MAX_RATIO = 200
_SMALL_BYTES = 4 << 20  # below this a high ratio does no harm
_METHODS = (zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED)
_DAMAGE = (zipfile.BadZipFile, zlib.error, struct.error, EOFError, OSError, ValueError, NotImplementedError)


@dataclass(frozen=True, slots=True)
class ZipShelf:
    """The files in one folder of a zip archive.

    Attributes
    ----------
    archive : Path
    folder : str
        Folder inside the archive, empty or ending with a slash.
    members : dict of str to ZipInfo
        The files in that folder by their names.
    file : ZipFile
        The open archive, shared by its folders, so that its directory is read once and not for every
        member; it is closed when the last of them is let go.
    """

    archive: Path
    folder: str
    members: dict[str, zipfile.ZipInfo] = field(repr=False)
    file: zipfile.ZipFile = field(repr=False)

    @property
    def shown(self) -> str:
        """Name for messages."""
        return f"{self.archive}!{self.folder}" if self.folder else str(self.archive)

    def names(self) -> tuple[str, ...]:
        """Names of the files in this folder of the archive."""
        return tuple(self.members)

    def has(self, name: str) -> bool:
        """Whether there is a file of exactly that name."""
        return name in self.members

    def blob(self, name: str) -> Blob:
        """Return the member, unpacked into memory.

        Raises
        ------
        RecordError
            If the member is too large, too strongly compressed, encrypted, packed in an unusual way or
            damaged (codes ``too-large``, ``archive-ratio``, ``archive-encrypted``, ``archive-method``,
            ``archive-damaged``).
        """
        shown = f"{self.archive}!{self.folder}{name}"
        info = self.members[name]
        _check(info, shown)
        try:
            with self.file.open(info) as member:
                data = member.read(info.file_size + 1)
        except _DAMAGE as error:
            raise RecordError(
                "archive-damaged",
                f"cannot be unpacked: {error}",
                path=shown,
                hint="fetch the archive again",
            ) from error
        if len(data) != info.file_size:
            raise RecordError(
                "archive-damaged",
                f"{info.file_size} bytes are promised, {len(data)} are there",
                path=shown,
                hint="fetch the archive again",
            )
        return Blob(name=name, shown=shown, data=data)


def is_archive(path: Path) -> bool:
    """Whether the file is named as a zip archive."""
    return path.suffix.lower() == ".zip"


def zip_shelves(archive_path: Path) -> tuple[ZipShelf, ...]:
    """Return one shelf for each folder of the archive that holds files.

    What macOS adds to the archives it makes is left out.

    Raises
    ------
    RecordError
        If it is no zip archive, or holds unsafe names or too many members (codes ``archive-damaged``,
        ``archive-path``, ``archive-members``).
    """
    archive = _opened(archive_path)
    infos = archive.infolist()
    if len(infos) > _MAX_MEMBERS:
        raise RecordError(
            "archive-members", f"{len(infos)} members, more than {_MAX_MEMBERS}", path=str(archive_path)
        )
    folders: dict[str, dict[str, zipfile.ZipInfo]] = {}
    for info in infos:
        if info.is_dir():
            continue
        name = info.filename
        parts = PurePosixPath(name).parts
        if name.startswith("/") or ".." in parts or "\\" in name or ":" in name or not name.isprintable():
            raise RecordError(
                "archive-path",
                f"the member {name[:80]!a} names a place outside the archive",
                path=str(archive_path),
                hint="do not trust this archive",
            )
        folder, _, file_name = name.rpartition("/")
        if not name.startswith("__MACOSX/"):
            folders.setdefault(f"{folder}/" if folder else "", {})[file_name] = info
    return tuple(
        ZipShelf(archive_path, folder, dict(sorted(members.items())), archive)
        for folder, members in sorted(folders.items())
    )


def _opened(path: Path) -> zipfile.ZipFile:
    try:
        if _directory_bytes(path) > _MAX_DIRECTORY_BYTES:
            raise RecordError(
                "archive-members",
                f"the list of members is longer than {_MAX_DIRECTORY_BYTES >> 20} MiB",
                path=str(path),
            )
        return zipfile.ZipFile(path)
    except OSError as error:
        if error.strerror:
            message = f"cannot be opened: {error.strerror}"
            raise RecordError("unreadable-file", message, path=str(path)) from error
        raise _not_an_archive(path, error) from error
    except _DAMAGE as error:
        raise _not_an_archive(path, error) from error


def _directory_bytes(path: Path) -> int:
    """Return the size that the archive states for its list of members; 0 where it states none.

    Asked for before the list is read, since a list of millions takes gigabytes of memory.
    """
    with path.open("rb") as file:
        size = file.seek(0, 2)
        if size <= _MAX_DIRECTORY_BYTES:
            return 0
        file.seek(max(0, size - (1 << 17)))
        tail = file.read()
    at, at64 = tail.rfind(b"PK\x05\x06"), tail.rfind(b"PK\x06\x06")
    stated = [int.from_bytes(tail[at + 12 : at + 16], "little")] if at >= 0 else []
    if stated == [0xFFFFFFFF] and at64 >= 0:
        stated = [int.from_bytes(tail[at64 + 40 : at64 + 48], "little")]
    return sum(stated)


def _not_an_archive(path: Path, error: Exception) -> RecordError:
    message = f"is not a readable zip archive: {error}"
    return RecordError("archive-damaged", message, path=str(path), hint="fetch it again")


def _check(info: zipfile.ZipInfo, shown: str) -> None:
    if info.flag_bits & 0x1:
        raise RecordError(
            "archive-encrypted", "is encrypted", path=shown, hint="unpack the archive with its password first"
        )
    if info.compress_type not in _METHODS:
        raise RecordError(
            "archive-method",
            "is packed by a method other than the usual ones of zip archives",
            path=shown,
            hint="unpack the archive and read the files",
        )
    if info.file_size > _MAX_MEMBER_BYTES:
        raise RecordError(
            "too-large",
            f"unpacks to more than {_MAX_MEMBER_BYTES >> 20} MiB",
            path=shown,
            hint="unpack the archive and read the files",
        )
    if info.file_size > _SMALL_BYTES and info.file_size > _MAX_RATIO * max(info.compress_size, 1):
        raise RecordError(
            "archive-ratio",
            f"{info.compress_size} bytes unpack to {info.file_size}, which no record does",
            path=shown,
            hint="do not trust this archive; unpack it by hand if it is yours",
        )
