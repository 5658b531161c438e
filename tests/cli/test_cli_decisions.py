"""From the command line: a published plan is frozen in the next one, and contradictions may end the run with 4."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pandas as pd
import pytest
from typer.testing import CliRunner

from passplan.cli import app

Edit = Callable[[str, str, str], Path]
DAILY = "configs/daily.toml"
QUICK = "cut_grid_s = 0\noptions_per_window = 2\ngap = 0.01\n"


@pytest.fixture
def short(sample: Path, edit: Edit, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Three hours of the sample, quick to plan."""
    edit(DAILY, "hours = 24", "hours = 3")
    edit(DAILY, "gap = 0.005", QUICK + "# ")
    edit(DAILY, "requests =", "# requests =")
    monkeypatch.chdir(sample)
    return sample


def test_a_published_plan_is_frozen_in_the_next(short: Path, edit: Edit) -> None:
    runner = CliRunner()
    first = runner.invoke(app, ["plan", DAILY, "--out", "plans/one", "--quiet"])
    assert first.exit_code == 0, first.output
    edit(DAILY, "[policy]", 'published = "../plans/one"\n[policy]\nfreeze_h = 2\ntiers = "in_order"')
    # What frees time elsewhere would move contacts, were they not frozen.
    edit("sample_fleet/closures.csv", "2027-03-09T08:00:00Z,2027-03-09T12:30", "2027-03-09T02:20:00Z,2027-03-09T12:30")
    second = runner.invoke(app, ["plan", DAILY, "--out", "plans/two"])
    assert second.exit_code == 0, second.output
    assert "Frozen" in second.output
    before, after = (pd.read_csv(f"plans/{name}/contacts.csv") for name in ("one", "two"))
    near = before[before["start_utc"] < "2027-03-09T02:00:00"]
    same = near.merge(after, on=["spacecraft", "antenna", "start_utc", "end_utc"])
    assert len(near) == len(same) > 3
    assert set(same["origin_y"]) == {"frozen"}
    summary = json.loads(Path("plans/two/plan.json").read_text(encoding="utf-8"))
    assert [tier["name"] for tier in summary["tiers"]] == ["shortfalls", "lost data", "value", "cost", "changes"]
    assert summary["frozen_until_utc"] == "2027-03-09T02:00:00.000Z"
    again = runner.invoke(app, ["audit", DAILY, "plans/two"])
    assert again.exit_code == 0, again.output


def test_contradictions_end_with_4_if_the_policy_says_so(short: Path, edit: Edit) -> None:
    Path("configs/decisions.toml").write_text(
        '[[decision]]\nkind = "pin"\nspacecraft = "Ambril-3"\nantenna = "Isvarde-A"\n'
        "start_utc = 2027-03-09T02:00:00Z\nend_utc = 2027-03-09T02:10:00Z\n", encoding="utf-8")
    edit(DAILY, "[policy]", 'decisions = "decisions.toml"\n[policy]\nwhen_rules_conflict = "stop"')
    result = CliRunner().invoke(app, ["plan", DAILY, "--out", "plans/none", "--quiet"])
    assert result.exit_code == 4, result.output
    assert "Ambril-3 is not in view of Isvarde-A then" in result.output
    assert not Path("plans/none").exists()
