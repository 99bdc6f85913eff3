from __future__ import annotations

import pytest

from analyzer.records.blobs import Blob
from analyzer.records.delimited import read_delimited
from analyzer.records.model import Record
from analyzer.records.options import ReadOptions
from analyzer.records.problems import RecordError


def read(content: str | bytes, **stated: object) -> Record:
    data = content.encode() if isinstance(content, str) else content
    blob = Blob(name="some.csv", shown="some.csv", data=data)
    return read_delimited(blob, options=ReadOptions(**stated))  # type: ignore[arg-type]


def refused(content: str | bytes, **stated: object) -> RecordError:
    with pytest.raises(RecordError) as caught:
        read(content, **stated)
    assert caught.value.path == "some.csv"
    assert "\n" not in str(caught.value)
    return caught.value


def codes(record: Record) -> set[str]:
    return {problem.code for problem in record.problems}


def message(record: Record, code: str) -> str:
    return next(f"{problem.message} | {problem.where}" for problem in record.problems if problem.code == code)
