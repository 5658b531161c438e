from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from geometry_cases import (
    DECAYING,
    ECCENTRIC,
    END,
    GEOSYNCHRONOUS,
    INCLINED,
    LOW,
    MEDIUM,
    NORTH,
    REGIMES,
    SITES,
    SOUTH,
    START,
    antenna,
    dense_spans_s,
    elevation_deg,
    orbit,
    spans_s,
    windows,
)
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.geometry.sgp4_states import sgp4_span
from passplan.geometry.timescale import utc_seconds
from passplan.geometry.windows import COLUMNS, find_windows
from passplan.inputs.ground import Antenna, Site

SHIFT = st.integers(1, 80_000)
RANDOM_ORBIT = st.builds(
    orbit,
    rev_per_day=st.floats(13.0, 15.9),
    eccentricity=st.floats(0.0, 0.02),
    inclination_deg=st.floats(0.0, 140.0),
    raan_deg=st.floats(0.0, 360.0),
    anomaly_deg=st.floats(0.0, 360.0),
)
RANDOM_SITE = st.builds(
    Site,
    name=st.just("Anywhere"),
    latitude_deg=st.floats(-90.0, 90.0),
    longitude_deg=st.floats(-180.0, 180.0),
    height_m=st.floats(0.0, 3_000.0),
)


def check_matches(found: np.ndarray, expected: np.ndarray) -> None:
    """The same windows to 1 ms, windows of a millisecond or two apart (a grazing pass may round away)."""
    found, expected = (part[part[:, 1] - part[:, 0] > 2e-3] for part in (found, expected))
    assert found.shape == expected.shape
    np.testing.assert_allclose(found, expected, atol=1e-3)


@pytest.mark.parametrize("mask_deg", [0.0, 5.0, 30.0, 60.0, 80.0])
@pytest.mark.parametrize("name", REGIMES)
def test_windows_are_those_of_dense_sampling(name: str, mask_deg: float) -> None:
    found = spans_s(windows(REGIMES[name], antenna(min_elevation_deg=mask_deg)))
    check_matches(found, dense_spans_s(REGIMES[name], NORTH, mask_deg))


def check_random_pair(source, site, mask_deg) -> None:  # type: ignore[no-untyped-def]
    """The windows of one pair are those of dense sampling, to a millisecond or, grazing, to 0.0001 deg."""
    found = spans_s(windows(source, antenna(site, mask_deg), site))
    expected = dense_spans_s(source, site, mask_deg)
    long = [part[part[:, 1] - part[:, 0] > 0.5] for part in (found, expected)]
    assert long[0].shape == long[1].shape
    apart = np.abs(long[0] - long[1])
    off = elevation_deg(source, site, long[0].reshape(-1)).reshape(-1, 2) - mask_deg
    inside = (long[0] > 0.0) & (long[0] < 86_400.0)
    assert np.all((apart < 1e-3) | (inside & (np.abs(off) < 1e-4)))


@settings(deadline=None, max_examples=12)
@given(RANDOM_ORBIT, RANDOM_SITE, st.sampled_from([-2.0, 0.0, 5.0, 30.0, 60.0, 80.0]))
def test_windows_of_random_pairs_are_those_of_dense_sampling(source, site, mask_deg) -> None:  # type: ignore[no-untyped-def]
    check_random_pair(source, site, mask_deg)


def test_a_pass_of_seconds_between_samples_is_found() -> None:
    best = windows(LOW, antenna(min_elevation_deg=0.0)).sort_values("peak_elevation_deg").iloc[-1]
    mask_deg = float(best["peak_elevation_deg"]) - 0.01
    found = windows(LOW, antenna(min_elevation_deg=mask_deg))
    assert len(found) == 1
    assert 0.0 < found["duration_s"].iloc[0] < 10.0
    check_matches(spans_s(found), dense_spans_s(LOW, NORTH, mask_deg))


