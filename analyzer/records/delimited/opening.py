"""The first lines of a text file, wherever its encoding allows to take its bytes as they are."""

from __future__ import annotations

import codecs
from collections.abc import Sequence
from dataclasses import dataclass

from analyzer.records.blobs import Blob
from analyzer.records.delimited.layout import stated_separator
from analyzer.records.problems import Problem, RecordError
from analyzer.records.text import decode_text

HEAD_BYTES = 1 << 20
_MAX_HEADER_LINE_BYTES = 64 * 1024
_JOINED_LINES = 256
_QUOTE_REACH = 8
_CONTROL_SHARE = 0.005  # a text file damaged here and there has fewer, a binary one far more; our choice
_FEW_CONTROLS = 2
_CONTROL_CODES = bytes(c for c in (*range(32), 127) if c not in b"\t\n\r\f\x1a")
_TAIL = b"\0\x1a\r\n"  # a tab at the end may be an empty cell
_TAIL_STEP = 1 << 16
_WIDE_MARKS = (
    (codecs.BOM_UTF32_LE, "utf-32"),
    (codecs.BOM_UTF32_BE, "utf-32"),
    (codecs.BOM_UTF16_LE, "utf-16"),
    (codecs.BOM_UTF16_BE, "utf-16"),
)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Opened:
    """A text file with its first lines.

    Attributes
    ----------
    data : bytes-like
        The file in an encoding of which ASCII is a part, without mark and without padding at its end.
    lines : tuple of bytes
        The first lines with their ends; a line may hold quoted line ends.
    encoding : str or None
        As stated or told by the file; None where only the letters can tell.
    separator : str or None
        As stated by the file's first line.
    skipped_lines : int
        Lines before the first of `lines`.
    problems : tuple of Problem
    """

    data: memoryview | bytes
    lines: tuple[bytes, ...]
    encoding: str | None
    separator: str | None = None
    skipped_lines: int = 0
    problems: tuple[Problem, ...] = ()

    def line_number(self, index: int) -> int:
        """Return the number in the file, counted from 1, of line `index`."""
        return self.skipped_lines + 1 + sum(_n_lines(line) for line in self.lines[:index])

    def shown(self) -> list[str]:
        """Return the lines without their ends, for finding the layout; letters may be wrong."""
        whole = b"".join(self.lines)
        try:
            whole.decode("utf-8")
        except UnicodeDecodeError:
            return [line.decode("latin-1").rstrip("\r\n") for line in self.lines]
        return [line.decode("utf-8").rstrip("\r\n") for line in self.lines]

    def decoded(self, n_lines: int, *, path: str) -> tuple[list[str], str, bool]:
        """Return the first lines as text, the encoding, and whether that was guessed.

        Raises
        ------
        RecordError
            If a line is longer than any heading (code ``line-too-long``).
        """
        head = self.lines[:n_lines]
        for k, line in enumerate(head):
            if len(line) > _MAX_HEADER_LINE_BYTES:
                raise _too_long(path, self.line_number(k))
        whole = b"".join(head)
        if self.encoding is not None or whole.isascii():
            encoding, guessed = self.encoding or "utf-8", False
        else:
            _, encoding = decode_text(whole)
            guessed = encoding != "utf-8"
        return [line.decode(encoding, errors="replace").rstrip("\r\n") for line in head], encoding, guessed


