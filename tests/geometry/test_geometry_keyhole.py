from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from geometry_cases import ECCENTRIC, INCLINED, LOW, NORTH, START, at_s, spans_s
from hypothesis import given, settings
from hypothesis import strategies as st
from mount_cases import FlatPass, az_el, site_beside_track, x_y
from numpy.typing import NDArray

from passplan.geometry.axes import axis_angles_deg
from passplan.geometry.keyhole import Axis, fast_stretches, lost_stretches
from passplan.geometry.losses import merged
from passplan.geometry.motion import pointing_rates
from passplan.geometry.pointing import look_angles
from passplan.geometry.survey import Ground, find_losses
from passplan.geometry.windows import find_windows
from passplan.inputs.ground import Antenna, Site
from passplan.inputs.mounts import Mount
from passplan.inputs.run import OrbitSource

Floats = NDArray[np.float64]

# 7.5 km/s at 500 km, one degree from the zenith.
NEAR_ZENITH = FlatPass(7.5, 500.0, 500.0 * np.tan(np.radians(1.0)))


def _lost(path: FlatPass, axis: Axis, permitted_deg: float, step_s: float = 0.05) -> list[tuple[float, float]]:
    t = np.arange(-150.0, 150.0, step_s)
    return lost_stretches(t, path.azimuth_deg(t), path.elevation_deg(t), axis, permitted_deg)


def _total(lost: list[tuple[float, float]]) -> float:
    return sum(end - start for start, end in lost)


@pytest.mark.parametrize("rate_deg_s", [2.0, 5.0, 10.0])
@pytest.mark.parametrize("permitted_deg", [0.02, 0.05, 0.1])
def test_the_seconds_lost_are_those_of_the_hand_calculation(rate_deg_s: float, permitted_deg: float) -> None:
    found = _total(_lost(NEAR_ZENITH, Axis(rate_deg_s), permitted_deg))
    assert found == pytest.approx(NEAR_ZENITH.lead_loss_s(rate_deg_s, permitted_deg), abs=1.0)


def test_an_sgp4_pass_at_89_deg_on_a_mount_of_5_deg_s_loses_what_the_hand_calculation_says() -> None:
    site = site_beside_track(LOW, START + np.timedelta64(6, "h"), 1.0)
    antenna = Antenna(name="Dish", site="Under", mount="Turntable", beamwidth_deg=0.4)
    table = find_windows({"Teal": LOW}, {"Dish": antenna}, {"Under": site}, START, START + np.timedelta64(24, "h"))
    table = table.loc[[table["peak_elevation_deg"].idxmax()]].reset_index(drop=True)
    peak_deg = table["peak_elevation_deg"][0]
    assert peak_deg == pytest.approx(89.0, abs=0.1)
    # A quarter of the beamwidth is the tolerance: 0.1 deg.
    ground = Ground({"Dish": antenna}, {"Under": site}, {"Turntable": az_el(lower_rate_deg_s=5.0)}, {"Dish": 0.1})
    losses = find_losses(table, {"Teal": LOW}, ground, START)
    around = table["peak_utc"].to_numpy()
    height_km = look_angles(LOW, site, around).range_km[0]
    # The azimuth rate at the culmination is speed / distance aside.
    aside_km = height_km * np.tan(np.radians(90.0 - peak_deg))
    speed_km_s = float(np.radians(abs(pointing_rates(LOW, site, around).azimuth_deg_s[0])) * aside_km)
    by_hand = FlatPass(speed_km_s, height_km, aside_km).lead_loss_s(5.0, 0.1)
    assert 20.0 < by_hand < 35.0
    assert losses.lost_seconds(1)[0] == pytest.approx(by_hand, abs=1.0)
    assert losses.lost_seconds(1, "command")[0] == losses.lost_seconds(1)[0]


def _least_by_trying_everything(t: Floats, angle: Floats, upper: Floats, rate: float, permitted: float) -> float:
    """Least number of samples lost over all motions on a grid of angles, by dynamic programming."""
    fine = 0.5
    grid = np.arange(angle.min() - 5.0, angle.max() + 5.0, fine)
    reach = round(rate * (t[1] - t[0]) / fine)
    cost = np.zeros(grid.size)
    for k in range(t.size):
        if k:
            padded = np.pad(cost, reach, constant_values=np.inf)
            cost = np.min([padded[j : j + grid.size] for j in range(2 * reach + 1)], axis=0)
        apart = np.radians(np.abs(grid - angle[k]) / 2.0)
        off = 2.0 * np.degrees(np.arcsin(np.cos(np.radians(upper[k])) * np.sin(apart)))
        cost = cost + (off > permitted)
    return float(cost.min() * (t[1] - t[0]))


@pytest.mark.parametrize(("aside_deg", "rate_deg_s"), [(1.0, 5.0), (3.0, 5.0), (2.0, 2.0), (5.0, 4.0)])
def test_no_motion_at_all_loses_less(aside_deg: float, rate_deg_s: float) -> None:
    path = FlatPass(7.5, 500.0, 500.0 * np.tan(np.radians(aside_deg)))
    t = np.arange(-120.0, 120.0, 0.5)
    # The tolerance is wide against the grid of angles.
    least = _least_by_trying_everything(t, path.azimuth_deg(t), path.elevation_deg(t), rate_deg_s, 0.5)
    assert _total(_lost(path, Axis(rate_deg_s), 0.5)) == pytest.approx(least, abs=1.6)


