"""Mounts, transmit limits, manoeuvres and timing as the user writes them; every fault is one line."""

from __future__ import annotations

import re
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from element_samples import END, START, made

from passplan.inputs.elements.choose import choose, valid_span
from passplan.inputs.load import load_run

Edit = Callable[[str, str, str], Path]
Lines = Callable[[], list[str]]

FLEET, GROUND, DAILY = "sample_fleet/fleet.toml", "sample_fleet/ground.toml", "configs/daily.toml"
MOUNT = """
[[mount]]
name = "spare"
kind = "az_el"
lower_rate_deg_s = 5
upper_rate_deg_s = 3
"""
B = 'name = "Isvarde-B"\n'


def test_mounts_are_read_from_toml_and_from_csv(edit: Edit, sample: Path) -> None:
    edit(GROUND, B, f'{B}mount = "spare"\nbeamwidth_deg = 0.5\n')
    edit(GROUND, "", MOUNT)
    run = load_run(sample / DAILY)
    mount = run.mount_of("Isvarde-B")
    assert mount is not None and (mount.lower_rate_deg_s, mount.moves) == (5.0, True)
    ground = (sample / GROUND).read_text(encoding="utf-8")
    without = re.sub(r"\[\[mount\]\]\n(\w.*\n)+", "", ground)
    (sample / GROUND).write_text(without.replace("operator =", 'mount = "mounts.csv"\noperator ='), encoding="utf-8")
    (sample / "sample_fleet/mounts.csv").write_text(
        "name,kind,lower_rate_deg_s,lower_from_deg,lower_to_deg\nspare,az_el,5,-270,270\nturntable-4m,az_el,6,,\n",
        encoding="utf-8")
    assert load_run(sample / DAILY).mounts["spare"].lower_to_deg == 270.0


@pytest.mark.parametrize(
    ("old", "new", "parts"),
    [
        ("lower_rate_deg_s = 5", "lower_rates_deg_s = 5", ("mount[", "did you mean 'lower_rate_deg_s'?")),
        ("lower_rate_deg_s = 5", "lower_rate_deg_s = -5", ("lower_rate_deg_s", "-5", "above 0")),
        ('kind = "az_el"', 'kind = "azel"', ("kind", "azel", "'az_el', 'x_y' or 'fixed'")),
        ('kind = "az_el"', 'kind = "fixed"', ("means nothing to a mount of kind fixed",)),
        ("upper_rate_deg_s = 3", "cone_deg = 60", ("cone_deg means nothing to a mount of kind az_el",)),
        ("upper_rate_deg_s = 3", "lower_from_deg = 10", ("both lower_from_deg and lower_to_deg",)),
        ("upper_rate_deg_s = 3", "upper_from_deg = 80\nupper_to_deg = 20", ("80", "20", "exclude everything")),
        ("upper_rate_deg_s = 3", "upper_acceleration_deg_s2 = 3", ("needs upper_rate_deg_s",)),
        ("upper_rate_deg_s = 3", "upper_from_deg = -9\nupper_to_deg = -1", ("leaves nothing above the horizon",)),
        ("upper_rate_deg_s = 3", "upper_from_deg = 0\nupper_to_deg = 6", ("Isvarde-B", "reaches only 6 deg", "7")),
        ("beamwidth_deg = 0.5\n", "", ("Isvarde-B: beamwidth_deg", "spare has limited rates")),
        ('mount = "spare"', 'mount = "spar"', ("Isvarde-B: mount", "did you mean 'spare'?")),
        (B, f"{B}transmit_min_elevation_deg = 10\n", ("transmit_min_elevation_deg", "no transmitters")),
        (B, f"{B}beams = 0\n", ("beams", "at least 1")),
        (B, f"{B}beams = 4\n", ("Isvarde-B: beams", "4", "spare turns all its beams together")),
        (f'{B}mount = "spare"', f"{B}beams = 4", ("Isvarde-B: beams", "4", "of kind fixed")),
        (B, f"{B}sun_keep_out_deg = 0\n", ("sun_keep_out_deg", "above 0")),
    ],
)
def test_a_bad_line_on_mounts_is_answered_by_one(
    edit: Edit, lines_of: Lines, old: str, new: str, parts: tuple[str, ...]
) -> None:
    edit(GROUND, B, f'{B}mount = "spare"\nbeamwidth_deg = 0.5\n')
    edit(GROUND, "", MOUNT)
    edit(GROUND, old, new)
    lines = lines_of()
    assert len([line for line in lines if all(part in line for part in parts)]) == 1, lines


