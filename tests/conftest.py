"""What every test stands on."""

from __future__ import annotations

from pathlib import Path

import pytest


@pytest.fixture(autouse=True)
def own_data_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """No test meets the plant of the person who runs it."""
    monkeypatch.setenv("XDG_DATA_HOME", str(tmp_path / "data"))
