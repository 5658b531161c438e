"""Every link test has a cache folder of its own, so that nothing is read from or left with the user."""

from __future__ import annotations

from pathlib import Path

import pytest


@pytest.fixture(autouse=True)
def cache_home(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    home = tmp_path / "cache-home"
    monkeypatch.setenv("XDG_CACHE_HOME", str(home))
    return home
