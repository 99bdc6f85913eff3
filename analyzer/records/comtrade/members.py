"""The files that make up one record: configuration, data, header, information, or all in one."""

from __future__ import annotations

import codecs
import itertools
import re
from dataclasses import dataclass

from analyzer.records.blobs import Blob, Shelf
from analyzer.records.problems import Problem, RecordError

_EXTENSION = re.compile(r"\.(cfg|dat|hdr|inf|cff|d\d\d)$", re.IGNORECASE)
_CONFIGURATION_LIMIT_BYTES = 8 << 20
_TEXT_LIMIT_BYTES = 8 << 20
_MOST_MARKS = 1000
_PARTS_LIMIT_BYTES = 160 << 20  # a hundred floppy disks
# Sections of a combined file; the colon and one of the dashes are missing in some. Blanks are taken out
# before the second pattern is tried, so that no run of them costs more than its length.
_MARK_LINE = re.compile(
    rb"(?:^|(?<=\r)|(?<=\xef\xbb\xbf))[ \t]{0,8}-{2,4}[ \t]{0,8}file[^\r\n]{0,100}(?=[\r\n]|\Z)",
    re.IGNORECASE | re.MULTILINE,
)
_MARK = re.compile(rb"-{2,4}filetype:?(CFG|INF|HDR|DAT)(?:[A-Z]+(?:32)?)?:?(\d{1,18})?-{2,4}", re.IGNORECASE)


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
    found = list(problems)
    texts = {}
    for kind in ("hdr", "inf"):
        name = names.find(kind) or ""
        texts[kind] = _text(shelf.blob(name).view(), shelf.blob(name).shown, found) if name else b""
    blob = shelf.blob(configuration)
    return Members(
        configuration=blob.read(limit_bytes=_CONFIGURATION_LIMIT_BYTES),
        configuration_shown=blob.shown,
        data=data,
        origin=data,
        header=texts["hdr"],
        information=texts["inf"],
        problems=tuple(found),
    )


def _text(view: memoryview, shown: str, problems: list[Problem]) -> bytes:
    """Return free text; what goes beyond the limit is left out, since no result hangs on it."""
    if len(view) > _TEXT_LIMIT_BYTES:
        note = f"text beyond {_TEXT_LIMIT_BYTES >> 20} MiB left out"
        problems.append(Problem(code="text-cut", message=note, where=shown))
    text = bytes(view[:_TEXT_LIMIT_BYTES])
    return text if text.strip(b"\r\n\t \x1a\0") else b""


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
    size = 0
    while (found := names.find(f"d{len(parts):02d}")) is not None and len(parts) < 100:
        parts.append(shelf.blob(found))
        size += parts[-1].size
        if size > _PARTS_LIMIT_BYTES:
            raise RecordError(
                "too-large",
                f"the parts of the data are larger than {_PARTS_LIMIT_BYTES >> 20} MiB",
                path=parts[0].shown,
            )
    if not parts:
        raise RecordError(
            "missing-member",
            f"there is no data file {stem}.dat",
            path=f"{shelf.shown}",
            hint="configuration and data file must lie side by side under the same name",
        )
    joined = b"".join(bytes(part.view()) for part in parts)
    shown = f"{parts[0].shown} (and {len(parts) - 1} more parts)"
    note = Problem(code="data-in-parts", message=f"the data come in {len(parts)} parts", where=shown)
    return Blob(name=parts[0].name, shown=shown, data=joined), (note,)


def _split_combined(blob: Blob) -> Members:
    view = blob.view()
    problems: list[Problem] = []
    found: dict[str, tuple[int, int]] = {}
    declared_bytes, previous, n_odd = 0, "", 0
    # Binary samples may hold anything: nothing after the mark before them is looked at.
    lines = _MARK_LINE.finditer(view, 0, _CONFIGURATION_LIMIT_BYTES + 2 * _TEXT_LIMIT_BYTES)
    for line in itertools.islice(lines, _MOST_MARKS):
        mark = _MARK.fullmatch(b"".join(line[0].split()))
        if mark is None:
            continue
        kind = mark[1].decode().lower()
        n_odd += not line[0].startswith(b"--- file type:")
        if previous:
            found[previous] = (found[previous][0], line.start())
        found[kind] = (_next_line(view, line.end()), len(view))
        previous = kind
        if kind == "dat":
            declared_bytes = int(mark[2] or 0)
            break
    if "cfg" not in found or "dat" not in found:
        raise RecordError(
            "missing-section",
            "a combined file needs the sections CFG and DAT",
            path=blob.shown,
            hint="the file is cut short, or is not a combined COMTRADE file",
        )
    if n_odd:
        note = f"{n_odd} section marks are malformed"
        problems.append(Problem(code="odd-section", message=note, where=blob.shown))
    data = view[found["dat"][0] :]
    if declared_bytes:
        data = _declared_part(data, declared_bytes, blob.shown, problems)
    start, stop = found["cfg"]
    if stop - start > _CONFIGURATION_LIMIT_BYTES:
        raise RecordError("too-large", "the section CFG is too large", path=blob.shown)
    texts = {
        kind: _text(view[slice(*found.get(kind, (0, 0)))], blob.shown, problems) for kind in ("hdr", "inf")
    }
    # A byte order mark belongs to the whole file, yet it is the configuration that is decoded.
    order_mark = bytes(view[:3]) if bytes(view[:3]) == codecs.BOM_UTF8 else b""
    return Members(
        configuration=order_mark + bytes(view[start:stop]),
        configuration_shown=f"{blob.shown} (CFG section)",
        data=Blob(name=blob.name, shown=blob.shown, data=data),
        origin=blob,
        header=texts["hdr"],
        information=texts["inf"],
        problems=tuple(problems),
    )


def _next_line(view: memoryview, at: int) -> int:
    """Return where the line after the mark that ends at `at` begins."""
    for end in (b"\r\n", b"\n", b"\r"):
        if bytes(view[at : at + len(end)]) == end:
            return at + len(end)
    return at


def _declared_part(data: memoryview, declared_bytes: int, shown: str, problems: list[Problem]) -> memoryview:
    """Return as many bytes as are declared, or all where more than blanks or another section follow."""
    rest = bytes(data[declared_bytes : declared_bytes + 200]).lstrip(b"\r\n\t \x1a")
    if declared_bytes <= len(data) and (not rest or rest.startswith(b"--")):
        return data[:declared_bytes]
    problems.append(
        Problem(
            code="data-cut-short" if declared_bytes > len(data) else "data-bytes-declared",
            severity="warning",
            message=f"{declared_bytes} bytes of data are declared, {len(data)} are there",
            where=shown,
        )
    )
    return data
