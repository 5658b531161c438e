"""The unattended run: one at a time, and the last good plan survives whatever happens."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import replace
from datetime import UTC, datetime, timedelta
from pathlib import Path

import pytest
from filelock import FileLock

from passplan.inputs.errors import InputError
from passplan.inputs.run import Run
from passplan.operations.nightly import BusyError, Nightly, read_nightly, run_nightly
from passplan.operations.status import hours_since_good, read_status, write_status
from passplan.planning.record import PlanRecord
from passplan.report.directory import DirectoryError, read_plan


@pytest.fixture
def nightly(sample: Path) -> Nightly:
    return read_nightly(sample / "configs" / "nightly.toml")


def _planner(record: PlanRecord) -> Callable[[Run], PlanRecord]:
    return lambda run: replace(record, files=run.files, summary={**record.summary, "inputs": _entries(run)})


def _entries(run: Run) -> list[dict[str, str]]:
    return [{"path": f.path, "sha256": f.sha256, "stored": f"inputs/{i}"} for i, f in enumerate(run.files)]


def test_a_good_night(nightly: Nightly, short_plan: PlanRecord) -> None:
    record, out = run_nightly(nightly, _planner(short_plan))
    latest = nightly.plans / "latest"
    assert latest.is_symlink()
    assert latest.resolve() == out.resolve()
    assert read_plan(latest).summary["plan_id"] == record.summary["plan_id"]
    status = read_status(nightly.plans)
    assert status["exit_code"] == 0
    assert status["last_good_plan"] == out.name
    assert status["gap"] == short_plan.summary["gap"]


def test_the_same_night_again_keeps_its_plan(nightly: Nightly, short_plan: PlanRecord) -> None:
    _, first = run_nightly(nightly, _planner(short_plan))
    stamp = (first / "plan.json").stat().st_mtime_ns
    _, second = run_nightly(nightly, _planner(short_plan))
    assert first == second
    assert (first / "plan.json").stat().st_mtime_ns == stamp


@pytest.mark.parametrize("fault", [RuntimeError("solver died"), KeyboardInterrupt(), MemoryError()])
def test_a_bad_night_keeps_the_last_good_plan(nightly: Nightly, short_plan: PlanRecord, fault: BaseException) -> None:
    _, good = run_nightly(nightly, _planner(short_plan))
    before = {path: path.read_bytes() for path in good.rglob("*") if path.is_file()}

    def fail(run: Run) -> PlanRecord:
        raise fault

    later = datetime(2027, 3, 10, tzinfo=UTC)
    with pytest.raises(type(fault)):
        run_nightly(nightly, fail, start=later)
    assert (nightly.plans / "latest").resolve() == good.resolve()
    assert {path: path.read_bytes() for path in good.rglob("*") if path.is_file()} == before
    status = read_status(nightly.plans)
    assert status["exit_code"] == 1
    assert status["last_good_plan"] == good.name
    assert sorted(item.name for item in nightly.plans.iterdir() if not item.name.startswith(".")) == sorted(
        [good.name, "latest", "status.json"])


def test_bad_input_is_reported_with_its_exit_code(nightly: Nightly, short_plan: PlanRecord) -> None:
    nightly.run.write_text("nonsense = 1\n", encoding="utf-8")
    with pytest.raises(InputError):
        run_nightly(nightly, _planner(short_plan))
    status = read_status(nightly.plans)
    assert status["exit_code"] == 2
    assert "nonsense" in status["message"]
    assert status["last_good_utc"] is None


def test_only_one_at_a_time(nightly: Nightly, short_plan: PlanRecord) -> None:
    nightly.plans.mkdir(parents=True)
    with FileLock(nightly.plans / ".lock"), pytest.raises(BusyError, match="lock"):
        run_nightly(nightly, _planner(short_plan))
    assert read_status(nightly.plans) == {}
    run_nightly(nightly, _planner(short_plan))
    assert read_status(nightly.plans)["exit_code"] == 0


def test_a_place_that_cannot_be_used(nightly: Nightly, short_plan: PlanRecord) -> None:
    nightly.plans.parent.mkdir(parents=True, exist_ok=True)
    nightly.plans.write_text("a file", encoding="utf-8")
    with pytest.raises(DirectoryError, match="cannot be used"):
        run_nightly(nightly, _planner(short_plan))


def test_latest_moves_on(nightly: Nightly, short_plan: PlanRecord) -> None:
    _, first = run_nightly(nightly, _planner(short_plan))
    _, second = run_nightly(nightly, _planner(short_plan), start=datetime(2027, 3, 9, 6, tzinfo=UTC))
    assert first != second
    assert first.is_dir()
    assert (nightly.plans / "latest").resolve() == second.resolve()


def test_hours_since_the_last_good_run() -> None:
    now = datetime(2027, 3, 10, 12, tzinfo=UTC)
    assert hours_since_good({}, now) is None
    assert hours_since_good({"last_good_utc": None}, now) is None
    assert hours_since_good({"last_good_utc": "yesterday"}, now) is None
    assert hours_since_good({"last_good_utc": (now - timedelta(hours=30)).isoformat()}, now) == 30.0


def test_a_broken_status_file_is_no_obstacle(tmp_path: Path) -> None:
    (tmp_path / "status.json").write_text("{", encoding="utf-8")
    assert read_status(tmp_path) == {}
    write_status(tmp_path, {"exit_code": 0})
    assert json.loads((tmp_path / "status.json").read_text(encoding="utf-8")) == {"exit_code": 0}
    assert [item.name for item in tmp_path.iterdir()] == ["status.json"]


@pytest.mark.parametrize(
    ("old", "new", "part"),
    [("watch_h = 26", "watch_h = 0", "watch_h"), ("plans =", "plan =", "did you mean 'plans'?"),
     ("T00:00:00Z", "T00:00:00", "no zone")],
)
def test_a_nightly_config_with_a_fault(sample: Path, edit: Callable[..., Path], old: str, new: str, part: str) -> None:
    edit("configs/nightly.toml", old, new)
    with pytest.raises(InputError) as caught:
        read_nightly(sample / "configs" / "nightly.toml")
    assert part in str(caught.value)
