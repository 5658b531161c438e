from __future__ import annotations

import numpy as np
import pytest
from geometry_cases import antenna
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from passplan.geometry.masks import mask_of

POINT = st.tuples(st.floats(0.0, 360.0), st.floats(-5.0, 60.0))


def test_without_a_table_the_mask_is_the_same_all_round() -> None:
    mask = mask_of(antenna(min_elevation_deg=7.0))
    assert mask.constant
    assert mask.elevation_deg(np.array([0.0, 123.0, 359.9])).tolist() == [7.0, 7.0, 7.0]


def test_the_table_wraps_at_north_by_a_straight_line() -> None:
    mask = mask_of(antenna(min_elevation_deg=0.0, mask=[(90.0, 10.0), (270.0, 30.0)]))
    found = mask.elevation_deg(np.array([90.0, 180.0, 270.0, 315.0, 0.0, 45.0, 360.0, -45.0]))
    np.testing.assert_allclose(found, [10.0, 20.0, 30.0, 25.0, 20.0, 15.0, 20.0, 25.0])


def test_the_higher_of_table_and_floor_holds_between_points_too() -> None:
    mask = mask_of(antenna(min_elevation_deg=5.0, mask=[(0.0, 0.0), (100.0, 10.0), (200.0, 0.0)]))
    np.testing.assert_allclose(mask.elevation_deg(np.array([0.0, 25.0, 50.0, 60.0, 150.0, 199.0])), [5, 5, 5, 6, 5, 5])
    assert mask.lowest_deg == 5.0
    assert not mask.constant


def test_a_table_below_the_floor_is_a_constant_mask() -> None:
    assert mask_of(antenna(min_elevation_deg=5.0, mask=[(10.0, 1.0), (200.0, 3.0)])).constant


def test_two_points_of_one_azimuth_make_a_step() -> None:
    mask = mask_of(antenna(min_elevation_deg=2.0, mask=[(100.0, 2.0), (100.0, 40.0), (120.0, 40.0), (120.0, 2.0)]))
    found = mask.elevation_deg(np.array([99.999, 100.0, 119.999, 120.001]))
    np.testing.assert_allclose(found, [2.0, 40.0, 40.0, 2.0], atol=1e-6)


def test_one_point_is_a_constant_mask() -> None:
    assert mask_of(antenna(min_elevation_deg=0.0, mask=[(77.0, 12.0)])).elevation_deg(np.array([300.0]))[0] == 12.0


@settings(deadline=None, max_examples=80)
@given(st.lists(POINT, min_size=1, max_size=12, unique_by=lambda point: round(point[0], 3)), st.floats(-5.0, 30.0))
def test_the_mask_is_the_higher_of_the_wrapped_line_and_the_floor(
    points: list[tuple[float, float]], floor_deg: float
) -> None:
    table = sorted(points)
    mask = mask_of(antenna(min_elevation_deg=floor_deg, mask=table))
    azimuth = np.linspace(0.0, 359.9, 333)
    azimuths, elevations = (np.array(column) for column in zip(*table, strict=True))
    assume(not (azimuths[0] < 1e-3 and azimuths[-1] > 360.0 - 1e-3))
    line = np.interp(azimuth, azimuths, elevations, period=360.0)
    np.testing.assert_allclose(mask.elevation_deg(azimuth), np.maximum(line, floor_deg), atol=1e-6)
    assert mask.lowest_deg >= floor_deg
    assert mask.lowest_deg == pytest.approx(np.maximum(elevations.min(), floor_deg))