def open_text(blob: Blob, *, encoding: str | None) -> Opened:
    """Return the file with its first lines.

    Raises
    ------
    RecordError
        If it is empty (code ``empty-file``), is no text (``not-text``), has no line ends
        (``line-too-long``), or the stated encoding does not exist (``unknown-encoding``).
    """
    head = blob.head(HEAD_BYTES)
    if not head.strip(_TAIL + b" \t"):
        raise _empty(blob.shown)
    stated = _known_encoding(encoding, blob.shown)
    wide, guessed = _wide_encoding(head, stated)
    data: memoryview | bytes
    if wide is not None:
        data = bytes(blob.view()).decode(wide, errors="replace").removeprefix("\ufeff").encode("utf-8")
        told: str | None = "utf-8"
    else:
        data, told = blob.view(), stated
        if head.startswith(codecs.BOM_UTF8):
            data, told = data[len(codecs.BOM_UTF8) :], stated or "utf-8"
    data = _without_tail(data)
    head = bytes(data[:HEAD_BYTES])
    n_control = len(head) - len(head.translate(None, _CONTROL_CODES))
    if n_control > max(_FEW_CONTROLS, _CONTROL_SHARE * len(head)):
        raise RecordError(
            "not-text", "is not a text file", path=blob.shown, hint="check that this is the file you mean"
        )
    lines = head.splitlines(keepends=True)
    if len(data) > HEAD_BYTES:
        lines.pop()  # the last one may be cut
        if not lines:
            raise _too_long(blob.shown, 1)
    separator = stated_separator(lines[0].decode("latin-1").rstrip("\r\n")) if lines else None
    if separator is not None:
        data = data[len(lines[0]) :]
        lines = lines[1:]
    if not lines:
        raise _empty(blob.shown)
    problems: tuple[Problem, ...] = ()
    if guessed:
        problems = (
            Problem(code="encoding-guessed", message=f"text is taken to be {wide}", where="whole file"),
        )
    return Opened(
        data=data,
        lines=tuple(join_quoted(lines)),
        encoding=told,
        separator=separator,
        skipped_lines=int(separator is not None),
        problems=problems,
    )


def join_quoted(lines: Sequence[bytes]) -> list[bytes]:
    """Return the lines with those joined that a quoted line end has torn apart."""
    joined: list[bytes] = []
    k = 0
    while k < len(lines):
        line, taken = lines[k], 1
        if k < _JOINED_LINES and line.count(b'"') % 2:
            for reach in range(2, min(_QUOTE_REACH, len(lines) - k) + 1):
                if lines[k + reach - 1].count(b'"') % 2:
                    line, taken = b"".join(lines[k : k + reach]), reach
                    break
        joined.append(line)
        k += taken
    return joined


def _known_encoding(encoding: str | None, path: str) -> str | None:
    if encoding is None:
        return None
    try:
        return codecs.lookup(encoding).name
    except LookupError as error:
        raise RecordError(
            "unknown-encoding",
            f"there is no text encoding {encoding!r}",
            path=path,
            hint="such as utf-8, cp1252, cp1251, gb18030",
        ) from error


def _wide_encoding(head: bytes, stated: str | None) -> tuple[str | None, bool]:
    """Return the encoding if its letters take two or four bytes each, and whether it was guessed."""
    if stated is not None:
        return (stated if stated.startswith(("utf-16", "utf-32")) else None), False
    for mark, name in _WIDE_MARKS:
        if head.startswith(mark):
            return name, False
    sample = head[: min(len(head), 4096) & ~1]
    zeros_even, zeros_odd = sample[::2].count(0), sample[1::2].count(0)
    most = len(sample) // 2 * 0.9  # of plain text nearly every second byte is zero
    if zeros_odd >= most > 0 and zeros_even == 0:
        return "utf-16-le", True
    if zeros_even >= most > 0 and zeros_odd == 0:
        return "utf-16-be", True
    return None, False


def _without_tail(data: memoryview | bytes) -> memoryview | bytes:
    """Return the data without the padding that old systems and broken copies leave at the end."""
    end = len(data)
    while end:
        chunk = bytes(data[max(0, end - _TAIL_STEP) : end])
        kept = len(chunk.rstrip(_TAIL))
        end -= len(chunk) - kept
        if kept:
            break
    line_end = bytes(data[end : end + 2])
    if line_end[:1] in (b"\r", b"\n"):  # the last row's own end tells that it is whole
        end += 2 if line_end == b"\r\n" else 1
    return data[:end]


def _n_lines(line: bytes) -> int:
    return max(1, len(line.splitlines()))


def _empty(path: str) -> RecordError:
    return RecordError("empty-file", "there is nothing in the file", path=path, hint="check that it is whole")


def _too_long(path: str, line: int) -> RecordError:
    return RecordError(
        "line-too-long",
        "a line above the numbers is longer than 64 kB"
        if line > 1
        else "the first line is too long for a table",
        path=path,
        line=line,
        hint="check that this is the file you mean",
    )
