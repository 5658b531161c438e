"""Bad input about antennas, sites and money: each fault is one line that says what to do."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

Edit = Callable[[str, str, str], Path]
Lines = Callable[[], list[str]]

GROUND = "sample_fleet/ground.toml"


@pytest.mark.parametrize(("keys", "parts"), [
    ('service = "downlink"', ("antenna[1]", "setup", "give prepare_s or release_s")),
    ("prepare_s = 90", ("antenna[1]", "say which contacts are meant")),
    ("low_mhz = 8000\nprepare_s = 90", ("antenna[1]", "both low_mhz and high_mhz")),
    ("low_mhz = 9000\nhigh_mhz = 8000\nprepare_s = 90", ("low_mhz 9000 is above high_mhz 8000", "swap")),
    ('service = "uplink"\nprepare_s = 90', ("service", "uplink", "downlink")),
    ('service = "both"\nprepare_s = -9', ("prepare_s", "-9", "at least 0")),
])
def test_setup_times(edit: Edit, lines_of: Lines, keys: str, parts: tuple[str, ...]) -> None:
    edit(GROUND, "\n# Receive only, under a radome.", f"[[antenna.setup]]\n{keys}\n\n# Receive only, under a radome.")
    lines = lines_of()
    assert any(all(part in line for part in parts) for line in lines), lines


@pytest.mark.parametrize(("keys", "parts"), [
    ('[[site.pool]]\nname = "modem"\nat_once = -1', ("pool", "at_once", "-1", "at least 0")),
    ('[[site.pool]]\nname = "modem"\nantennas = ["Isvarde-X"]', ("site Isvarde", "modem", "Isvarde-X", "did you mean")),
    ('[[site.pool]]\nname = "modem"\nantennas = ["Tarrow-A"]', ("site Isvarde", "Tarrow-A", "not defined")),
    ('[[site.pool]]\nname = "modem"\n[[site.pool]]\nname = "modem"', ("two pools are called 'modem'", "rename")),
    ('[[site.pool]]\nname = "modem"\nlow_mhz = 8000', ("both low_mhz and high_mhz",)),
    ('[[site.staffed]]\nopens = "6:75"\ncloses = "18:00"', ("opens", "6:75", "write the time of day as 06:30")),
    ('[[site.staffed]]\nopens = "06:00"', ("staffed", "closes", "missing")),
    ('[[site.staffed]]\nopens = "24:00"\ncloses = "18:00"', ("opens is 24:00", "00:00 of the next day")),
    ('[[site.staffed]]\nopens = "06:00"\ncloses = "18:00"\ndays = ["monday"]', ("days", "monday", "mon")),
    ('[[site.staffed]]\nopens = "06:00"\ncloses = "18:00"\ndays = []', ("days is empty", "name some")),
    ('[[site.staffed]]\nopens = "06:00"\ncloses = "18:00"\nzone = "local"', ("zone", "local", "utc")),
    ("[site.backhaul]\nrate_mbps = -5", ("backhaul", "rate_mbps", "-5", "at least 0")),
    ("[site.backhaul]\nbuffered = true", ("backhaul", "give mb_per_day, rate_mbps or a closure")),
    ("[site.backhaul]\nbuffered = true\nmb_per_day = 5\n[[site.backhaul.closure]]\nstart_utc = 2027-03-09T00:00:00Z\n"
     "end_utc = 2027-03-09T01:00:00Z", ("closures of a buffered line count only with rate_mbps",)),
    ("[[site.backhaul.closure]]\nstart_utc = 2027-03-09T02:00:00Z\nend_utc = 2027-03-09T01:00:00Z",
     ("end_utc is not after start_utc",)),
])
def test_what_a_site_shares(edit: Edit, lines_of: Lines, keys: str, parts: tuple[str, ...]) -> None:
    edit(GROUND, '[[site]]\nname = "Tarrow Mesa"', f'{keys}\n\n[[site]]\nname = "Tarrow Mesa"')
    lines = lines_of()
    assert any(all(part in line for part in parts) for line in lines), lines


def test_hours_in_the_time_of_a_site_without_one(edit: Edit, lines_of: Lines) -> None:
    edit(GROUND, 'time_zone = "Europe/Oslo"\n', "")
    hours = '[[site.staffed]]\nopens = "06:00"\ncloses = "18:00"\nzone = "site"'
    edit(GROUND, '[[site]]\nname = "Tarrow Mesa"', f'{hours}\n\n[[site]]\nname = "Tarrow Mesa"')
    assert any("staffed hours are in the site's time, but it has none" in line for line in lines_of())


@pytest.mark.parametrize(("old", "new", "parts"), [
    ("price_per_minute = 6.0", "price_per_minute = -6.0", ("price_per_minute", "-6.0", "at least 0")),
    ("price_per_minute = 6.0", "price_per_contact = -6.0", ("price_per_contact", "-6.0", "at least 0")),
    ("price_per_minute = 6.0", "minimum_charge = -6.0", ("minimum_charge", "-6.0", "at least 0")),
    ("price_per_minute = 6.0", "billed_s = 0", ("billed_s", "0", "at least 1")),
    ("price_per_minute = 6.0", "ask_before_h = 4", ("ask_before_h is about rented antennas", "rented = true")),
])
def test_prices_and_rent(edit: Edit, lines_of: Lines, old: str, new: str, parts: tuple[str, ...]) -> None:
    edit(GROUND, old, new)
    lines = lines_of()
    assert any(all(part in line for part in parts) for line in lines), lines


@pytest.mark.parametrize(("line", "parts"), [
    ("budget_per_day = -1", ("policy.budget_per_day", "-1", "at least 0")),
    ('tentative_closures = "ignore"', ("policy.tentative_closures", "ignore", "keep_free")),
])
def test_policy(edit: Edit, lines_of: Lines, line: str, parts: tuple[str, ...]) -> None:
    edit("configs/daily.toml", "[policy]\n", f"[policy]\n{line}\n")
    lines = lines_of()
    assert any(all(part in line for part in parts) for line in lines), lines


HEAD = "antenna,start_utc,end_utc,state,ask_by_utc,give_back_by_utc\n"
NOON, ONE = "2027-03-09T12:00:00Z", "2027-03-09T13:00:00Z"


@pytest.mark.parametrize(("rows", "parts"), [
    (f"Orrin-A,{NOON},{ONE},booked,,\n", ("row 2.state", "booked", "granted")),
    (f"Orrin-A,{ONE},{NOON},asked,,\n", ("row 2", "end_utc is not after start_utc")),
    (f"Orrin-B,{NOON},{ONE},asked,,\n", ("row 2.antenna", "Orrin-B", "did you mean 'Orrin-A'?")),
    (f"Isvarde-A,{NOON},{ONE},asked,,\n", ("row 2.antenna", "Isvarde-A", "not rented", "rented = true")),
    (f"Orrin-A,{NOON},{ONE},asked,,{NOON}\n", ("only granted time can be given back",)),
    (f"Orrin-A,{NOON},{ONE},asked,2027-03-09T09:00:00,\n", ("ask_by_utc", "no zone")),
    (f"Orrin-A,{NOON},{ONE},asked,,\nOrrin-A,{NOON},{ONE},declined,,\n", ("row 3", "overlaps", "row 2", "one state")),
])
def test_bookings(edit: Edit, sample: Path, lines_of: Lines, rows: str, parts: tuple[str, ...]) -> None:
    (sample / "configs" / "bookings.csv").write_text(HEAD + rows, encoding="utf-8")
    edit("configs/daily.toml", 'name = "daily"\n', 'name = "daily"\nbookings = "bookings.csv"\n')
    edit(GROUND, "price_per_minute = 6.0", "rented = true")
    lines = lines_of()
    assert any(all(part in line for part in parts) for line in lines), lines
