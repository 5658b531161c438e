"""A spacecraft fresh from launch: no catalogue number, its orbit from a file of its own."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pandas as pd
from sgp4.api import Satrec, jday

from passplan.inputs.load import load_run
from passplan.planning.steps import windows_of

FLEET = "sample_fleet/fleet.toml"


def _oem_from_the_twin(sample: Path, name: str) -> Path:
    """SGP4 states of a sample spacecraft as an OEM, TEME, every 60 s over a day and a half."""
    lines = (sample / "sample_fleet/elements.tle").read_text(encoding="utf-8").splitlines()
    at = lines.index(name.upper())
    craft = Satrec.twoline2rv(lines[at + 1], lines[at + 2])
    whole, part = jday(2027, 3, 8, 21, 0, 0)
    start, rows = np.datetime64("2027-03-08T21:00:00"), []
    for minute in range(36 * 60 + 1):
        error, position, velocity = craft.sgp4(whole, part + minute / 1440)
        assert error == 0
        numbers = " ".join(f"{x:.9f}" for x in (*position, *velocity))
        rows.append(f"{start + np.timedelta64(minute, 'm')}.000 {numbers}")
    head = [
        "CCSDS_OEM_VERS = 2.0", "CREATION_DATE = 2027-03-08T20:00:00", "ORIGINATOR = OSTREL SURVEY", "META_START",
        f"OBJECT_NAME = {name}", "OBJECT_ID = 2026-201A", "CENTER_NAME = EARTH",
        "REF_FRAME = TEME", "TIME_SYSTEM = UTC",
        f"START_TIME = {rows[0].split()[0]}", f"STOP_TIME = {rows[-1].split()[0]}", "INTERPOLATION = LAGRANGE",
        "INTERPOLATION_DEGREE = 9", "META_STOP",
    ]
    path = sample / "sample_fleet" / "fresh.oem"
    path.write_text("\n".join([*head, *rows]) + "\n", encoding="utf-8")
    return path


def test_an_oem_gives_the_windows_of_its_element_set(sample: Path, edit: Callable[..., Path]) -> None:
    _oem_from_the_twin(sample, "Ambril-1")
    first = windows_of(load_run(sample / "configs/daily.toml"))
    edit(FLEET, "catalogue_number = 330101", 'ephemeris_file = "fresh.oem"')
    run = load_run(sample / "configs/daily.toml")
    second = windows_of(run)
    ours, theirs = (t[t["spacecraft"] == "Ambril-1"].set_index("window_id") for t in (first, second))
    assert list(ours.index) == list(theirs.index)
    for edge in ("aos_utc", "los_utc"):
        apart = (ours[edge] - theirs[edge]).abs()
        # 60 s states interpolated to degree 9 follow SGP4 to well under a metre.
        assert apart.max() <= pd.Timedelta(milliseconds=2)
    assert (ours["peak_elevation_deg"] - theirs["peak_elevation_deg"]).abs().max() < 1e-3
    assert theirs["element_epoch_utc"].isna().all()


def test_a_plan_over_an_ephemeris_is_audited_clean(sample: Path, edit: Callable[..., Path]) -> None:
    from typer.testing import CliRunner

    from passplan.cli import app

    _oem_from_the_twin(sample, "Ambril-1")
    edit(FLEET, "catalogue_number = 330101", 'ephemeris_file = "fresh.oem"')
    edit("configs/daily.toml", "gap = 0.005", "gap = 0.02\ncut_grid_s = 0\noptions_per_window = 2")
    config = str(sample / "configs/daily.toml")
    result = CliRunner().invoke(app, ["plan", config, "--out", str(sample / "p"), "--quiet"])
    assert result.exit_code == 0, result.output
    summary = json.loads((sample / "p/plan.json").read_text(encoding="utf-8"))
    assert summary["spacecraft"]["Ambril-1"]["orbit_from"] == "ephemeris"
    assert "Ambril-1" in set(pd.read_csv(sample / "p/contacts.csv")["spacecraft"])


def test_an_element_set_of_its_own(sample: Path, edit: Callable[..., Path]) -> None:
    lines = (sample / "sample_fleet/elements.tle").read_text(encoding="utf-8").splitlines()
    (sample / "sample_fleet/fresh.tle").write_text("\n".join(lines[1:3]) + "\n", encoding="utf-8")
    first = windows_of(load_run(sample / "configs/daily.toml"))
    edit(FLEET, "catalogue_number = 330101", 'elements_file = "fresh.tle"')
    second = windows_of(load_run(sample / "configs/daily.toml"))
    assert list(first["window_id"]) == list(second["window_id"])
