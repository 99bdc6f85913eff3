"""What all tests share."""

from __future__ import annotations

import os
from pathlib import Path

import pytest

# Where everything that the tests need has been installed, a skip is a hole. A test that can never run in the
# default environment says so by a reason that begins with this word.
_MAY_BE_SKIPPED = "optional"
_skipped: list[str] = []


@pytest.fixture(scope="session")
def shared_folder() -> Path:
    """The folder ``shared`` beside the project: real records and reference values, not always there."""
    folder = Path(__file__).resolve().parents[2] / "shared"
    if not folder.is_dir():
        pytest.skip("the folder with real records is not beside the project")
    return folder


def pytest_runtest_logreport(report: pytest.TestReport) -> None:
    if report.skipped and isinstance(report.longrepr, tuple):
        reason = report.longrepr[2].removeprefix("Skipped: ")
        if not reason.startswith(_MAY_BE_SKIPPED):
            _skipped.append(f"{report.nodeid}: {reason}")


def pytest_sessionfinish(session: pytest.Session) -> None:
    if os.environ.get("FAULTASSAY_NO_SKIPS") and _skipped and not hasattr(session.config, "workerinput"):
        session.exitstatus = pytest.ExitCode.TESTS_FAILED


def pytest_terminal_summary(terminalreporter: pytest.TerminalReporter) -> None:
    if os.environ.get("FAULTASSAY_NO_SKIPS"):
        for line in _skipped:
            terminalreporter.write_line(f"must not be skipped here: {line}", red=True)
