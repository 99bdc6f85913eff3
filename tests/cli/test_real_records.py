"""The command ``describe`` on records that nobody here made."""

from __future__ import annotations

import json

_SUFFIXES = {".cfg", ".cff", ".zip", ".csv"}


def test_every_real_record_is_described_in_80_columns(run, shared_folder, tmp_path):
    records = shared_folder / "records"
    folders = {path.parent for path in records.rglob("*") if path.suffix.lower() in _SUFFIXES}
    assert len(folders) > 10
    target = tmp_path / "contents.json"
    described = 0
    for folder in sorted(folders):
        done = run("describe", folder, "--json", target)
        document = json.loads(target.read_text(encoding="utf-8"))
        documents = document if isinstance(document, list) else [document]
        failed = [one for one in documents if "error" in one]
        assert done.code == (3 if failed else 0), done.err
        assert len(done.err.splitlines()) == len(failed)
        assert not done.too_wide
        assert not {c for c in done.out if not c.isprintable() and c != "\n"}
        described += len(documents) - len(failed)
    assert described > 30
