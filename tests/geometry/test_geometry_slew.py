from __future__ import annotations

import numpy as np
import pytest
from geometry_cases import LOW, NORTH, SITES, START, antenna, windows
from hypothesis import given, settings
from hypothesis import strategies as st
from mount_cases import az_el, x_y

from passplan.geometry.axes import axis_angles_deg, off_axis_deg, separation_deg
from passplan.geometry.pointing import look_angles
from passplan.geometry.slew import Stance, slew_s, turnaround_s
from passplan.geometry.stances import stances
from passplan.geometry.survey import Ground, cut_by_travel
from passplan.geometry.travel import choose_branch, unwrapped_deg


def _stance(lower: float, upper: float) -> Stance:
    return Stance(np.array([lower]), np.array([upper]))


def test_slew_times_of_the_trapezoid() -> None:
    # By hand: 90 deg at 5 deg/s and 2 deg/s2: 18 s + 2.5 s; 4 deg never reach the rate: 2 sqrt(4 / 2).
    np.testing.assert_allclose(slew_s(np.array([90.0, 4.0, 0.0]), 5.0, 2.0), [20.5, 2.0 * 2.0**0.5, 0.0])
    np.testing.assert_allclose(slew_s(np.array([-90.0]), 5.0, None), [18.0])
    assert slew_s(np.array([90.0]), None, None)[0] == 0.0


def test_a_then_b_is_feasible_and_b_then_a_is_not() -> None:
    mount = az_el(lower_rate_deg_s=3.0, upper_rate_deg_s=3.0, lower_from_deg=-180.0, lower_to_deg=540.0)
    # A: from azimuth 170 over east to 10; B: from 20 over north to -150 (cable angles).
    a_start, a_end, b_start, b_end = (_stance(x, 5.0) for x in (170.0, 10.0, 20.0, -150.0))
    gap_s = 60.0
    assert turnaround_s(mount, a_end, b_start)[0] == pytest.approx(10.0 / 3.0)
    assert turnaround_s(mount, b_end, a_start)[0] == pytest.approx(320.0 / 3.0)
    assert turnaround_s(mount, a_end, b_start)[0] <= gap_s < turnaround_s(mount, b_end, a_start)[0]


def test_without_cables_the_shorter_way_round_is_taken() -> None:
    free = az_el(lower_rate_deg_s=3.0)
    assert turnaround_s(free, _stance(350.0, 5.0), _stance(20.0, 5.0))[0] == pytest.approx(10.0)
    tied = az_el(lower_rate_deg_s=3.0, lower_from_deg=0.0, lower_to_deg=360.0)
    assert turnaround_s(tied, _stance(350.0, 5.0), _stance(20.0, 5.0))[0] == pytest.approx(110.0)
    assert turnaround_s(None, _stance(350.0, 5.0), _stance(20.0, 5.0))[0] == 0.0


def test_the_slower_axis_counts() -> None:
    mount = x_y(lower_rate_deg_s=2.0, upper_rate_deg_s=1.0)
    assert turnaround_s(mount, _stance(0.0, 0.0), _stance(20.0, 15.0))[0] == pytest.approx(15.0)


@given(azimuth=st.floats(0.0, 359.9), elevation=st.floats(0.5, 89.0), turn=st.floats(-3.0, 3.0))
@settings(max_examples=50, deadline=None)
def test_a_turn_of_the_lower_axis_moves_the_beam_by_the_angle_on_the_sky(
    azimuth: float, elevation: float, turn: float
) -> None:
    # For an azimuth axis, by the haversine formula between both directions.
    off = off_axis_deg(np.array([turn]), np.array([elevation]))[0]
    assert off == pytest.approx(separation_deg(azimuth, elevation, azimuth + turn, elevation), abs=1e-9)


def test_x_y_angles_at_places_that_are_easy_to_see() -> None:
    lower, upper = axis_angles_deg(x_y(), np.array([0.0, 90.0, 180.0, 0.0]), np.array([90.0, 30.0, 10.0, 40.0]))
    np.testing.assert_allclose(lower, [0.0, 60.0, 0.0, 0.0], atol=1e-9)
    np.testing.assert_allclose(upper, [0.0, 0.0, -80.0, 50.0], atol=1e-9)


def test_the_branch_is_the_one_with_most_room() -> None:
    mount = az_el(lower_rate_deg_s=3.0, lower_from_deg=-270.0, lower_to_deg=270.0)
    t = np.linspace(0.0, 600.0, 61)
    branch = choose_branch(mount, t, np.linspace(200.0, 340.0, 61))
    assert (branch.turn_deg, branch.whole) == (-360.0, True)
    assert choose_branch(mount, t, np.linspace(10.0, 100.0, 61)).turn_deg == 0.0


def test_a_pass_that_needs_more_travel_than_there_is_is_cut() -> None:
    mount = az_el(lower_rate_deg_s=3.0, lower_from_deg=0.0, lower_to_deg=100.0)
    t = np.linspace(0.0, 600.0, 61)
    # 50 to 170 deg: the limit of 100 deg is met after 250 s.
    branch = choose_branch(mount, t, np.linspace(50.0, 170.0, 61))
    assert (branch.start_s, branch.end_s, branch.whole) == (0.0, pytest.approx(250.0), False)
    gone = choose_branch(mount, t, np.linspace(150.0, 170.0, 61))
    assert gone.start_s == gone.end_s


def test_windows_are_cut_where_the_cables_end() -> None:
    dish = antenna(mount="Turntable", beamwidth_deg=1.0)
    mount = az_el(lower_rate_deg_s=20.0, lower_from_deg=0.0, lower_to_deg=180.0)
    table = windows(LOW, dish)
    ground = Ground({"Dish": dish}, SITES, {"Turntable": mount}, {"Dish": 0.25})
    cut = cut_by_travel(table, {"Teal": LOW}, ground)
    assert 0 < len(cut) <= len(table)
    assert (cut["duration_s"].sum() < table["duration_s"].sum()) and set(cut["window_id"]) <= set(table["window_id"])
    edges = cut[["aos_azimuth_deg", "los_azimuth_deg"]].to_numpy()
    assert np.all((edges >= -0.1) & (edges <= 180.1) | (edges >= 359.9))
    shorter = cut.merge(table, on="window_id", suffixes=("", "_whole"))
    moved = shorter[shorter["los_utc"] < shorter["los_utc_whole"]]
    ends = look_angles(LOW, NORTH, moved["los_utc"].to_numpy()).azimuth_deg
    # An edge lies on an end of the travel, to what straight lines between samples give.
    assert np.all(np.minimum(np.abs(ends - 180.0), np.minimum(ends, 360.0 - ends)) < 0.1)


def test_stances_carry_the_turns_of_the_cables() -> None:
    mount = az_el(lower_rate_deg_s=3.0, lower_from_deg=-360.0, lower_to_deg=0.0)
    table = windows(LOW, antenna(mount="Turntable"))
    aos = ((table["aos_utc"].to_numpy() - START) / np.timedelta64(1, "s")).astype(float)
    found = stances(table, {"Teal": LOW}, SITES, mount, START, np.arange(len(table)), aos)
    assert np.all((found.lower_deg >= -360.5) & (found.lower_deg <= 360.5))
    np.testing.assert_allclose(found.lower_deg % 360.0, table["aos_azimuth_deg"], atol=1e-3)
    np.testing.assert_allclose(found.upper_deg, 5.0, atol=1e-3)


def test_unwrapping_keeps_the_first_azimuth() -> None:
    np.testing.assert_allclose(unwrapped_deg(np.array([350.0, 10.0, 30.0])), [350.0, 370.0, 390.0])
