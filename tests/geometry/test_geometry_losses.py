from __future__ import annotations

import numpy as np
import pytest
from geometry_cases import LOW, NORTH, SITES, START, antenna, at_s, windows

from passplan.geometry.losses import Loss, Losses, merged
from passplan.geometry.pointing import look_angles
from passplan.geometry.sun import sun_separation_deg
from passplan.geometry.survey import Ground, find_losses
from passplan.geometry.timescale import utc_seconds
from passplan.geometry.transmit import arc_azimuths_elevations_deg, arc_separation_deg, transmit_clearance
from passplan.geometry.trim import trimmed
from passplan.inputs.ground import Antenna, Site


def _ground(dish: Antenna) -> Ground:
    return Ground({"Dish": dish}, SITES, {}, {"Dish": np.inf})


def _dish(**more: object) -> Antenna:
    return antenna(transmitters=("up",), **more)


def test_losses_of_a_direction_are_merged() -> None:
    rows = (
        Loss(0, 5.0, 9.0, "sun"), Loss(0, 0.0, 6.0, "guard"), Loss(0, 20.0, 21.0, "transmit"),
        Loss(2, 1.0, 2.0, "keyhole"),
    )  # fmt: skip
    losses = Losses(rows)
    assert losses.of(0, "downlink") == ((0.0, 9.0),)
    assert losses.of(0, "command") == ((0.0, 6.0), (20.0, 21.0))
    assert losses.of(1, "downlink") == ()
    assert losses.lost_seconds(3).tolist() == [9.0, 0.0, 1.0]
    assert merged([(3.0, 4.0), (0.0, 1.0), (1.0, 2.0)]) == ((0.0, 2.0), (3.0, 4.0))


def test_nothing_is_lost_where_nothing_limits() -> None:
    dish = antenna()
    assert find_losses(windows(LOW, dish), {"Teal": LOW}, _ground(dish), START).rows == ()


def test_guard_time_is_so_many_sigmas_at_both_ends_but_not_at_the_horizon() -> None:
    dish = antenna()
    middle = windows(LOW, dish)["peak_utc"].iloc[0].to_datetime64()
    table = windows(LOW, dish, start=middle)
    losses = find_losses(table, {"Teal": LOW}, _ground(dish), middle, 2.0)
    first = [loss for loss in losses.rows if loss.window == 0]
    assert table["clipped"][0] == "start" and len(first) == 1
    assert first[0].end_s - first[0].start_s == pytest.approx(2.0 * table["timing_sigma_s"][0])
    assert len([loss for loss in losses.rows if loss.window == 1]) == 2


@pytest.mark.parametrize(
    "limits",
    [
        {"transmit_min_elevation_deg": 15.0},
        {"transmit_mask": ((0.0, 10.0), (180.0, 30.0))},
        {"transmit_keep_out": ((350.0, 60.0, 0.0, 40.0), (180.0, 200.0, 20.0, 60.0))},
        {"transmit_min_elevation_deg": 8.0, "transmit_arc_keep_out_deg": 6.0},
    ],
)
def test_commands_stop_where_the_limits_say_to_within_a_second(limits: dict[str, object]) -> None:
    dish = _dish(**limits)
    table = windows(LOW, dish)
    losses = find_losses(table, {"Teal": LOW}, _ground(dish), START)
    clearance = transmit_clearance(dish, NORTH)
    assert clearance is not None and losses.rows
    for k in range(len(table)):
        aos, los = (float(utc_seconds(table[c].to_numpy())[k] - utc_seconds(START)) for c in ("aos_utc", "los_utc"))
        t = np.arange(aos, los, 1.0)
        seen = look_angles(LOW, NORTH, at_s(t))
        blocked = clearance(seen.azimuth_deg, seen.elevation_deg) < 0.0
        lost = np.zeros(t.size, bool)
        for start, end in losses.of(k, "command"):
            lost |= (t >= start) & (t <= end)
        changes = 2 * len(losses.of(k, "command"))
        assert np.count_nonzero(lost != blocked) <= changes
        assert losses.of(k, "downlink") == ()