def test_less_acceleration_loses_more_and_a_great_deal_of_it_nothing() -> None:
    totals = [_total(_lost(NEAR_ZENITH, Axis(5.0, strength), 0.1)) for strength in (np.inf, 1e4, 20.0, 2.0, 1.0)]
    assert totals[1] == pytest.approx(totals[0], abs=0.1)
    assert totals[2] < totals[3] < totals[4]


@given(
    aside_deg=st.floats(0.05, 15.0), rate=st.floats(1.0, 12.0), permitted=st.floats(0.02, 0.5),
    strength=st.sampled_from([np.inf, 5.0, 1.0]),
)
@settings(max_examples=25, deadline=None)
def test_lost_stretches_are_in_order_and_only_where_a_slew_is_needed(
    aside_deg: float, rate: float, permitted: float, strength: float
) -> None:
    path = FlatPass(7.5, 500.0, 500.0 * np.tan(np.radians(aside_deg)))
    lost = _lost(path, Axis(rate, strength), permitted, 0.1)
    assert all(start <= end for start, end in lost)
    assert all(a[1] <= b[0] + 1e-6 for a, b in pairwise(lost))
    if np.degrees(7.5 / path.aside_km) < rate and np.isinf(strength):
        assert lost == []
    # A wider tolerance never loses more, but for the grid of starts.
    assert _total(_lost(path, Axis(rate, strength), 2.0 * permitted, 0.1)) <= _total(lost) + 0.3


def test_a_pass_that_ends_during_the_slew_is_lost_to_its_end() -> None:
    t = np.arange(-60.0, 0.5, 0.05)
    lost = lost_stretches(t, NEAR_ZENITH.azimuth_deg(t), NEAR_ZENITH.elevation_deg(t), Axis(5.0), 0.1)
    assert 0.0 < _total(lost) < 10.0


def test_an_x_y_mount_has_its_keyhole_at_the_horizon_and_none_at_the_zenith() -> None:
    cradle = x_y(lower_rate_deg_s=3.0, upper_rate_deg_s=3.0)
    t = np.arange(-100.0, 100.0, 0.1)
    high = axis_angles_deg(cradle, NEAR_ZENITH.azimuth_deg(t), NEAR_ZENITH.elevation_deg(t))
    assert all(fast_stretches(t, angle, Axis(3.0)) == [] for angle in high)
    # Along the horizon past the end of the lower axis, half a degree above it, at 0.3 deg/s.
    low = axis_angles_deg(cradle, 0.3 * t, np.full(t.size, 0.5))
    assert fast_stretches(t, low[0], Axis(3.0)) != []
    assert _total(lost_stretches(t, low[0], low[1], Axis(3.0), 0.1)) > 5.0


def _lost_by_dense_samples(source: OrbitSource, site: Site, mount: Mount, aos: float, los: float) -> float:
    """Seconds lost of a window by the same slews on samples every 20 ms all along it, straight from SGP4."""
    t = np.append(np.arange(aos, los, 0.02), los)
    seen = look_angles(source, site, at_s(t))
    lower, upper = axis_angles_deg(mount, seen.azimuth_deg, seen.elevation_deg)
    lost: list[tuple[float, float]] = []
    for angle, carried, rate, strength in (
        (np.unwrap(lower, period=360.0), upper, mount.lower_rate_deg_s, mount.lower_acceleration_deg_s2),
        (upper, None, mount.upper_rate_deg_s, mount.upper_acceleration_deg_s2),
    ):
        if rate is not None:
            lost += lost_stretches(t, angle, carried, Axis(rate, strength or np.inf), 0.125)
    return _total(list(merged(lost)))


@pytest.mark.parametrize(
    "mount",
    [
        az_el(lower_rate_deg_s=3.0, upper_rate_deg_s=1.0),
        az_el(lower_rate_deg_s=5.0, upper_rate_deg_s=2.0, lower_acceleration_deg_s2=1.0, upper_acceleration_deg_s2=1.0),
        az_el(lower_rate_deg_s=0.8, upper_rate_deg_s=0.6, lower_acceleration_deg_s2=0.3),
        x_y(lower_rate_deg_s=1.0, upper_rate_deg_s=1.5),
        x_y(lower_rate_deg_s=3.0, upper_rate_deg_s=3.0, lower_acceleration_deg_s2=0.5, upper_acceleration_deg_s2=0.5),
    ],
)
def test_looking_closely_at_few_windows_finds_what_dense_samples_of_all_find(mount: Mount) -> None:
    sites = {"North": NORTH}
    for k in range(6):
        beside = site_beside_track(LOW, START + np.timedelta64(2 * k + 1, "h"), 0.05 + 0.7 * k)
        sites[f"Site-{k}"] = beside.model_copy(update={"name": f"Site-{k}"})
    dishes = {name: Antenna(name=name, site=name, mount="Any", min_elevation_deg=2.0) for name in sites}
    orbits = {"Teal": LOW, "Plum": INCLINED, "Long": ECCENTRIC}
    table = find_windows(orbits, dishes, sites, START, START + np.timedelta64(24, "h"))
    table = table[table["duration_s"] < 3_600.0].reset_index(drop=True)
    ground = Ground(dishes, sites, {"Any": mount}, dict.fromkeys(dishes, 0.125))
    found = find_losses(table, orbits, ground, START).lost_seconds(len(table))
    spans = spans_s(table)
    for k in range(len(table)):
        dense = _lost_by_dense_samples(orbits[table["spacecraft"][k]], sites[table["site"][k]], mount, *spans[k])
        assert found[k] == pytest.approx(dense, abs=0.5), table.loc[k, ["spacecraft", "site", "peak_elevation_deg"]]
    assert 0 < np.count_nonzero(found) < len(table)
