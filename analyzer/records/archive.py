"""Zip archives as folders: read member by member with limits, nothing ever written to disk."""

from __future__ import annotations

import zipfile
import zlib
from dataclasses import dataclass
from pathlib import Path, PurePosixPath

from analyzer.records.blobs import Blob
from analyzer.records.problems import RecordError

_MAX_MEMBERS = 100_000
_MAX_MEMBER_BYTES = 256 << 20
# Samples of a real record compress by 20 at most, long quiet ones by some more; deflate's limit is 1032.
_MAX_RATIO = 200
_SMALL_BYTES = 4 << 20  # below this a high ratio does no harm


@dataclass(frozen=True, slots=True)
class ZipShelf:
    """The files in one folder of a zip archive.

    Attributes
    ----------
    archive : Path
    folder : str
        Folder inside the archive, empty or ending with a slash.
    members : tuple of str
        Names of the files in that folder.
    """

    archive: Path
    folder: str
    members: tuple[str, ...]

    @property
    def shown(self) -> str:
        """Name for messages."""
        return f"{self.archive}!{self.folder}" if self.folder else str(self.archive)

    def names(self) -> tuple[str, ...]:
        """Names of the files in this folder of the archive."""
        return self.members

    def has(self, name: str) -> bool:
        """Whether there is a file of exactly that name."""
        return name in self.members

    def blob(self, name: str) -> Blob:
        """Return the member, unpacked into memory.

        Raises
        ------
        RecordError
            If the member is too large, too strongly compressed, encrypted or damaged (codes ``too-large``,
            ``archive-ratio``, ``archive-encrypted``, ``archive-damaged``).
        """
        shown = f"{self.archive}!{self.folder}{name}"
        with _opened(self.archive) as archive:
            info = archive.getinfo(self.folder + name)
            _check_size(info, shown)
            try:
                with archive.open(info) as member:
                    data = member.read(_MAX_MEMBER_BYTES + 1)
            except (zipfile.BadZipFile, zlib.error, EOFError, OSError, NotImplementedError) as error:
                raise RecordError(
                    "archive-damaged",
                    f"cannot be unpacked: {error}",
                    path=shown,
                    hint="fetch the archive again",
                ) from error
        if len(data) > _MAX_MEMBER_BYTES:
            raise _too_large(shown)
        return Blob(name=name, shown=shown, data=data)


def is_archive(path: Path) -> bool:
    """Whether the file is named as a zip archive."""
    return path.suffix.lower() == ".zip"


def zip_shelves(archive_path: Path) -> tuple[ZipShelf, ...]:
    """Return one shelf for each folder of the archive that holds files.

    Raises
    ------
    RecordError
        If it is no zip archive, or holds unsafe names or too many members (codes ``archive-damaged``,
        ``archive-path``, ``archive-members``).
    """
    with _opened(archive_path) as archive:
        infos = archive.infolist()
    if len(infos) > _MAX_MEMBERS:
        raise RecordError(
            "archive-members", f"{len(infos)} members, more than {_MAX_MEMBERS}", path=str(archive_path)
        )
    folders: dict[str, list[str]] = {}
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
        folders.setdefault(f"{folder}/" if folder else "", []).append(file_name)
    return tuple(ZipShelf(archive_path, folder, tuple(names)) for folder, names in sorted(folders.items()))


def _opened(path: Path) -> zipfile.ZipFile:
    try:
        return zipfile.ZipFile(path)
    except (zipfile.BadZipFile, ValueError, NotImplementedError) as error:
        raise RecordError(
            "archive-damaged",
            f"is not a readable zip archive: {error}",
            path=str(path),
            hint="fetch it again",
        ) from error
    except OSError as error:
        raise RecordError("unreadable-file", f"cannot be opened: {error.strerror}", path=str(path)) from error


def _check_size(info: zipfile.ZipInfo, shown: str) -> None:
    if info.flag_bits & 0x1:
        raise RecordError(
            "archive-encrypted", "is encrypted", path=shown, hint="unpack the archive with its password first"
        )
    if info.file_size > _MAX_MEMBER_BYTES:
        raise _too_large(shown)
    if info.file_size > _SMALL_BYTES and info.file_size > _MAX_RATIO * max(info.compress_size, 1):
        raise RecordError(
            "archive-ratio",
            f"{info.compress_size} bytes unpack to {info.file_size}, which no record does",
            path=shown,
            hint="do not trust this archive; unpack it by hand if it is yours",
        )


def _too_large(shown: str) -> RecordError:
    return RecordError(
        "too-large",
        f"unpacks to more than {_MAX_MEMBER_BYTES >> 20} MiB",
        path=shown,
        hint="unpack the archive and read the files",
    )
