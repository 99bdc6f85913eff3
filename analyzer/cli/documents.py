"""JSON documents to a file or to standard output."""

from __future__ import annotations

import json
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import Any

STANDARD_OUTPUT = "-"


def write_documents(documents: Sequence[dict[str, Any]], target: str, *, inputs: Sequence[Path]) -> None:
    """Write one document as an object, several as an array.

    Parameters
    ----------
    documents : sequence of dict
        Plain data without NaN or Infinity.
    target : str
        File, replaced when it is there; ``-`` for standard output.
    inputs : sequence of Path
        Files that must not be replaced.

    Raises
    ------
    RecordError
        If the file is an input or cannot be written.
    """
    from analyzer.records.output import written_beside

    content = documents[0] if len(documents) == 1 else list(documents)
    # Plain ASCII: right in whatever code page the reader takes it to be.
    text = json.dumps(content, indent=2, allow_nan=False) + "\n"
    if target == STANDARD_OUTPUT:
        sys.stdout.write(text)
        return
    with written_beside(Path(target), existing="replace", inputs=inputs) as draft:
        draft.write_text(text, encoding="utf-8", newline="\n")
