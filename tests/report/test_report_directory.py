"""Plan directories: whole or not at all, the same for the same inputs, and enough to read everything back."""

from __future__ import annotations

import json
import re
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path

import pytest
from plan_variants import renamed

from passplan.inputs.load import load_run
from passplan.inputs.run import Run
from passplan.planning.record import (
    CONTACT_COLUMNS,
    SEGMENT_COLUMNS,
    UNUSED_COLUMNS,
    WINDOW_COLUMNS,
    PlanRecord,
)
from passplan.planning.steps import plan_run
from passplan.report import directory
from passplan.report.directory import DirectoryError, changed_inputs, check_free, read_plan, stored_config, write_plan


def test_everything_is_written_and_read_back(short_plan: PlanRecord, tmp_path: Path) -> None:
    out = write_plan(short_plan, tmp_path / "deep" / "plan")
    assert sorted(item.name for item in out.iterdir()) == [
        "contacts.csv", "inputs", "plan.json", "report.html", "segments.csv", "unused.csv", "windows.csv"]
    back = read_plan(out)
    assert back.summary == json.loads(json.dumps(short_plan.summary))
    assert [file.sha256 for file in back.files] == [file.sha256 for file in short_plan.files]
    assert list(tmp_path.rglob(".*")) == []


def test_columns_are_those_of_the_design(short_plan: PlanRecord) -> None:
    assert tuple(short_plan.windows.columns) == (*WINDOW_COLUMNS, "off_pointing_deg", "lost_s")
    assert tuple(short_plan.contacts.columns) == CONTACT_COLUMNS
    assert tuple(short_plan.segments.columns) == SEGMENT_COLUMNS
    assert tuple(short_plan.unused.columns) == UNUSED_COLUMNS


def test_the_summary_has_every_key_and_only_plain_values(short_plan: PlanRecord) -> None:
    keys = {"plan_id", "status", "generated_utc", "horizon_start_utc", "horizon_end_utc", "contacts", "volume_mb",
            "value", "bound", "gap", "tiers", "shortfalls", "warnings", "inputs", "versions", "seconds"}
    assert keys <= set(short_plan.summary)
    assert set(short_plan.summary["seconds"]) == {
        "windows", "links", "plan", "reasons", "weather", "lost value", "audit"}
    json.dumps(short_plan.summary, allow_nan=False)
    assert short_plan.summary["bound"] >= short_plan.summary["value"]


def test_windows_are_used_or_explained(short_plan: PlanRecord) -> None:
    used, unused = set(short_plan.contacts["window_id"]), set(short_plan.unused["window_id"])
    assert used.isdisjoint(unused)
    assert used | unused == set(short_plan.windows["window_id"])
    assert (short_plan.unused["detail"] != "").all()


def test_identical_inputs_give_identical_files(short_run: Run, short_plan: PlanRecord, tmp_path: Path) -> None:
    assert short_plan.summary["status"] in ("optimal", "within_gap")
    again = plan_run(short_run)
    assert again.summary["plan_id"] == short_plan.summary["plan_id"]
    first, second = write_plan(short_plan, tmp_path / "a"), write_plan(again, tmp_path / "b")
    for file in sorted(first.rglob("*")):
        twin = second / file.relative_to(first)
        if file.name == "plan.json":
            a, b = (json.loads(path.read_text(encoding="utf-8")) for path in (file, twin))
            for stamp in ("generated_utc", "seconds"):
                a.pop(stamp), b.pop(stamp)
            assert a == b
        elif file.name == "report.html":
            a, b = (re.sub("Made [-0-9 :]+ UTC", "", path.read_text(encoding="utf-8")) for path in (file, twin))
            assert a == b
        elif file.is_file():
            assert file.read_bytes() == twin.read_bytes(), file.name


def test_a_plan_directory_carries_its_own_inputs(short_plan: PlanRecord, short_run: Run, tmp_path: Path) -> None:
    out = write_plan(short_plan, tmp_path / "plan")
    config, stored = stored_config(out, read_plan(out).summary)
    run = load_run(config, stored=stored, start=datetime(2027, 3, 9, 8, tzinfo=UTC))
    assert run.antennas == short_run.antennas
    assert run.spacecraft == short_run.spacecraft
    assert run.closures == short_run.closures
    assert set(run.orbits) == set(short_run.orbits)


def test_an_existing_place_is_refused(short_plan: PlanRecord, tmp_path: Path) -> None:
    (tmp_path / "file").write_text("mine", encoding="utf-8")
    with pytest.raises(DirectoryError, match="already exists"):
        write_plan(short_plan, tmp_path / "file", replace=True)
    (tmp_path / "folder").mkdir()
    with pytest.raises(DirectoryError, match="already exists"):
        check_free(tmp_path / "folder", replace=True)
    out = write_plan(short_plan, tmp_path / "plan")
    with pytest.raises(DirectoryError, match="--replace"):
        write_plan(short_plan, out)
    (out / "left-over.txt").write_text("old", encoding="utf-8")
    write_plan(short_plan, out, replace=True)
    assert not (out / "left-over.txt").exists()


def test_a_failure_while_writing_leaves_nothing(
    short_plan: PlanRecord, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def full(table: object, path: Path) -> None:
        if path.name == "unused.csv":
            raise OSError(28, "No space left on device")
        path.write_text("x", encoding="utf-8")

    monkeypatch.setattr(directory, "write_csv", full)
    with pytest.raises(DirectoryError, match="No space left"):
        write_plan(short_plan, tmp_path / "plan")
    assert list(tmp_path.iterdir()) == []


def test_a_failed_replacement_keeps_the_old_plan(
    short_plan: PlanRecord, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    out = write_plan(short_plan, tmp_path / "plan")
    before = (out / "contacts.csv").read_bytes()
    monkeypatch.setattr(directory, "write_csv", lambda *_: (_ for _ in ()).throw(OSError(5, "Input/output error")))
    with pytest.raises(DirectoryError, match="Input/output"):
        write_plan(short_plan, out, replace=True)
    assert (out / "contacts.csv").read_bytes() == before
    assert [item.name for item in tmp_path.iterdir()] == ["plan"]


def test_a_broken_directory_is_named(short_plan: PlanRecord, tmp_path: Path) -> None:
    with pytest.raises(DirectoryError, match=r"plan\.json: no such file"):
        read_plan(tmp_path)
    out = write_plan(short_plan, tmp_path / "plan")
    (out / "plan.json").write_text("{", encoding="utf-8")
    with pytest.raises(DirectoryError, match="not a readable plan directory"):
        read_plan(out)


def test_changed_inputs_are_named(short_plan: PlanRecord) -> None:
    files = list(short_plan.files)
    assert changed_inputs(short_plan, files) == []
    files[1] = replace(files[1], content=b"other")
    lines = changed_inputs(short_plan, files[:-1])
    assert lines[0].startswith("../sample_fleet/fleet.toml: changed")
    assert "elements.json" in lines[1]
    assert len(lines) == 2


def test_a_run_altered_in_memory_has_its_page_when_it_is_given(
    short_plan: PlanRecord, short_run: Run, tmp_path: Path
) -> None:
    record, run = renamed(short_plan, short_run, {"Isvarde-A": "Isvarde-Z"})
    assert not (write_plan(record, tmp_path / "without") / "report.html").exists()
    page = write_plan(record, tmp_path / "with", run=run) / "report.html"
    assert "Isvarde-Z" in page.read_text(encoding="utf-8")