def test_the_table_has_the_columns_and_types_that_the_floors_above_rely_on() -> None:
    table = find_windows({"Teal": LOW, "Wren": INCLINED}, {"Dish": antenna()}, SITES, START, END)
    empty = find_windows({}, {"Dish": antenna()}, SITES, START, END)
    assert list(table.columns) == list(COLUMNS)
    assert table.dtypes.equals(empty.dtypes)
    assert len(empty) == 0
    assert table["window_id"].is_unique
    assert (table["site"] == "North").all()
    assert table.sort_values(["aos_utc", "antenna", "spacecraft"]).index.equals(table.index)
    np.testing.assert_allclose(table["duration_s"], (table["los_utc"] - table["aos_utc"]).dt.total_seconds())
    assert (table["timing_sigma_s"] > 0.0).all()
    assert (table.loc[table["spacecraft"] == "Teal", "element_epoch_utc"] == LOW.epoch_utc).all()


def test_orbits_that_never_rise_give_an_empty_table() -> None:
    assert windows(GEOSYNCHRONOUS, antenna(min_elevation_deg=80.0)).empty


def test_peaks_ranges_and_azimuths_are_those_of_direct_evaluation() -> None:
    for source in (LOW, MEDIUM, ECCENTRIC):
        table = windows(source, antenna())
        for row, (aos, los) in zip(table.itertuples(), spans_s(table).tolist(), strict=True):
            seconds = np.linspace(aos, los, 4_001)
            level = elevation_deg(source, NORTH, seconds)
            step = (los - aos) / 4_000.0
            peak = (row.peak_utc.to_datetime64() - START) / np.timedelta64(1, "s")
            assert row.peak_elevation_deg == pytest.approx(level.max(), abs=1e-3)
            assert abs(peak - seconds[level.argmax()]) < 2.0 * step


def test_windows_are_half_open_and_stay_inside_the_horizon() -> None:
    table = windows(LOW, antenna())
    first = table.iloc[0]
    before = windows(LOW, antenna(), end=first["aos_utc"].to_datetime64())
    assert before.empty
    after = windows(LOW, antenna(), start=first["los_utc"].to_datetime64())
    assert len(after) == len(table) - 1
    assert (after["aos_utc"] >= first["los_utc"]).all()


def test_the_horizon_cuts_windows_and_says_so() -> None:
    whole = windows(LOW, antenna()).iloc[1]
    aos, los = whole["aos_utc"].to_datetime64(), whole["los_utc"].to_datetime64()
    minute = np.timedelta64(60, "s")
    cases = {
        "none": (aos - minute, los + minute),
        "start": (aos + minute, los + minute),
        "end": (aos - minute, los - minute),
        "both": (aos + minute, los - minute),
    }
    for clipped, (start, end) in cases.items():
        found = windows(LOW, antenna(), start=start, end=end)
        assert found["clipped"].tolist() == [clipped]
        assert found["aos_utc"].iloc[0] == max(aos, start)
        assert found["los_utc"].iloc[0] == min(los, end)


def test_an_object_that_never_sets_is_one_window_cut_by_the_horizon() -> None:
    table = windows(GEOSYNCHRONOUS, antenna())
    assert table["clipped"].tolist() == ["both"]
    assert table["duration_s"].iloc[0] == 86_400.0


def test_an_eccentric_orbit_dips_below_a_high_mask_and_gives_several_windows() -> None:
    # The site turns away from the apogee and back, while the object never sets for hours.
    found = spans_s(windows(ECCENTRIC, antenna(SOUTH, 10.0), SOUTH))
    check_matches(found, dense_spans_s(ECCENTRIC, SOUTH, 10.0))


def test_a_decaying_object_keeps_its_windows_until_it_fails() -> None:
    start, end = START, START + np.timedelta64(5, "D")
    epoch_s, start_s, end_s = (float(utc_seconds(t)) for t in (DECAYING.epoch_utc, start, end))
    _, failure_s = sgp4_span(DECAYING.satrec, epoch_s, start_s, end_s)
    lived_s = failure_s - start_s
    assert 3_600.0 < lived_s < end_s - start_s
    site = Site(name="Track", latitude_deg=0.0, longitude_deg=0.0)
    rows = []
    for longitude in range(-180, 180, 12):
        for latitude in (-40.0, -15.0, 15.0, 40.0):
            place = site.model_copy(update={"longitude_deg": float(longitude), "latitude_deg": latitude})
            rows.append(spans_s(windows(DECAYING, antenna(place, 0.0), place, start, end)))
    spans = np.concatenate(rows)
    assert spans.max() <= lived_s
    # Some site sees the end, to the millisecond below it.
    assert spans.max() == pytest.approx(lived_s, abs=2e-3)


