"""Text of files whose encoding nobody states: station names in Latin, Cyrillic or Chinese letters."""

from __future__ import annotations

import codecs

# Code pages seen in recorders' headers; the fewer the candidates, the surer the guess on a few short names.
_CANDIDATES = ["gb18030", "cp1251", "cp866", "cp1252"]
_BOMS = (
    (codecs.BOM_UTF8, "utf-8-sig"),
    (codecs.BOM_UTF16_LE, "utf-16"),
    (codecs.BOM_UTF16_BE, "utf-16"),
)
_GUESS_BYTES = 20_000


def decode_text(data: bytes, *, encoding: str | None = None) -> tuple[str, str]:
    """Return the text and the encoding it was read with.

    Parameters
    ----------
    data : bytes
        The file's bytes.
    encoding : str, optional
        The encoding if it is known; what it cannot decode is replaced.

    Returns
    -------
    text : str
    encoding : str
        As Python calls it: the stated one, one told by a byte order mark, UTF-8 where the bytes are valid
        UTF-8, else the likeliest of a few code pages.

    Raises
    ------
    LookupError
        If the stated encoding is not known to Python.
    """
    if encoding is not None:
        return data.decode(encoding, errors="replace"), encoding
    for mark, name in _BOMS:
        if data.startswith(mark):
            return data.decode(name, errors="replace"), name
    try:
        return data.decode("utf-8"), "utf-8"
    except UnicodeDecodeError:
        pass
    guess = _likeliest_code_page(data)
    return data.decode(guess, errors="replace"), guess


def _likeliest_code_page(data: bytes) -> str:
    from charset_normalizer import from_bytes

    # Only the lines that differ between the candidates: plain ones would drown them.
    telling = b"\n".join(line for line in data.splitlines() if not line.isascii())
    if len(telling) > _GUESS_BYTES:  # cut between lines, never through a letter of two bytes
        telling = telling[:_GUESS_BYTES].rpartition(b"\n")[0] or telling[:_GUESS_BYTES]
    best = from_bytes(telling, cp_isolation=_CANDIDATES).best()
    return best.encoding if best is not None else "latin-1"


def printable(text: str, *, limit: int = 256) -> str:
    """Return text from a file made safe to show: one line, no control codes, not longer than `limit`."""
    cleaned = "".join(c if c.isprintable() else " " for c in text).strip()
    return cleaned if len(cleaned) <= limit else cleaned[: limit - 1] + "…"