def test_a_sector_may_cross_north() -> None:
    clearance = transmit_clearance(_dish(transmit_keep_out=((340.0, 20.0, 0.0, 30.0),)), NORTH)
    assert clearance is not None
    inside = clearance(np.array([350.0, 0.0, 10.0]), np.array([10.0, 10.0, 10.0]))
    outside = clearance(np.array([330.0, 30.0, 0.0, 180.0]), np.array([10.0, 10.0, 40.0, 10.0]))
    assert np.all(inside < 0.0) and np.all(outside > 0.0)
    assert outside[0] == pytest.approx(10.0)


@pytest.mark.parametrize("latitude_deg", [0.0, 35.0, -60.0])
def test_the_geostationary_arc_is_where_textbooks_put_it(latitude_deg: float) -> None:
    # Elevation at the longitude of the site: arctan((cos(lat) - R/r) / sin(lat)), spherical Earth; textbook.
    site = Site(name="Hill", latitude_deg=latitude_deg, longitude_deg=20.0)
    azimuth, elevation = arc_azimuths_elevations_deg(site)
    lat = np.radians(abs(latitude_deg))
    textbook = np.degrees(np.arctan2(np.cos(lat) - 6_378.137 / 42_164.17, np.sin(lat)))
    assert elevation.max() == pytest.approx(textbook, abs=0.25)
    if latitude_deg:
        assert azimuth[np.argmax(elevation)] == pytest.approx(180.0 if latitude_deg > 0.0 else 0.0, abs=1.0)
    np.testing.assert_allclose(arc_separation_deg(site, azimuth, elevation), 0.0, atol=1e-5)
    # Straight above the highest point; over the equator the arc itself goes on there.
    top = np.array([elevation.argmax()])
    above = arc_separation_deg(site, azimuth[top], elevation[top] + 5.0)
    assert above[0] == pytest.approx(5.0 if latitude_deg else 0.0, abs=0.01)


def test_no_part_of_the_arc_is_up_at_the_pole() -> None:
    pole = Site(name="Pole", latitude_deg=89.0, longitude_deg=0.0)
    assert np.isinf(arc_separation_deg(pole, np.array([180.0]), np.array([5.0]))[0])


def test_sun_blinded_intervals_are_those_near_the_sun() -> None:
    dish = antenna(sun_keep_out_deg=15.0)
    table = windows(LOW, dish)
    losses = find_losses(table, {"Teal": LOW}, _ground(dish), START)
    assert losses.rows and all(loss.cause == "sun" for loss in losses.rows)
    long = [loss for loss in losses.rows if loss.end_s - loss.start_s > 4.0]
    inner = np.array([[loss.start_s + 1.0, loss.end_s - 1.0] for loss in long])
    outer = np.array([loss.start_s for loss in losses.rows])
    for seconds, side in ((inner.ravel(), True), (outer - 1.0, False)):
        times = at_s(seconds)
        seen = look_angles(LOW, NORTH, times)
        apart = sun_separation_deg(NORTH, times, seen.azimuth_deg, seen.elevation_deg)
        up = seen.elevation_deg > 5.0
        assert np.all((apart < 15.05) == side) or not side
        assert side or np.all(apart[up] > 14.95)
    assert losses.lost_seconds(len(table), "command").sum() == 0.0


def test_trimming_keeps_rows_true() -> None:
    table = windows(LOW, antenna())
    aos, los = (utc_seconds(table[c].to_numpy()) for c in ("aos_utc", "los_utc"))
    peak = utc_seconds(table["peak_utc"].to_numpy())
    ends = los.copy()
    ends[0] = peak[0] - 30.0
    ends[1] = aos[1] - 1.0
    cut = trimmed(table, aos, ends, {"Teal": LOW}, SITES)
    assert len(cut) == len(table) - 1
    assert cut["los_utc"][0] == cut["peak_utc"][0]
    seen = look_angles(LOW, NORTH, cut["los_utc"].to_numpy()[:1])
    assert cut["peak_elevation_deg"][0] == pytest.approx(seen.elevation_deg[0], abs=1e-6)
    assert cut["min_range_km"][0] == pytest.approx(seen.range_km[0], abs=1e-6)
    assert cut["los_azimuth_deg"][0] == pytest.approx(seen.azimuth_deg[0], abs=1e-6)
    assert cut["duration_s"][0] == pytest.approx(ends[0] - aos[0], abs=2e-3)
    assert trimmed(table, aos, los, {"Teal": LOW}, SITES) is table