@pytest.mark.parametrize(
    ("new", "part"),
    [
        ("transmit_mask = [[0, 10], [400, 5]]", "transmit_mask azimuths run from 0 to 360"),
        ("transmit_mask = [[90, 10], [10, 5]]", "transmit_mask azimuths must not decrease"),
        ("transmit_keep_out = [[10, 20, 40, 30]]", "elevations rise from -5 to 90"),
        ("transmit_keep_out = [[-10, 20, 0, 30]]", "azimuths run from 0 to 360"),
        ("transmit_arc_keep_out_deg = 40", "at most 30"),
    ],
)
def test_a_bad_line_on_sending_is_answered_by_one(edit: Edit, lines_of: Lines, new: str, part: str) -> None:
    edit(GROUND, 'name = "Isvarde-A"\n', f'name = "Isvarde-A"\n{new}\n')
    lines = lines_of()
    assert len(lines) == 1 and part in lines[0], lines


@pytest.mark.parametrize(
    ("new", "part"),
    [
        ('refraction = "on"', "'off' or 'itu_p834'"),
        ("guard_sigmas = -1", "at least 0"),
        ("off_pointing_beamwidths = 0", "above 0"),
        ("timing.low = { at_epoch_km = 1 }", "policy.timing.low.per_day_km: missing"),
        ("timing.lower = { at_epoch_km = 1, per_day_km = 1 }", "unknown key"),
    ],
)
def test_a_bad_line_of_the_policy_is_answered_by_one(edit: Edit, lines_of: Lines, new: str, part: str) -> None:
    edit(DAILY, "[policy]", f"[policy]\n{new}")
    lines = lines_of()
    assert len(lines) == 1 and part in lines[0], lines


def test_growth_is_editable(edit: Edit, sample: Path) -> None:
    edit(DAILY, "[policy]", "[policy]\ntiming.low = { at_epoch_km = 0.2, per_day_km = 0.7 }")
    assert load_run(sample / DAILY).policy.timing.low.per_day_km == 0.7


def test_sets_from_before_a_manoeuvre_are_not_used_after_it() -> None:
    old, new = made(2.0), made(0.5)
    between = START - np.timedelta64(24, "h")
    assert choose([old], START, END, 14.0).chosen is old
    choice = choose([old, new], START, END, 14.0, manoeuvres=[between])
    assert choice.chosen is new and choice.candidates[0].use == "unusable"
    alone = choose([old], START, END, 14.0, manoeuvres=[between])
    assert alone.chosen is None and "from before the manoeuvre of" in alone.reason


def test_a_set_from_after_a_manoeuvre_to_come_is_second_choice() -> None:
    before, after = made(1.0), made(-0.5)
    to_come = START + np.timedelta64(6, "h")
    assert choose([before, after], START, END, 14.0).chosen is after
    assert choose([before, after], START, END, 14.0, manoeuvres=[to_come]).chosen is before
    assert choose([after], START, END, 14.0, manoeuvres=[to_come]).chosen is after
    assert valid_span(before, [to_come])[1] == to_come
    assert valid_span(after, [to_come])[0] == to_come


def test_a_manoeuvre_within_the_horizon_is_warned_of(edit: Edit, sample: Path) -> None:
    edit(FLEET, "catalogue_number = 330101", 'catalogue_number = 330101\nmanoeuvres_utc = ["2027-03-09T12:00:00Z"]')
    run = load_run(sample / DAILY)
    assert any("no contacts after its manoeuvre of 2027-03-09 12:00:00" in line for line in run.warnings)


def test_wind_stow_is_a_closure(edit: Edit, sample: Path) -> None:
    edit("sample_fleet/closures.csv", "", "Ellery-B,2027-03-09T12:00:00Z,2027-03-09T13:00:00Z,wind_stow,gale\n")
    kinds = {closure.antenna: closure.kind for closure in load_run(sample / DAILY).closures}
    assert kinds["Ellery-B"] == "wind_stow"


@pytest.mark.parametrize(
    ("points", "told"),
    [
        ("[[0, 5], [90, 12]]", "mask says nothing from 90 to 0 deg"),
        ("[[80, 5], [100, 20]]", "a straight line from 20 to 5 deg"),
        ("[[80, 5], [81, 20], [99, 20], [100, 5]]", None),
        ("[[0, 5], [180, 12]]", None),
        ("[[120, 8]]", None),
    ],
)
def test_a_mask_table_that_leaves_out_half_of_the_horizon_is_warned_of(
    edit: Edit, sample: Path, points: str, told: str | None
) -> None:
    edit(GROUND, 'name = "Isvarde-A"\n', f'name = "Isvarde-A"\nmask = {points}\n')
    lines = [line for line in load_run(sample / DAILY).warnings if "Isvarde-A: mask" in line]
    assert len(lines) == (told is not None) and all(told in line for line in lines if told)
