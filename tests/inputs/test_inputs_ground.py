"""The sample's config of the house's rules says what sites share, when they are staffed and what rent costs."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path

import numpy as np

from passplan.inputs.load import load_run

RULES = "configs/rules.toml"


def test_the_rules_of_antennas_sites_and_money_are_all_in_the_sample(sample: Path) -> None:
    run = load_run(sample / RULES)
    assert {pool.name for site in run.sites.values() for pool in site.pool} == {"X-band chain"}
    lines = {name: site.backhaul for name, site in run.sites.items() if site.backhaul}
    assert {name: line.buffered for name, line in lines.items()} == {"Isvarde": False, "Tarrow Mesa": True}
    ellery = run.sites["Port Ellery"]
    assert (ellery.contacts_at_once, ellery.staffed[0].opens, ellery.staffed[0].closes) == (1, 300, 1_410)
    assert [name for name, antenna in run.antennas.items() if antenna.setup] == ["Isvarde-B"]
    assert [name for name, antenna in run.antennas.items() if antenna.rented] == ["Orrin-A"]
    assert [row.state for row in run.bookings] == ["granted", "asked", "declined", "open"]
    assert [closure.antenna for closure in run.closures if closure.tentative] == ["Tarrow-A"]
    assert run.policy.budget_per_day == 240.0


def test_the_moment_of_asking_keeps_its_distance_from_a_start_that_is_moved(sample: Path) -> None:
    run = load_run(sample / RULES)
    assert run.start_utc - run.now_utc == np.timedelta64(3, "h")
    moved = load_run(sample / RULES, start=datetime(2027, 3, 10, tzinfo=UTC))
    assert moved.start_utc - moved.now_utc == np.timedelta64(3, "h")
    daily = load_run(sample / "configs/daily.toml")
    assert daily.now_utc == daily.start_utc


def test_a_tentative_event_of_a_calendar_is_a_tentative_closure(sample: Path) -> None:
    calendar = sample / "sample_fleet" / "orrin_bookings.ics"
    text = calendar.read_text(encoding="utf-8")
    calendar.write_text(text.replace("CATEGORIES:BOOKING", "CATEGORIES:BOOKING\nSTATUS:TENTATIVE", 1), encoding="utf-8")
    run = load_run(sample / "configs/daily.toml")
    found = {closure.tentative for closure in run.closures if closure.antenna == "Orrin-A"}
    assert found == {True, False}
