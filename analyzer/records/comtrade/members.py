"""The files that make up one record: configuration, data, header, information, or all in one."""

from __future__ import annotations

import re
from dataclasses import dataclass

from analyzer.records.blobs import Blob, Shelf
from analyzer.records.problems import Problem, RecordError

_EXTENSION = re.compile(r"\.(cfg|dat|hdr|inf|cff|d\d\d)$", re.IGNORECASE)
_TEXT_LIMIT_BYTES = 64 << 20
_PARTS_LIMIT_BYTES = 512 << 20
# Sections of a combined file; the colon and one of the dashes are missing in some.
_SECTION = re.compile(
    rb"^[ \t]*-{2,4}[ \t]*file[ \t]+type[ \t]*:?[ \t]*(CFG|INF|HDR|DAT)\b[ \t]*([A-Z]+\d*)?"
    rb"[ \t]*:?[ \t]*(\d+)?[ \t]*-{2,4}[ \t]*\r?\n?",
    re.IGNORECASE | re.MULTILINE,
)


@dataclass(frozen=True, slots=True, kw_only=True)
class Members:
    """The bytes of one record.

    Attributes
    ----------
    configuration : bytes
    configuration_shown : str
        Name of the configuration for messages.
    data : Blob
        The samples.
    origin : Blob
        The file whose hash identifies the record: the data file, or the combined one.
    header, information : bytes
        Free text, empty when there is none.
    problems : tuple of Problem
    """

    configuration: bytes
    configuration_shown: str
    data: Blob
    origin: Blob
    header: bytes = b""
    information: bytes = b""
    problems: tuple[Problem, ...] = ()


def is_member_name(name: str) -> bool:
    """Whether a file of this name can belong to a COMTRADE record."""
    return _EXTENSION.search(name) is not None


def collect_members(shelf: Shelf, name: str) -> Members:
    """Return the members of the record that `name` belongs to.

    Parameters
    ----------
    shelf : Shelf
        Folder or archive.
    name : str
        Any member's name, or the stem that all share.

    Returns
    -------
    Members

    Raises
    ------
    RecordError
        If a needed member is missing (code ``missing-member``) or too large to be text (``too-large``).
    """
    match = _EXTENSION.search(name) if shelf.has(name) else None
    if match is not None and match[1].lower() == "cff":
        return _split_combined(shelf.blob(name))
    stem = name[: match.start()] if match is not None else name
    names = _Names(shelf, stem)
    configuration = names.find("cfg")
    if configuration is None:
        combined = names.find("cff")
        if combined is not None:
            return _split_combined(shelf.blob(combined))
        raise RecordError(
            "missing-member",
            f"there is no configuration file {stem}.cfg",
            path=f"{shelf.shown}",
            hint="configuration and data file must lie side by side under the same name",
        )
    data, problems = _data(shelf, stem, names)
    texts = {}
    for kind in ("hdr", "inf"):
        found = names.find(kind)
        texts[kind] = shelf.blob(found).read(limit_bytes=_TEXT_LIMIT_BYTES) if found else b""
    blob = shelf.blob(configuration)
    return Members(
        configuration=blob.read(limit_bytes=_TEXT_LIMIT_BYTES),
        configuration_shown=blob.shown,
        data=data,
        origin=data,
        header=texts["hdr"],
        information=texts["inf"],
        problems=problems,
    )


class _Names:
    """Looks members up by kind, in any letter case; the folder is listed only when the usual cases fail."""

    def __init__(self, shelf: Shelf, stem: str) -> None:
        self.shelf = shelf
        self.stem = stem
        self._listing: dict[str, str] | None = None

    def find(self, kind: str) -> str | None:
        for extension in (kind, kind.upper(), kind.capitalize()):
            candidate = f"{self.stem}.{extension}"
            if self.shelf.has(candidate):
                return candidate
        if self._listing is None:
            self._listing = {listed.lower(): listed for listed in self.shelf.names()}
        return self._listing.get(f"{self.stem}.{kind}".lower())


def _data(shelf: Shelf, stem: str, names: _Names) -> tuple[Blob, tuple[Problem, ...]]:
    whole = names.find("dat")
    if whole is not None:
        return shelf.blob(whole), ()
    parts: list[Blob] = []
    while (found := names.find(f"d{len(parts):02d}")) is not None and len(parts) < 100:
        parts.append(shelf.blob(found))
    if not parts:
        raise RecordError(
            "missing-member",
            f"there is no data file {stem}.dat",
            path=f"{shelf.shown}",
            hint="configuration and data file must lie side by side under the same name",
        )
    if sum(part.size for part in parts) > _PARTS_LIMIT_BYTES:
        raise RecordError("too-large", "the parts of the data are larger than 512 MiB", path=parts[0].shown)
    joined = b"".join(bytes(part.view()) for part in parts)
    shown = f"{parts[0].shown} (and {len(parts) - 1} more parts)"
    note = Problem(code="data-in-parts", message=f"the data come in {len(parts)} parts", where=shown)
    return Blob(name=parts[0].name, shown=shown, data=joined), (note,)


def _split_combined(blob: Blob) -> Members:
    view = blob.view()
    found: dict[str, tuple[int, int]] = {}
    data_start, declared_bytes, previous, odd_markers = -1, None, "", 0
    for match in _SECTION.finditer(view):
        kind = match[1].decode().lower()
        odd_markers += not match[0].lstrip().startswith(b"--- file type:")
        if previous:
            found[previous] = (found[previous][0], match.start())
        found[kind] = (match.end(), len(view))
        previous = kind
        if kind == "dat":  # binary samples may hold anything: nothing after is looked at
            data_start = match.end()
            declared_bytes = int(match[3]) if match[3] else None
            break
        if match.start() > _TEXT_LIMIT_BYTES:
            break
    if "cfg" not in found or data_start < 0:
        raise RecordError(
            "missing-section",
            "a combined file needs the sections CFG and DAT",
            path=blob.shown,
            hint="the file is cut short, or is not a combined COMTRADE file",
        )
    problems = []
    if odd_markers:
        problems.append(
            Problem(
                code="odd-section", message=f"{odd_markers} section marks are malformed", where=blob.shown
            )
        )
    end = len(view)
    if declared_bytes is not None and declared_bytes != end - data_start:
        if declared_bytes < end - data_start:
            end = data_start + declared_bytes
        else:
            problems.append(
                Problem(
                    code="data-cut-short",
                    severity="warning",
                    message=f"{declared_bytes} bytes of data are declared, {end - data_start} are there",
                    where=blob.shown,
                )
            )
    texts = {}
    for kind in ("cfg", "hdr", "inf"):
        start, stop = found.get(kind, (0, 0))
        if stop - start > _TEXT_LIMIT_BYTES:
            raise RecordError("too-large", f"section {kind.upper()} is larger than 64 MiB", path=blob.shown)
        texts[kind] = bytes(view[start:stop])
    # A byte order mark belongs to the whole file, yet it is the configuration that is decoded.
    mark = bytes(view[:3]) if bytes(view[:3]) == b"\xef\xbb\xbf" else b""
    return Members(
        configuration=mark + texts["cfg"],
        configuration_shown=f"{blob.shown} (CFG section)",
        data=Blob(name=blob.name, shown=blob.shown, data=view[data_start:end]),
        origin=blob,
        header=texts["hdr"],
        information=texts["inf"],
        problems=tuple(problems),
    )
