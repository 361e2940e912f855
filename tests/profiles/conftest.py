"""No test here sees the profiles of whoever runs it."""

from __future__ import annotations

from pathlib import Path

import pytest

from profiles.load import FOLDER_VARIABLE


@pytest.fixture(autouse=True)
def own_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """An empty folder of the user's own."""
    folder = tmp_path / "own"
    folder.mkdir()
    monkeypatch.setenv(FOLDER_VARIABLE, str(folder))
    return folder
