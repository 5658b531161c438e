from __future__ import annotations

import re

import numpy as np
import pandas as pd
import pytest
from geometry_cases import (
    ECCENTRIC,
    END,
    GEOSYNCHRONOUS,
    LOW,
    MEDIUM,
    NORTH,
    REGIMES,
    SITES,
    START,
    TILTED,
    antenna,
    orbit,
    windows,
)
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.geometry.identity import SLOT_S, inherit_ids, prefixes, slots, window_ids
from passplan.geometry.timescale import utc_seconds
from passplan.geometry.windows import find_windows
from passplan.inputs.ground import Antenna

SECOND, HOUR = np.timedelta64(1, "s"), np.timedelta64(1, "h")
MIDNIGHT_S = float(utc_seconds(np.datetime64("2027-03-10")))


def _ids(culminations_s: list[float]) -> list[str]:
    culmination = np.array(culminations_s)
    pair = np.zeros(culmination.size, np.int64)
    return list(window_ids(["Teal.Dish."], pair, slots(culmination, np.full(culmination.size, 600.0)), culmination))


def test_the_form_of_an_id() -> None:
    table = find_windows({"Teal 1": LOW}, {"North dish": antenna()}, SITES, START, END)
    assert all(re.fullmatch(r"Teal_1\.North_dish\.2703(08|09|10)-(0\d|1[0-7])", name) for name in table["window_id"])


@settings(deadline=None, max_examples=80)
@given(st.floats(-2_000.0, 2_000.0), st.floats(-30.0, 30.0))
def test_a_pass_around_midnight_keeps_its_id_when_it_shifts_by_30_s(offset_s: float, shift_s: float) -> None:
    assert _ids([MIDNIGHT_S + offset_s]) == _ids([MIDNIGHT_S + offset_s + shift_s])


def test_slots_are_centred_on_midnight_and_every_80_minutes_from_there() -> None:
    assert _ids([MIDNIGHT_S - 2_399.0]) == _ids([MIDNIGHT_S + 2_399.0]) == ["Teal.Dish.270310-00"]
    assert _ids([MIDNIGHT_S + SLOT_S]) == ["Teal.Dish.270310-01"]
    assert _ids([MIDNIGHT_S - SLOT_S]) == ["Teal.Dish.270309-17"]


def test_windows_of_one_slot_are_lettered_in_time_order() -> None:
    found = _ids([MIDNIGHT_S + 30.0, MIDNIGHT_S, MIDNIGHT_S + 60.0, MIDNIGHT_S + SLOT_S])
    stem = "Teal.Dish.270310-00"
    assert found == [stem + "b", stem, stem + "c", "Teal.Dish.270310-01"]
    many = _ids([MIDNIGHT_S + 0.1 * i for i in range(40)])
    assert len(set(many)) == 40
    assert many[25] == stem + "z"


def test_names_that_look_alike_get_different_prefixes() -> None:
    table = prefixes(["A b", "A_b", "A"], ["c", "b.c"])
    assert len({prefix for row in table for prefix in row}) == 6
    assert table[0][0] == "A_b.c."
    dotted = prefixes(["A", "A.b"], ["b.c", "c"])
    assert len({prefix for row in dotted for prefix in row}) == 4


def test_a_real_pass_that_shifts_across_midnight_keeps_its_id() -> None:
    # Epoch and node shift together, so that the same track over the ground runs later or earlier.
    midnight = np.datetime64("2027-03-10")
    peaks = (windows(LOW, antenna(), end=START + 48 * HOUR)["peak_utc"].to_numpy() - midnight) / SECOND
    nearest = float(peaks[np.abs(peaks).argmin()])
    names = set()
    for shift_s in (-30.0, -10.0, 0.0, 10.0, 30.0):
        delay_s = shift_s - nearest
        moved = orbit(epoch_s=43_200.0 + delay_s, raan_deg=120.0 + 360.9856 * delay_s / 86_400.0)
        table = windows(moved, antenna(), end=START + 48 * HOUR)
        apart = (table["peak_utc"].to_numpy() - midnight) / SECOND
        middle = int(np.abs(apart).argmin())
        assert apart[middle] == pytest.approx(shift_s, abs=5.0)
        names.add(table["window_id"].iloc[middle])
    assert names == {"Teal.Dish.270310-00"}


def test_a_refreshed_element_set_keeps_the_ids() -> None:
    # A second later along the track, and a little higher.
    fresh = orbit(rev_per_day=15.2001, anomaly_deg=10.06)
    assert windows(fresh, antenna())["window_id"].tolist() == windows(LOW, antenna())["window_id"].tolist()


@pytest.mark.parametrize("name", REGIMES)
def test_a_window_keeps_its_id_wherever_the_horizon_cuts_it(name: str) -> None:
    whole = windows(REGIMES[name], antenna(), start=START - 24 * HOUR, end=END + 24 * HOUR)
    for row in whole.iloc[:4].itertuples():
        aos, los = row.aos_utc.to_datetime64(), row.los_utc.to_datetime64()
        third = (los - aos) / 3
        for start, end in ((aos - HOUR, aos + third), (los - third, los + HOUR), (aos + third, los - third)):
            part = windows(REGIMES[name], antenna(), start=start, end=end)
            held = part[(part["aos_utc"] < los) & (part["los_utc"] > aos)]
            assert held["window_id"].tolist() == [row.window_id]


