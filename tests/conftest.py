"""What all tests share."""

from __future__ import annotations

from pathlib import Path

import pytest


@pytest.fixture(scope="session")
def shared_folder() -> Path:
    """The folder ``shared`` beside the project: real records and reference values, not always there."""
    folder = Path(__file__).resolve().parents[2] / "shared"
    if not folder.is_dir():
        pytest.skip("the folder with real records is not beside the project")
    return folder
