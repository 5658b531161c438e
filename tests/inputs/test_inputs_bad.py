"""Bad input: each fault is one line that says file, key or row, value and what to do."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from passplan.inputs.elements.resolve import ElementsError
from passplan.inputs.errors import InputError, nearest
from passplan.inputs.load import load_run

Edit = Callable[[str, str, str], Path]
Lines = Callable[[], list[str]]

FLEET, GROUND, DAILY = "sample_fleet/fleet.toml", "sample_fleet/ground.toml", "configs/daily.toml"


def expect_one(lines: list[str], *parts: str) -> str:
    """The only line, which must hold every part."""
    assert len(lines) == 1, lines
    for part in parts:
        assert part in lines[0], (part, lines[0])
    return lines[0]


def test_missing_file(edit: Edit, lines_of: Lines) -> None:
    edit(DAILY, "fleet.toml", "flet.toml")
    expect_one(lines_of(), "flet.toml", "fleet", "no such file", "correct the path")


def test_missing_config(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"nowhere\.toml: no such file"):
        load_run(tmp_path / "nowhere.toml")


def test_broken_toml(edit: Edit, lines_of: Lines) -> None:
    edit(FLEET, "weight = 2.0", "weight = = 2.0")
    expect_one(lines_of(), "fleet.toml", "not valid TOML", "line 13")


def test_not_utf8(sample: Path, lines_of: Lines) -> None:
    path = sample / FLEET
    path.write_bytes(path.read_bytes() + b"# \xff\n")
    expect_one(lines_of(), "fleet.toml", "UTF-8")


@pytest.mark.parametrize(
    ("file", "old", "new", "parts"),
    [
        (FLEET, "storage_mb = 16000", "storage_md = 16000", ("spacecraft[1]", "did you mean 'storage_mb'?")),
        (GROUND, "price_per_minute", "price_per_min", ("price_per_min", "did you mean 'price_per_minute'?")),
        (DAILY, "hours = 24", "hour = 24", ("daily.toml", "hour", "did you mean 'hours'?")),
        (DAILY, "min_contact_s", "min_contacts", ("policy.min_contacts", "did you mean 'min_contact_s'?")),
        (FLEET, 'operator = "Ostrel Survey"', 'owner = "Ostrel Survey"', ("owner", "unknown key")),
        ("sample_fleet/requests.toml", "min_duration_s", "min_durations", ("min_durations", "min_duration_s")),
    ],
)
def test_unknown_key_names_the_nearest(
    edit: Edit, lines_of: Lines, file: str, old: str, new: str, parts: tuple[str, ...]
) -> None:
    edit(file, old, new)
    lines = lines_of()
    assert any(all(part in line for part in parts) for line in lines), lines


@pytest.mark.parametrize(
    ("file", "old", "new", "parts"),
    [
        (GROUND, "latitude_deg = 69.31", "latitude_deg = 693.1", ("latitude_deg", "693.1", "at most 90")),
        (GROUND, '"Europe/Oslo"', '"Oslo time"', ("time_zone", "Oslo time", "not a time zone", "Europe/Oslo")),
        (GROUND, "height_m = 1510", "height_m = 151000", ("height_m", "151000", "at most 9000", "check the unit")),
        (FLEET, "generation_mb_per_s = 0.55", "generation_mb_per_s = -0.55", ("per_s", "-0.55", "at least 0")),
        (DAILY, "required_margin_db = 3.0", 'required_margin_db = "three"', ("required_margin_db", "three", "number")),
        (DAILY, "required_margin_db = 3.0", "required_margin_db = nan", ("required_margin_db", "finite")),
        (GROUND, "low_mhz = 8025", "low_mhz = 8.025", ("low_mhz", "8.025", "at least 100")),
        (GROUND, "high_mhz = 8400", "high_mhz = 8000", ("low_mhz 8025 is above high_mhz 8000",)),
        (GROUND, "noise_temperature_k = 145", "g_over_t_db_per_k = 28", ("either g_over_t_db_per_k, or both",)),
        (DAILY, "required_margin_db = 3.0", 'volume_basis = "average"', ("volume_basis", "average", "expected")),
        (DAILY, "required_margin_db = 3.0", 'volume_basis = "expected"', ("policy", "needs unavailability_percent")),
        (GROUND, "[95, 5]", "[195, 5]", ("azimuths must not decrease",)),
        (FLEET, "start_fill_mb = 6000", "start_fill_mb = 60000", ("start_fill_mb 60000 is above storage_mb 16000",)),
        ("sample_fleet/radios.csv", "8070,RHCP", "8070,right", ("row 2", "polarisation", "right", "RHCP")),
        ("sample_fleet/radios.csv", "x-8070,downlink", "x-8070,down", ("row 2", "direction", "down")),
        ("sample_fleet/radios.csv", "QPSK 3/5", "QPSK 3/7", ("x-8070", "QPSK 3/7", "did you mean")),
    ],
)
def test_value_out_of_range(
    edit: Edit, lines_of: Lines, file: str, old: str, new: str, parts: tuple[str, ...]
) -> None:
    edit(file, old, new)
    lines = lines_of()
    assert any(all(part in line for part in parts) for line in lines), lines


@pytest.mark.parametrize(
    ("file", "old", "new"),
    [
        (DAILY, "start = 2027-03-09T00:00:00Z", "start = 2027-03-09T00:00:00"),
        (FLEET, "command_every_h = 8\n", "command_every_h = 8\nlast_command_utc = 2027-03-08T20:00:00\n"),
        ("sample_fleet/closures.csv", "2027-03-09T08:00:00Z", "2027-03-09T08:00:00"),
        ("sample_fleet/requests.toml", "2027-03-09T09:00:00Z", "2027-03-09T09:00:00"),
    ],
)
def test_naive_time_is_refused(edit: Edit, lines_of: Lines, file: str, old: str, new: str) -> None:
    edit(file, old, new)
    assert any("no zone" in line and "add Z" in line for line in lines_of())


def test_unknown_catalogue_number(edit: Edit, sample: Path) -> None:
    edit(FLEET, "catalogue_number = 330104", "catalogue_number = 330199")
    run = load_run(sample / DAILY)
    assert "330199" in run.left_out["Ambril-4"]
    edit(DAILY, "[policy]", '[policy]\nwhen_elements_fail = "stop"')
    with pytest.raises(ElementsError, match="330199"):
        load_run(sample / DAILY)


def test_bad_checksum(edit: Edit, lines_of: Lines) -> None:
    edit(DAILY, "elements.json", "elements.tle")
    edit("sample_fleet/elements.tle", "1 Z0101U 26201A   27067.63", "1 Z0101U 26201A   27067.64")
    assert any("elements.tle: line 2" in line and "checksum" in line for line in lines_of())


def test_duplicate_names(edit: Edit, lines_of: Lines) -> None:
    edit(FLEET, 'name = "Ambril-2"', 'name = "ambril-1"')
    expect_one(lines_of(), "spacecraft[2]", "ambril-1", "already used at spacecraft[1]", "rename")


def test_duplicate_catalogue_number(edit: Edit, lines_of: Lines) -> None:
    edit(FLEET, "catalogue_number = 330102", "catalogue_number = 330101")
    expect_one(lines_of(), "Ambril-2", "330101", "Ambril-1 has this number too")


def test_overlapping_closures(edit: Edit, lines_of: Lines) -> None:
    edit("sample_fleet/closures.csv", "", "Ellery-A,2027-03-09T12:00:00Z,2027-03-09T13:00:00Z,outage,again\n")
    expect_one(lines_of(), "closures.csv", "row 3", "Ellery-A", "row 2")


def test_reversed_closure(edit: Edit, lines_of: Lines) -> None:
    edit("sample_fleet/closures.csv", "2027-03-09T12:30:00Z", "2027-03-09T07:30:00Z")
    expect_one(lines_of(), "closures.csv", "row 2", "end_utc is not after start_utc")


def test_closure_of_an_unknown_antenna(edit: Edit, lines_of: Lines) -> None:
    edit("sample_fleet/closures.csv", "Ellery-A", "Elery-A")
    expect_one(lines_of(), "closures.csv", "row 2", "Elery-A", "did you mean 'Ellery-A'?")


def test_empty_fleet(sample: Path, lines_of: Lines) -> None:
    (sample / FLEET).write_text('operator = "nobody"\n', encoding="utf-8")
    (sample / "sample_fleet/requests.toml").write_text("", encoding="utf-8")
    assert any("the fleet is empty" in line for line in lines_of())


def test_no_antenna(sample: Path, lines_of: Lines) -> None:
    (sample / GROUND).write_text("", encoding="utf-8")
    assert any("the ground has no antenna" in line for line in lines_of())


@pytest.mark.parametrize("hours", ["0", "-3", "0.0"])
def test_horizon_without_length(edit: Edit, lines_of: Lines, hours: str) -> None:
    edit(DAILY, "hours = 24", f"hours = {hours}")
    expect_one(lines_of(), "daily.toml", "hours", "must be above 0")


@pytest.mark.parametrize("end", ["2027-03-09T00:00:00Z", "2027-03-08T00:00:00Z"])
def test_end_not_after_start(edit: Edit, lines_of: Lines, end: str) -> None:
    edit(DAILY, "hours = 24", f"end = {end}")
    expect_one(lines_of(), "daily.toml", "end is not after start")


def test_fraction_of_a_second_in_the_start(edit: Edit, lines_of: Lines) -> None:
    edit(DAILY, "start = 2027-03-09T00:00:00Z", "start = 2027-03-09T00:00:00.5Z")
    expect_one(lines_of(), "daily.toml", "whole seconds")


def test_element_sets_years_old(edit: Edit, sample: Path) -> None:
    edit(DAILY, "start = 2027-03-09T00:00:00Z", "start = 2031-03-09T00:00:00Z")
    with pytest.raises(ElementsError, match="too old: its epoch lies") as caught:
        load_run(sample / DAILY)
    assert "Ambril-1" in str(caught.value)


def test_radio_that_no_antenna_can_receive(edit: Edit, lines_of: Lines) -> None:
    edit("sample_fleet/radios.csv", "x-8190,downlink,8190", "x-8190,downlink,8490")
    expect_one(lines_of(), "x-8190", "8490", "no antenna can receive it", "Ambril-3")


def test_command_radio_that_no_antenna_can_reach(edit: Edit, lines_of: Lines) -> None:
    edit("sample_fleet/radios.csv", "command,2068", "command,2168")
    expect_one(lines_of(), "s-command", "no antenna can command it")


@pytest.mark.parametrize(
    ("file", "old", "new", "parts"),
    [
        (FLEET, '"x-8070", "s-command"', '"x-8071", "s-command"', ("x-8071", "did you mean 'x-8070'?")),
        (GROUND, 'site = "Isvarde"', 'site = "Isverde"', ("Isverde", "did you mean 'Isvarde'?")),
        (GROUND, 'receivers = ["x-5m", "ka-5m"]', 'receivers = ["x-6m", "ka-5m"]', ("x-6m", "did you mean")),
        ("sample_fleet/requests.toml", "Ambril-3", "Ambril-9", ("Ambril-9", "did you mean 'Ambril-")),
        (GROUND, 'receivers = ["ka-5m"]\nmin', "min", ("Tarrow-K", "neither receivers nor transmitters")),
    ],
)
def test_names_that_nothing_defines(
    edit: Edit, lines_of: Lines, file: str, old: str, new: str, parts: tuple[str, ...]
) -> None:
    edit(file, old, new)
    assert any(all(part in line for part in parts) for line in lines_of())


def test_several_faults_are_reported_in_one_go(edit: Edit, lines_of: Lines) -> None:
    edit(FLEET, "storage_mb = 14000", "storage_mb = -1")
    edit(GROUND, "latitude_deg = 34.28", "latitude_deg = 134.28")
    edit(DAILY, "gap = 0.005", "gap = 5")
    edit("sample_fleet/closures.csv", "outage", "outing")
    lines = lines_of()
    for part in ("storage_mb", "latitude_deg", "policy.gap", "kind"):
        assert any(part in line for line in lines), (part, lines)


def test_csv_faults_name_the_row(sample: Path, lines_of: Lines) -> None:
    (sample / "sample_fleet/radios.csv").write_text("name,direction,name\nx,downlink,y\n", encoding="utf-8")
    lines = lines_of()
    assert any("radios.csv: row 1" in line and "'name' stands twice" in line for line in lines)


def test_csv_row_with_a_cell_too_many(edit: Edit, lines_of: Lines) -> None:
    edit("sample_fleet/closures.csv", "outage,", "outage,greased,")
    expect_one(lines_of(), "closures.csv: row 2", "6 cells, the header 5")


def test_nearest_falls_back_to_the_list() -> None:
    assert nearest("zzz", ["alpha", "beta"]) == "use one of: alpha, beta"
    assert nearest("alpa", ["alpha", "beta"]) == "did you mean 'alpha'?"
