"""The sample network, copied so that a test can spoil it."""

from __future__ import annotations

import shutil
from collections.abc import Callable, Iterator
from datetime import UTC, datetime
from pathlib import Path

import pytest

from passplan.inputs.errors import InputError
from passplan.inputs.load import load_run
from passplan.inputs.run import Run
from passplan.planning.clock import Clock
from passplan.planning.record import PlanRecord
from passplan.planning.search.ready import compiled_in_time
from passplan.planning.steps import plan_run

ROOT = Path(__file__).parent.parent
QUICK = {"cut_grid_s": 0, "options_per_window": 2, "gap": 0.01}


@pytest.fixture(scope="session", autouse=True)
def _own_cache(tmp_path_factory: pytest.TempPathFactory) -> Iterator[None]:
    """Tests neither read nor write the user's cache."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("XDG_CACHE_HOME", str(tmp_path_factory.mktemp("cache")))
        yield


@pytest.fixture(scope="session")
def compiled() -> None:
    """The search is compiled before the time of a test is counted."""
    assert compiled_in_time(Clock(900.0))


@pytest.fixture
def sample(tmp_path: Path) -> Path:
    """A folder that holds copies of ``sample_fleet`` and ``configs``."""
    for name in ("sample_fleet", "configs"):
        shutil.copytree(ROOT / name, tmp_path / name)
    return tmp_path


@pytest.fixture
def edit(sample: Path) -> Callable[[str, str, str], Path]:
    """Replace text in one file of the sample; the text must be there exactly once unless it is empty (append)."""

    def change(file: str, old: str, new: str) -> Path:
        path = sample / file
        text = path.read_text(encoding="utf-8")
        if old:
            assert text.count(old) >= 1, f"{old!r} is not in {file}"
            path.write_text(text.replace(old, new, 1), encoding="utf-8")
        else:
            path.write_text(text + new, encoding="utf-8")
        return path

    return change


@pytest.fixture
def lines_of(sample: Path) -> Callable[[], list[str]]:
    """The lines that loading the (spoilt) daily config answers with."""

    def load() -> list[str]:
        with pytest.raises(InputError) as caught:
            load_run(sample / "configs" / "daily.toml")
        return str(caught.value).splitlines()

    return load


@pytest.fixture(scope="session")
def short_run() -> Run:
    """A day of the sample network from 08:00, with few options, so that it is planned at once."""
    return load_run(ROOT / "configs" / "daily.toml", start=datetime(2027, 3, 9, 8, tzinfo=UTC), policy=QUICK)


@pytest.fixture(scope="session")
def short_plan(short_run: Run) -> PlanRecord:
    """The audited plan of :func:`short_run`."""
    return plan_run(short_run)