def test_the_letter_of_a_later_part_stays_when_the_horizon_hides_the_first() -> None:
    # A wall in the middle of the pass; the horizon starts behind it.
    from passplan.geometry.pointing import look_angles

    base = windows(LOW, antenna())
    best = base[base["peak_elevation_deg"].between(25.0, 60.0)].iloc[0]
    azimuth = float(look_angles(LOW, NORTH, np.array([best["peak_utc"].to_datetime64()])).azimuth_deg[0])
    wall = [(0.0, 5.0), (azimuth - 9, 5.0), (azimuth - 9, 85.0), (azimuth + 9, 85.0), (azimuth + 9, 5.0), (360.0, 5.0)]
    parts = windows(LOW, antenna(mask=wall))
    second = parts[parts["window_id"].str.endswith("b")].iloc[0]
    cut = windows(LOW, antenna(mask=wall), start=second["aos_utc"].to_datetime64() + 20 * SECOND)
    assert cut["window_id"].iloc[0] == second["window_id"]


def test_an_object_that_is_always_up_keeps_its_id_under_every_horizon() -> None:
    for hours in (0, 5, 24, 77):
        table = windows(GEOSYNCHRONOUS, antenna(), start=START + hours * HOUR, end=START + (hours + 9) * HOUR)
        assert table["window_id"].tolist() == ["Teal.Dish.always"]
    week = windows(GEOSYNCHRONOUS, antenna(), end=START + 7 * 24 * HOUR)
    assert week["window_id"].tolist() == ["Teal.Dish.always"]


def test_daily_dips_below_the_mask_give_each_day_a_name_of_its_own() -> None:
    week = windows(TILTED, antenna(min_elevation_deg=20.0), end=START + 5 * 24 * HOUR)
    assert len(week) >= 5
    assert week["window_id"].is_unique
    later = windows(TILTED, antenna(min_elevation_deg=20.0), start=START + 60 * HOUR, end=START + 100 * HOUR)
    assert set(later["window_id"]) <= set(week["window_id"])


@settings(deadline=None, max_examples=10)
@given(st.sampled_from(["low", "medium", "eccentric", "tilted"]), st.integers(0, 90_000), st.integers(60, 90_000))
def test_ids_do_not_depend_on_the_horizon(name: str, first_s: int, length_s: int) -> None:
    dish = antenna(mask=[(0.0, 5.0), (80.0, 30.0), (120.0, 5.0), (240.0, 40.0), (300.0, 5.0)])
    whole = windows(REGIMES[name], dish, end=START + 52 * HOUR)
    start = START + first_s * SECOND
    part = windows(REGIMES[name], dish, start=start, end=start + length_s * SECOND)
    inside = part[(part["clipped"] == "none")]
    known = whole.set_index("window_id")["aos_utc"]
    for row in inside.itertuples():
        assert known[row.window_id] == row.aos_utc


def test_ids_are_inherited_from_an_earlier_plan_across_a_slot_edge() -> None:
    early = windows(LOW, antenna())
    # Half an orbit earlier everything has another slot; the earlier names belong to other passes.
    fresh = windows(orbit(anomaly_deg=10.0 + 4.0), antenna())
    forged = early.assign(window_id=[f"Teal.Dish.270309-9{i}" for i in range(len(early))])
    found = inherit_ids(fresh, forged)
    assert found["window_id"].tolist() == forged["window_id"].tolist()
    assert fresh["window_id"].tolist() == early["window_id"].tolist()


def test_inheriting_leaves_no_id_twice() -> None:
    fresh = windows(LOW, antenna())
    # The earlier plan knew the second pass by the name that the first one has now.
    earlier = fresh.iloc[[1]].assign(window_id=fresh["window_id"].iloc[0])
    found = inherit_ids(fresh, earlier)
    assert found["window_id"].is_unique
    assert found["window_id"].iloc[1] == fresh["window_id"].iloc[0]
    assert found["window_id"].iloc[0] == fresh["window_id"].iloc[0] + "b"


def test_inheriting_from_nothing_or_from_others_changes_nothing() -> None:
    fresh = windows(LOW, antenna())
    pd.testing.assert_frame_equal(inherit_ids(fresh, fresh.iloc[:0]), fresh)
    others = fresh.assign(spacecraft="Wren", window_id=[f"Wren.{i}" for i in range(len(fresh))])
    pd.testing.assert_frame_equal(inherit_ids(fresh, others), fresh)


def test_windows_that_only_peak_near_each_other_are_the_same_if_close_enough() -> None:
    fresh = windows(LOW, antenna()).iloc[[0]]
    shift = pd.Timedelta(seconds=float(fresh["duration_s"].iloc[0]) + 60.0)
    moved = fresh.assign(window_id="old", **{c: fresh[c] + shift for c in ("aos_utc", "los_utc", "peak_utc")})
    assert inherit_ids(fresh, moved)["window_id"].tolist() == ["old"]
    assert inherit_ids(fresh, moved, tolerance_s=10.0)["window_id"].tolist() == fresh["window_id"].tolist()


def test_two_antennas_of_a_site_have_their_own_ids() -> None:
    pair = {name: Antenna(name=name, site="North") for name in ("One", "Two")}
    table = find_windows({"Teal": MEDIUM, "Rook": ECCENTRIC}, pair, SITES, START, END)
    assert table["window_id"].is_unique
