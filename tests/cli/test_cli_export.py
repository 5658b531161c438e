"""Plans against earlier ones, exports, detail options and pictures from the command line."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pandas as pd
import pytest
from typer.testing import CliRunner, Result

from passplan.cli import app
from passplan.planning.record import PlanRecord
from passplan.report.directory import write_plan

Command = Callable[..., Result]


@pytest.fixture(scope="module")
def plan(short_plan: PlanRecord, tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_plan(short_plan, tmp_path_factory.mktemp("cli") / "plan")


@pytest.fixture
def passplan(monkeypatch: pytest.MonkeyPatch) -> Command:
    monkeypatch.setenv("COLUMNS", "100")
    runner = CliRunner()

    def run(*words: object) -> Result:
        return runner.invoke(app, [str(word) for word in words])

    return run


def test_show_one_antenna_site_or_spacecraft(passplan: Command, plan: Path) -> None:
    for option, name in (("--antenna", "Tarrow-A"), ("--site", "Port Ellery"), ("--spacecraft", "Ambril-3")):
        result = passplan("show", plan, option, name)
        assert result.exit_code == 0, result.output
        assert f"Shown: {name}" in result.output
    result = passplan("show", plan, "--site", "Port Elery")
    assert result.exit_code == 2
    assert "did you mean 'Port Ellery'?" in result.output


def test_show_as_json_is_for_machines(passplan: Command, plan: Path) -> None:
    part = json.loads(passplan("show", plan, "--json", "--antenna", "Tarrow-A").stdout)
    assert {row["antenna"] for row in part["contacts"]} == {"Tarrow-A"}
    assert all(row["start_utc"].endswith("Z") for row in part["contacts"])


def test_show_with_local_time_and_picture(passplan: Command, plan: Path, tmp_path: Path) -> None:
    result = passplan("show", plan, "--local", "Isvarde", "--picture", tmp_path / "day.svg")
    assert result.exit_code == 0, result.output
    assert "at Isvarde" in result.output
    assert "CET" in result.output
    assert (tmp_path / "day.svg").read_text(encoding="utf-8").startswith("<svg")
    assert passplan("show", plan, "--picture", tmp_path / "day.gif").exit_code == 2


def test_export_names_where_it_wrote(passplan: Command, plan: Path, tmp_path: Path) -> None:
    result = passplan("export", plan, "--as", "calendar", "--out", tmp_path / "ics")
    assert result.exit_code == 0, result.output
    assert (tmp_path / "ics" / "all.ics").is_file()
    assert passplan("export", plan, "--as", "calendar", "--out", tmp_path / "ics").exit_code == 7
    assert passplan("export", plan, "--as", "tapes").exit_code == 2
    assert passplan("export", tmp_path, "--as", "csv").exit_code == 7


def test_export_of_everything(passplan: Command, plan: Path, tmp_path: Path) -> None:
    result = passplan("export", plan, "--as", "all", "--step", "60", "--out", tmp_path / "all")
    assert result.exit_code == 0, result.output
    assert len(list((tmp_path / "all").iterdir())) == 9


def test_export_refuses_expired_pointing_tables(passplan: Command, plan: Path, tmp_path: Path) -> None:
    result = passplan("export", plan, "--as", "pointing", "--expires", "2020-01-01T00:00:00Z", "--out", tmp_path / "p")
    assert result.exit_code == 3
    assert "has passed" in result.output
    assert not (tmp_path / "p").exists()
    result = passplan("export", plan, "--as", "csv", "--expires", "2027-01-01T00:00:00Z")
    assert result.exit_code == 2
    assert "only pointing tables expire" in result.output


def test_plan_against_an_earlier_plan(passplan: Command, sample: Path, plan: Path) -> None:
    daily = sample / "configs" / "daily.toml"
    text = daily.read_text(encoding="utf-8")
    daily.write_text(text.split("gap = ")[0] + "cut_grid_s = 0\noptions_per_window = 2\ngap = 0.01\n", encoding="utf-8")
    closures = sample / "sample_fleet" / "closures.csv"
    row = "Tarrow-A,2027-03-09T20:00:00Z,2027-03-10T02:00:00Z,outage,storm\n"
    closures.write_text(closures.read_text(encoding="utf-8") + row, encoding="utf-8")
    out = sample / "second"
    result = passplan("plan", daily, "--start", "2027-03-09T08:00:00Z", "--against", plan, "--out", out)
    assert result.exit_code == 0, result.output
    assert "Against plan" in result.output
    table = pd.read_csv(out / "contacts.csv")
    assert {"kept", "new"} & set(table["change"])
    assert (table["change"] == "kept").sum() > 20
    against = json.loads((out / "plan.json").read_text(encoding="utf-8"))["against"]
    assert any(gone["antenna"] == "Tarrow-A" for gone in against["dropped"])
    assert "Changes against plan" in (out / "report.html").read_text(encoding="utf-8")
    assert passplan("audit", daily, out).exit_code == 0
    assert passplan("show", out, "--full").exit_code == 0
