"""Bad input of the link budget: one clear line each."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from passplan.inputs.errors import Findings
from passplan.inputs.load import load_run
from passplan.inputs.pfd import builtin_pfd_limits, limits_at, read_pfd_limits
from passplan.inputs.reader import Reader

Edit = Callable[[str, str, str], Path]
Lines = Callable[[], list[str]]

FLEET, GROUND, DAILY = "sample_fleet/fleet.toml", "sample_fleet/ground.toml", "configs/daily.toml"
POLICY = "required_margin_db = 3.0"


@pytest.mark.parametrize(
    ("file", "old", "new", "parts"),
    [
        (GROUND, "noise_temperature_k = 145", "noise_temperature_k = -5", ("noise_temperature_k", "-5", "above 0")),
        (GROUND, "receiver_noise_k = 130", "receiver_noise_k = -1", ("receiver_noise_k", "-1", "above 0")),
        (GROUND, "spill_over_k = 8", "spill_over_k = -8", ("spill_over_k", "-8", "at least 0")),
        (GROUND, "antenna_noise_k = 6", "noise_temperature_k = 160", ("noise_temperature_k", "or receiver_noise_k")),
        (GROUND, "feeder_loss_db = 0.2", "g_over_t_db_per_k = 40", ("either g_over_t_db_per_k, or both",)),
        (GROUND, "diameter_m = 5.4", "measured_at_deg = 20", ("measured_at_deg goes with one measured figure",)),
        (GROUND, "g_over_t_db_per_k = 19.0", 'g_over_t_db_per_k = 19.0\ng_over_t_curve = [[5, 18], [90, 19]]',
         ("either g_over_t_db_per_k or g_over_t_curve",)),
        (GROUND, "g_over_t_db_per_k = 19.0", "g_over_t_curve = [[50, 18], [10, 19]]", ("the curve must rise",)),
        (GROUND, "g_over_t_db_per_k = 19.0", "g_over_t_curve = [[5, 18], [95, 19]]", ("0 to 90 deg",)),
        (GROUND, "g_over_t_db_per_k = 19.0", "g_over_t_db_per_k = 19.0\nspill_over_k = 5", ("counted only with",)),
        (GROUND, "eirp_dbw = 48", "eirp_dbw = 48\ntransmit_power_w = 10", ("either eirp_dbw", "not both")),
        (GROUND, "eirp_dbw = 48", "transmit_power_w = 10", ("give eirp_dbw, or both",)),
        (GROUND, "eirp_dbw = 48", "transmit_power_w = -10\nantenna_gain_dbi = 30", ("transmit_power_w", "above 0")),
        (GROUND, "wet_radome_loss_db = 0.8", "wet_radome_loss_db = -1", ("wet_radome_loss_db", "at least 0")),
        (GROUND, "wet_radome_loss_db = 0.8", "transmit_mask = [[400, 5]]", ("azimuths run from 0 to 360",)),
        (GROUND, 'polarisations = ["RHCP", "LHCP"]', 'polarisations = ["round"]', ("polarisations", "round", "RHCP")),
        (DAILY, POLICY, "unavailability_percent = 0", ("unavailability_percent", "at least 0.001")),
        (DAILY, POLICY, "unavailability_percent = 60", ("unavailability_percent", "60", "at most 50")),
        (DAILY, POLICY, 'sun_noise = "often"', ("sun_noise", "often", "write true or false")),
        (DAILY, POLICY, "unavailability = 1", ("unknown key", "unavailability_percent")),
        (DAILY, "hours = 24", "hours = 24\nrain_mm_per_h = { Isvard = 3.0 }", ("Isvard", "did you mean 'Isvarde'?")),
        (DAILY, "hours = 24", "hours = 24\nrain_mm_per_h = { Isvarde = -3.0 }", ("rain_mm_per_h", "at least 0")),
        (DAILY, "hours = 24", 'hours = 24\npfd_limits = "none.csv"', ("none.csv", "no such file")),
    ],
)
def test_one_line_each(edit: Edit, lines_of: Lines, file: str, old: str, new: str, parts: tuple[str, ...]) -> None:
    edit(file, old, new)
    lines = lines_of()
    assert len(lines) == 1, lines
    for part in parts:
        assert part in lines[0], (part, lines[0])


@pytest.mark.parametrize(
    ("cells", "parts"),
    [
        ({"eirp_dbw": "20"}, ("either eirp_dbw", "not both")),
        ({"antenna_gain_dbi": ""}, ("give eirp_dbw, or both transmit_power_w and antenna_gain_dbi",)),
        ({"rate_control": "fixed"}, ("needs exactly one name in modcods",)),
        ({"rate_control": "sometimes"}, ("rate_control", "sometimes", "adaptive")),
        ({"pilots": "maybe"}, ("pilots", "write true or false")),
        ({"modcod_table": "ccsds"}, ("pilots are counted for the table dvb-s2 only",)),
        ({"min_dwell_s": "-1"}, ("min_dwell_s", "at least 0")),
        ({"pattern": "0:0;40:-3"}, ("losses of the pattern are positive",)),
        ({"pattern": "40:0;10:3"}, ("angles of the curve must rise",)),
        ({"pattern": "forty"}, ("angle:value pairs",)),
        ({"polarisation": "left"}, ("polarisation", "left", "LHCP")),
    ],
)
def test_one_line_for_a_radio(sample: Path, lines_of: Lines, cells: dict[str, str], parts: tuple[str, ...]) -> None:
    path = sample / "sample_fleet/radios.csv"
    rows = [line.split(",") for line in path.read_text(encoding="utf-8").splitlines()]
    header, radio = rows[0], next(row for row in rows if row[0] == "ka-26250")
    for column, cell in cells.items():
        if column not in header:
            header.append(column)
            for row in rows[1:]:
                row.append("")
        radio[header.index(column)] = cell
    path.write_text("\n".join(",".join(row) for row in rows) + "\n", encoding="utf-8")
    lines = lines_of()
    assert len(lines) == 1, lines
    assert "ka-26250" in lines[0]
    for part in parts:
        assert part in lines[0], (part, lines[0])


def test_the_rain_of_the_day_reaches_its_site(edit: Edit, sample: Path) -> None:
    edit(DAILY, "hours = 24", "hours = 24\nrain_mm_per_h = { Isvarde = 3.0 }")
    sites = load_run(sample / DAILY).sites
    assert [site.rain_rate_mm_per_h for site in sites.values()] == [3.0, None, None, None]


def test_limits_of_flux_density() -> None:
    points = limits_at(builtin_pfd_limits(), 8_200.0)
    assert [(p.arrival_deg, p.limit_dbw_per_m2) for p in points] == [(5.0, -150.0), (25.0, -140.0)]
    assert all("from memory: verify" in p.source for p in points)
    assert limits_at(builtin_pfd_limits(), 5_000.0) == ()


def test_the_user_s_limits_are_read_and_checked(tmp_path: Path, edit: Edit, sample: Path) -> None:
    header = "low_mhz,high_mhz,arrival_deg,limit_dbw_per_m2,bandwidth_hz,source\n"
    good = sample / "configs" / "limits.csv"
    good.write_text(header + "8000,8500,0,-160,4000,licence 12\n8000,8500,30,-150,4000,licence 12\n", encoding="utf-8")
    edit(DAILY, "hours = 24", 'hours = 24\npfd_limits = "limits.csv"')
    assert [p.source for p in load_run(sample / DAILY).pfd_limits] == ["licence 12", "licence 12"]
    for rows, part in (
        ("8000,8500,30,-160,4000,x\n8000,8500,10,-150,4000,x\n", "angles of one band must rise"),
        ("8500,8000,0,-160,4000,x\n", "low_mhz 8500 is above high_mhz 8000"),
        ("8000,8500,0,-160,0,x\n", "above 0"),
    ):
        bad = tmp_path / "bad.csv"
        bad.write_text(header + rows, encoding="utf-8")
        findings = Findings()
        read_pfd_limits(bad, Reader(tmp_path), findings)
        assert len(findings.problems) == 1
        assert part in str(findings.problems[0])
