"""What the tests of the commands share."""

from __future__ import annotations

import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from types import ModuleType

import pytest
from rich.cells import cell_len

from analyzer.cli import main
from analyzer.findings import Findings
from analyzer.records import Record
from tests.cli.files import write_record
from tests.findings_documents import full_document


@dataclass(frozen=True)
class Outcome:
    """How a command ended and what it wrote."""

    code: int
    out: str
    err: str

    @property
    def too_wide(self) -> list[str]:
        """Lines that 80 columns do not hold."""
        return [line for line in self.out.splitlines() if cell_len(line.rstrip()) > 80]


@pytest.fixture
def run(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> Callable[..., Outcome]:
    """Run the command line in this process, on a terminal of 80 columns."""
    monkeypatch.setenv("COLUMNS", "80")
    monkeypatch.delenv("FAULTASSAY_DEBUG", raising=False)

    def run_it(*arguments: str | Path) -> Outcome:
        capsys.readouterr()
        code = main([str(argument) for argument in arguments])
        written = capsys.readouterr()
        return Outcome(code, written.out, written.err)

    return run_it


@pytest.fixture
def trip(tmp_path: Path) -> Path:
    """A record that reads without a problem."""
    return write_record(tmp_path)


@pytest.fixture
def stand_in(monkeypatch: pytest.MonkeyPatch) -> Callable[[Callable[[Record], Findings]], None]:
    """Put another `examine` behind the command, whose findings the test decides."""

    def put(examine: Callable[[Record], Findings]) -> None:
        module = ModuleType("analyzer.examine")
        module.examine = examine  # type: ignore[attr-defined]
        monkeypatch.setitem(sys.modules, "analyzer.examine", module)

    return put


@pytest.fixture
def found(stand_in: Callable[[Callable[[Record], Findings]], None]) -> Callable[..., None]:
    """Let `examine` find the hand-written document with this verdict, in whatever record."""

    def put(
        verdict: str = "follows-theory", *, summary: str = "AG fault.", terminal: str = "Feeder 4"
    ) -> None:
        def examine(record: Record) -> Findings:
            document = full_document()
            document["record"]["path"] = record.origin.path
            document["events"][0]["terminal"] = terminal
            document["summary"] = summary
            document["verdict"] = verdict
            if verdict == "no-fault":
                document["events"] = []
            else:
                document["events"][0]["verdict"] = verdict
            return Findings.model_validate(document)

        stand_in(examine)

    return put
