from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from geometry_cases import ECCENTRIC, GEOSYNCHRONOUS, LOW, NORTH, REGIMES, antenna, at_s, spans_s, windows
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.geometry.masks import mask_of
from passplan.geometry.pointing import look_angles
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.ground import Antenna

HILLS = ((0.0, 8.0), (45.0, 12.0), (100.0, 3.0), (170.0, 20.0), (200.0, 5.0), (290.0, 15.0))


def _notch(azimuth_deg: float, half_deg: float, height_deg: float = 85.0) -> list[tuple[float, float]]:
    """A wall ``height_deg`` high around an azimuth that is more than ``half_deg`` from north."""
    low, high = azimuth_deg - half_deg, azimuth_deg + half_deg
    return [(0.0, 5.0), (low, 5.0), (low, height_deg), (high, height_deg), (high, 5.0), (360.0, 5.0)]


def _visible(source: ElementSet, dish: Antenna, seconds: np.ndarray) -> np.ndarray:
    found = look_angles(source, NORTH, at_s(seconds))
    return np.asarray(found.elevation_deg > mask_of(dish).elevation_deg(found.azimuth_deg))


def check_agrees_with_samples(source: ElementSet, dish: Antenna, step_s: float) -> pd.DataFrame:
    """Windows of the table hold every visible sample and no other, but for one step at each edge."""
    table = windows(source, dish)
    seconds = np.arange(0.0, 86_400.0, step_s)
    inside = np.zeros(seconds.size, bool)
    near = np.zeros(seconds.size, bool)
    for aos, los in spans_s(table).tolist():
        inside |= (seconds >= aos) & (seconds < los)
        near |= (np.abs(seconds - aos) < 2e-3) | (np.abs(seconds - los) < 2e-3)
    assert np.array_equal(inside[~near], _visible(source, dish, seconds)[~near])
    return table


def _best_pass() -> pd.Series:
    table = windows(LOW, antenna())
    return table[(table["peak_elevation_deg"] > 25.0) & (table["peak_elevation_deg"] < 60.0)].iloc[0]


def _azimuth_at_peak() -> float:
    peak = np.array([_best_pass()["peak_utc"].to_datetime64()])
    return float(look_angles(LOW, NORTH, peak).azimuth_deg[0])


def test_a_notch_splits_a_pass_with_edges_to_the_millisecond() -> None:
    whole, azimuth = _best_pass(), _azimuth_at_peak()
    dish = antenna(mask=_notch(azimuth, 10.0))
    parts = windows(LOW, dish)
    parts = parts[(parts["los_utc"] > whole["aos_utc"]) & (parts["aos_utc"] < whole["los_utc"])]
    assert len(parts) == 2
    assert parts["aos_utc"].iloc[0] == whole["aos_utc"]
    assert parts["los_utc"].iloc[1] == whole["los_utc"]
    assert parts["window_id"].tolist() == [whole["window_id"], whole["window_id"] + "b"]
    inner = np.array([parts["los_utc"].iloc[0].to_datetime64(), parts["aos_utc"].iloc[1].to_datetime64()])
    edges = look_angles(LOW, NORTH, inner).azimuth_deg
    rate = np.abs(look_angles(LOW, NORTH, inner + np.timedelta64(1, "s")).azimuth_deg - edges)
    assert (np.abs(np.abs(edges - azimuth) - 10.0) / rate < 2e-3).all()


def test_a_narrow_wall_is_not_stepped_over() -> None:
    dish = antenna(mask=_notch(_azimuth_at_peak(), 0.05))
    assert len(windows(LOW, dish)) > len(windows(LOW, antenna()))
    check_agrees_with_samples(LOW, dish, 1.0)


@pytest.mark.parametrize("name", REGIMES)
def test_a_hilly_mask_agrees_with_samples(name: str) -> None:
    check_agrees_with_samples(REGIMES[name], antenna(min_elevation_deg=4.0, mask=HILLS), 7.0)


@settings(deadline=None, max_examples=12)
@given(
    st.lists(
        st.tuples(st.floats(0.0, 360.0), st.floats(0.0, 80.0)), min_size=2, max_size=10, unique_by=lambda p: round(p[0])
    )
)
def test_any_mask_agrees_with_samples(points: list[tuple[float, float]]) -> None:
    check_agrees_with_samples(LOW, antenna(min_elevation_deg=1.0, mask=sorted(points)), 11.0)


def test_a_mask_given_as_a_flat_table_is_a_constant_mask() -> None:
    flat = windows(LOW, antenna(min_elevation_deg=0.0, mask=[(0.0, 9.0), (120.0, 9.0), (240.0, 9.0)]))
    pd.testing.assert_frame_equal(flat, windows(LOW, antenna(min_elevation_deg=9.0)))


def test_a_wall_before_an_object_that_stands_still_hides_it() -> None:
    here = look_angles(GEOSYNCHRONOUS, NORTH, at_s(np.array([0.0])))
    azimuth = float(here.azimuth_deg[0])
    assert windows(GEOSYNCHRONOUS, antenna(mask=_notch(azimuth, 20.0))).empty
    aside = windows(GEOSYNCHRONOUS, antenna(mask=_notch(azimuth - 60.0, 20.0)))
    assert aside["duration_s"].tolist() == [86_400.0]


def test_a_notch_in_a_pass_of_hours_is_found() -> None:
    azimuth = float(look_angles(ECCENTRIC, NORTH, at_s(np.array([20_000.0]))).azimuth_deg[0])
    table = check_agrees_with_samples(ECCENTRIC, antenna(mask=_notch(min(max(azimuth, 20.0), 340.0), 6.0)), 5.0)
    assert len(table) > len(windows(ECCENTRIC, antenna()))
