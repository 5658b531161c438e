"""Faults in what the user says of a spacecraft's limits: one line each, with file, key, value and what to do."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

FLEET = "sample_fleet/fleet.toml"
STORAGE = "storage_mb = 16000"


@pytest.mark.parametrize(
    ("written", "parts"),
    [
        ("links = 0", ("links", "0", "must be at least 1")),
        ("links = 20", ("links", "20", "must be at most 8")),
        ("link = 2", ("link", "did you mean 'links'?")),
        ("contact_gap_s = -1", ("contact_gap_s", "-1", "must be at least 0")),
        ("contact_gap = 60", ("contact_gap", "did you mean 'contact_gap_s'?")),
        ("cool_down_s = 100000", ("cool_down_s", "100000", "must be at most 86400")),
        ('cool_down_s = "long"', ("cool_down_s", "long", "write a number")),
        ("contacts_per_orbit = 0", ("contacts_per_orbit", "0", "must be at least 1")),
        ("contacts_per_day = 2.5", ("contacts_per_day", "2.5", "write a whole number")),
        ("sending_per_orbit_s = -600", ("sending_per_orbit_s", "-600", "must be at least 0")),
        ("sending_span_h = 12", ("sending_span_h is given without sending_per_span_s", "drop it")),
        ("battery_wh = 0", ("battery_wh", "0", "must be above 0")),
        ("battery_wh = 100\nsolar_w = 200", ("battery_wh needs solar_w and base_load_w beside it",)),
        ("battery_floor_percent = 20", ("battery_floor_percent is given without battery_wh", "drop it")),
        ("battery_start_percent = 120", ("battery_start_percent", "120", "must be at most 100")),
    ],
)
def test_limits_of_spacecraft(
    edit: Callable[[str, str, str], Path], lines_of: Callable[[], list[str]], written: str, parts: tuple[str, ...]
) -> None:
    edit(FLEET, STORAGE, f"{STORAGE}\n{written}")
    lines = lines_of()
    assert len(lines) == 1, lines
    for part in ("fleet.toml", "spacecraft[1] (Ambril-1)", *parts):
        assert part in lines[0], (part, lines[0])


@pytest.mark.parametrize(
    ("row", "parts"),
    [
        ("Ambril-9,2027-03-09T01:00:00Z,2027-03-09T02:00:00Z,imaging", ("row 2.spacecraft", "did you mean 'Ambril-")),
        ("Ambril-1,2027-03-09T03:00:00Z,2027-03-09T02:00:00Z,imaging", ("row 2", "end_utc is not after start_utc")),
        ("Ambril-1,2027-03-09T01:00:00Z,2027-03-09T02:00:00Z,sleeping", ("row 2.kind", "'imaging' or 'attitude'")),
        ("Ambril-1,2027-03-09T01:00:00,2027-03-09T02:00:00Z,imaging", ("row 2.start_utc", "has no zone")),
    ],
)
def test_slots(
    sample: Path, edit: Callable[[str, str, str], Path], lines_of: Callable[[], list[str]], row: str,
    parts: tuple[str, ...],
) -> None:
    edit("configs/daily.toml", "hours = 24", 'hours = 24\nslots = "../sample_fleet/busy.csv"')
    (sample / "sample_fleet/busy.csv").write_text(f"spacecraft,start_utc,end_utc,kind\n{row}\n", encoding="utf-8")
    lines = lines_of()
    assert len(lines) == 1, lines
    for part in ("busy.csv", *parts):
        assert part in lines[0], (part, lines[0])


def test_a_schedule_aboard_that_is_not_there(
    edit: Callable[[str, str, str], Path], lines_of: Callable[[], list[str]]
) -> None:
    edit("configs/daily.toml", "hours = 24", 'hours = 24\nloaded = "aboard.csv"')
    (line,) = lines_of()
    assert "aboard.csv: no such file" in line
