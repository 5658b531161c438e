"""One honest plan for all audit tests, and a copy of it for each to spoil."""

from __future__ import annotations

import pytest
from audit_bench import Bench, planned


@pytest.fixture(scope="session")
def clean(tmp_path_factory: pytest.TempPathFactory) -> Bench:
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("XDG_CACHE_HOME", str(tmp_path_factory.mktemp("cache")))
        return planned()


@pytest.fixture
def bench(clean: Bench) -> Bench:
    return clean.copy()