def test_elements_from_after_the_start_are_used_backwards() -> None:
    later = orbit(epoch_day=9_931)
    check_matches(spans_s(windows(later, antenna())), dense_spans_s(later, NORTH, 5.0))


def test_progress_counts_to_the_number_of_spacecraft() -> None:
    calls: list[tuple[int, int]] = []
    find_windows(
        {"Teal": LOW, "Wren": INCLINED, "Rook": ECCENTRIC},
        {"Dish": antenna()},
        SITES,
        START,
        END,
        progress=lambda done, total: calls.append((done, total)),
    )
    assert calls[-1] == (3, 3)
    assert calls == sorted(calls)


def test_many_antennas_give_what_one_alone_gives() -> None:
    names = [f"A{i}" for i in range(5)]
    antennas = {
        name: Antenna(name=name, site=("North", "South")[i % 2], min_elevation_deg=3.0 * i)
        for i, name in enumerate(names)
    }
    orbits = {"Teal": LOW, "Wren": INCLINED, "Rook": ECCENTRIC}
    together = find_windows(orbits, antennas, SITES, START, END)
    alone = pd.concat(
        [find_windows({n: o}, {a: d}, SITES, START, END) for n, o in orbits.items() for a, d in antennas.items()]
    )
    alone = alone.sort_values(["aos_utc", "antenna", "spacecraft"]).reset_index(drop=True)
    pd.testing.assert_frame_equal(together, alone, rtol=1e-9)


@settings(deadline=None, max_examples=25)
@given(RANDOM_ORBIT, RANDOM_SITE, st.floats(-5.0, 85.0))
def test_windows_of_a_pair_are_disjoint_and_ordered(source, site, mask_deg) -> None:  # type: ignore[no-untyped-def]
    table = windows(source, antenna(site, mask_deg), site)
    spans = spans_s(table)
    assert (spans[:, 1] > spans[:, 0]).all()
    assert (spans[1:, 0] > spans[:-1, 1]).all()
    assert (table["peak_elevation_deg"] > mask_deg - 1e-6).all()
    assert table["peak_utc"].between(table["aos_utc"], table["los_utc"]).all()
    assert table["window_id"].is_unique


@settings(deadline=None, max_examples=25)
@given(RANDOM_ORBIT, RANDOM_SITE, st.floats(0.0, 40.0), st.floats(0.0, 40.0))
def test_a_higher_mask_never_lengthens_a_window(source, site, mask_deg, more_deg) -> None:  # type: ignore[no-untyped-def]
    low = spans_s(windows(source, antenna(site, mask_deg), site))
    for aos, los in spans_s(windows(source, antenna(site, mask_deg + more_deg), site)).tolist():
        holder = low[(low[:, 0] <= aos + 1e-3) & (low[:, 1] >= los - 1e-3)]
        assert len(holder) == 1


@settings(deadline=None, max_examples=25)
@given(st.sampled_from(sorted(REGIMES)), SHIFT, SHIFT)
def test_another_horizon_only_clips(name: str, first: int, second: int) -> None:
    low, high = first, min(first + second, 86_400)
    whole = windows(REGIMES[name], antenna())
    start, end = (START + np.timedelta64(s, "s") for s in (low, high))
    part = windows(REGIMES[name], antenna(), start=start, end=end)
    expected = whole[(whole["los_utc"] > start) & (whole["aos_utc"] < end)]
    assert part["window_id"].tolist() == expected["window_id"].tolist()
    assert (part["aos_utc"].to_numpy() == np.maximum(expected["aos_utc"].to_numpy(), start)).all()
    assert (part["los_utc"].to_numpy() == np.minimum(expected["los_utc"].to_numpy(), end)).all()


def test_an_object_known_by_name_only_is_as_good() -> None:
    nameless = replace(LOW, catalogue_number=None)
    pd.testing.assert_frame_equal(windows(nameless, antenna()), windows(LOW, antenna()))
