"""Every command on the sample and on mistakes: what it prints, what it writes, and its exit code."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pandas as pd
import pytest
from typer.testing import CliRunner, Result

from passplan import __version__
from passplan.cli import app

Command = Callable[..., Result]
QUICK = 'cut_grid_s = 0\noptions_per_window = 2\ngap = 0.01\n'


@pytest.fixture
def passplan(sample: Path, monkeypatch: pytest.MonkeyPatch) -> Command:
    """Run a command in the folder of the sample, which is made quick to plan."""
    daily = sample / "configs" / "daily.toml"
    text = daily.read_text(encoding="utf-8")
    daily.write_text(text.split("gap = ")[0] + QUICK, encoding="utf-8")
    monkeypatch.chdir(sample)
    monkeypatch.setenv("COLUMNS", "100")
    runner = CliRunner()

    def run(*words: str) -> Result:
        return runner.invoke(app, list(words))

    return run


def test_version_and_help(passplan: Command) -> None:
    assert passplan("--version").output.strip() == f"passplan {__version__}"
    text = passplan("--help").output
    for name in ("check", "windows", "link", "plan", "audit", "show", "export", "whatif", "nightly"):
        assert name in text
        assert passplan(name, "--help").exit_code == 0


def test_usage_errors_exit_with_2(passplan: Command) -> None:
    assert passplan("plam").exit_code == 2
    assert passplan("plan", "configs/daily.toml").exit_code == 2


def test_check(passplan: Command) -> None:
    result = passplan("check", "configs/daily.toml", "--strict")
    assert result.exit_code == 0, result.output
    assert "Highwater" in result.output
    assert "No warnings." in result.output


def test_check_strict_with_warnings(passplan: Command, edit: Callable[..., Path]) -> None:
    edit("sample_fleet/fleet.toml", "catalogue_number = 330104", "catalogue_number = 330199")
    result = passplan("check", "configs/daily.toml", "--strict")
    assert result.exit_code == 8
    assert "330199" in result.output
    assert passplan("check", "configs/daily.toml").exit_code == 0


def test_windows(passplan: Command, sample: Path) -> None:
    result = passplan("windows", "configs/daily.toml", "--spacecraft", "Highwater", "--antenna", "Tarrow-A")
    assert result.exit_code == 0, result.output
    assert "Highwater.Tarrow-A." in result.output
    result = passplan("windows", "configs/daily.toml", "--out", "tables/w.csv")
    assert result.exit_code == 0, result.output
    table = pd.read_csv(sample / "tables/w.csv")
    assert f"{len(table)} windows written" in result.output
    assert table["window_id"].is_unique
    assert table["aos_utc"].is_monotonic_increasing


def test_windows_of_an_unknown_name(passplan: Command) -> None:
    result = passplan("windows", "configs/daily.toml", "--antenna", "Tarow-A")
    assert result.exit_code == 2
    assert "did you mean 'Tarrow-A'?" in result.output


def test_link(passplan: Command) -> None:
    result = passplan("link", "configs/daily.toml", "--spacecraft", "Ambril-3", "--antenna", "Tarrow-A")
    assert result.exit_code == 0, result.output
    for part in ("EIRP", "free-space loss", "ITU-R P.525", "C/N0", "Es/N0", "margin", "command s-command"):
        assert part in result.output, part


def test_link_with_weather_and_every_term_as_csv(passplan: Command, sample: Path) -> None:
    result = passplan("link", "configs/rain.toml", "--spacecraft", "Skerry-1", "--antenna", "Tarrow-K",
                      "--csv", "pass.csv")
    assert result.exit_code == 0, result.output
    said = " ".join(result.output.split())
    for part in ("transmit power", "back-off", "rain", "cloud", "scintillation", "system noise", "Sun",
                 "flux density at ground", "adaptive: stepped", "Over an average year", "not a forecast"):
        assert part in said, part
    assert max(map(len, result.stdout.splitlines())) <= 100
    rows = (sample / "pass.csv").read_text(encoding="utf-8").splitlines()
    assert rows[0].startswith("utc,direction,radio,partner,")
    assert len(rows) > 400
    below = passplan("link", "configs/rain.toml", "--spacecraft", "Skerry-1", "--antenna", "Tarrow-K",
                     "--at", "2027-03-09T12:10:00Z", "--csv", "none.csv")
    assert below.exit_code == 2
    assert "no window" in below.output
    assert not (sample / "none.csv").exists()


def test_link_at_an_instant_below_the_horizon(passplan: Command) -> None:
    result = passplan("link", "configs/daily.toml", "--spacecraft", "Ambril-3", "--antenna", "Tarrow-A",
                      "--at", "2027-03-09T12:00:00Z")
    assert result.exit_code == 0, result.output
    assert "lies in no window" in result.output


@pytest.mark.parametrize("at", ["2027-03-09T12:00:00", "noon"])
def test_link_refuses_a_time_it_cannot_place(passplan: Command, at: str) -> None:
    result = passplan("link", "configs/daily.toml", "--spacecraft", "Ambril-3", "--antenna", "Tarrow-A", "--at", at)
    assert result.exit_code == 2
    assert "--at" in result.output


def test_plan_audit_and_show(passplan: Command, sample: Path) -> None:
    result = passplan("plan", "configs/daily.toml", "--out", "plans/one")
    assert result.exit_code == 0, result.output
    assert "DRAFT daily" in result.output
    assert max(map(len, result.stdout.splitlines())) <= 100
    assert passplan("plan", "configs/daily.toml", "--out", "plans/one").exit_code == 7
    assert passplan("plan", "configs/daily.toml", "--out", "plans/one", "--replace", "--quiet").exit_code == 0
    result = passplan("audit", "configs/daily.toml", "plans/one")
    assert result.exit_code == 0, result.output
    assert "no fault found" in result.output
    assert "DRAFT daily" in passplan("show", "plans/one").output
    summary = json.loads(passplan("show", "plans/one", "--json").output)
    assert summary["contacts"] == len(pd.read_csv(sample / "plans/one/contacts.csv"))


def test_audit_catches_a_spoilt_plan(passplan: Command, sample: Path) -> None:
    assert passplan("plan", "configs/daily.toml", "--out", "plans/one", "--quiet").exit_code == 0
    path = sample / "plans/one/contacts.csv"
    table = pd.read_csv(path, dtype=str, keep_default_na=False)
    table.loc[3, "volume_mb"] = str(float(table.loc[3, "volume_mb"]) + 1.0)
    table.to_csv(path, index=False)
    result = passplan("audit", "configs/daily.toml", "plans/one")
    assert result.exit_code == 6
    assert str(table.loc[3, "contact_id"]) in result.output.replace("\n", "")


def test_audit_names_changed_inputs(passplan: Command, edit: Callable[..., Path]) -> None:
    assert passplan("plan", "configs/daily.toml", "--out", "plans/one", "--quiet").exit_code == 0
    edit("sample_fleet/ground.toml", "", "\n# a remark\n")
    result = passplan("audit", "configs/daily.toml", "plans/one")
    assert "ground.toml: changed since the plan was made" in result.output


def test_faults_are_lines_on_standard_error(passplan: Command, edit: Callable[..., Path]) -> None:
    edit("configs/daily.toml", "hours = 24", "hours = -1")
    result = passplan("plan", "configs/daily.toml", "--out", "plans/one")
    assert result.exit_code == 2
    assert result.stdout == ""
    assert result.stderr.startswith("passplan: configs/daily.toml: hours = -1")


def test_old_elements_exit_with_3(passplan: Command) -> None:
    result = passplan("plan", "configs/daily.toml", "--out", "plans/one", "--start", "2031-01-01T00:00:00Z")
    assert result.exit_code == 3
    assert "too old" in result.stderr


def test_an_unforeseen_fault_is_an_internal_error(passplan: Command, monkeypatch: pytest.MonkeyPatch) -> None:
    def broken(*_: object, **__: object) -> None:
        raise ZeroDivisionError("seven")

    monkeypatch.setattr("passplan.planning.steps.windows_of", broken)
    result = passplan("windows", "configs/daily.toml")
    assert result.exit_code == 1
    assert "internal error" in result.stderr


def test_plan_without_any_window_is_empty_and_no_error(
    passplan: Command, edit: Callable[..., Path], sample: Path
) -> None:
    ground = sample / "sample_fleet/ground.toml"
    text = ground.read_text(encoding="utf-8")
    for elevation in ("5", "7", "4", "8", "6"):
        text = text.replace(f"min_elevation_deg = {elevation}\n", "min_elevation_deg = 89.9\n")
    ground.write_text(text, encoding="utf-8")
    edit("configs/daily.toml", "hours = 24", "hours = 1")
    result = passplan("plan", "configs/daily.toml", "--out", "plans/empty")
    assert result.exit_code == 0, result.output
    assert "no antenna sees any spacecraft" in " ".join(result.output.split())
    assert json.loads((sample / "plans/empty/plan.json").read_text(encoding="utf-8"))["status"] == "empty"
    assert passplan("audit", "configs/daily.toml", "plans/empty").exit_code == 0
    assert passplan("show", "plans/empty").exit_code == 0


def test_whatif(passplan: Command, sample: Path, edit: Callable[..., Path]) -> None:
    edit("configs/whatif.toml", "days = 2", "days = 1")
    result = passplan("whatif", "configs/whatif.toml", "--out", "plans/study")
    assert result.exit_code == 0, result.output
    assert "without Orrin" in result.output
    table = pd.read_csv(sample / "plans/study/variants.csv").set_index("variant")
    assert set(table.index) == {"base", "second dish at Isvarde", "without Orrin", "bigger dish, Isvarde-B"}
    assert table.loc["second dish at Isvarde", "value"] > table.loc["base", "value"]
    assert passplan("whatif", "configs/whatif.toml", "--out", "plans/study").exit_code == 7


def test_nightly_and_its_status(passplan: Command, sample: Path) -> None:
    assert passplan("nightly", "configs/nightly.toml", "--status").exit_code == 10
    result = passplan("nightly", "configs/nightly.toml")
    assert result.exit_code == 0, result.output
    assert (sample / "plans/nightly/latest/plan.json").is_file()
    result = passplan("nightly", "configs/nightly.toml", "--status")
    assert result.exit_code == 0, result.output
    assert "last good plan 20270309T000000Z-" in result.output
