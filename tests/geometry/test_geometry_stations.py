from __future__ import annotations

import numpy as np
from geometry_cases import NORTH, SOUTH
from skyfield.api import wgs84

from passplan.geometry.stations import stations


def test_positions_and_verticals_are_those_of_the_ellipsoid() -> None:
    found = stations([NORTH, SOUTH])
    for i, site in enumerate((NORTH, SOUTH)):
        place = wgs84.latlon(site.latitude_deg, site.longitude_deg, site.height_m)
        np.testing.assert_allclose(found.positions_km[i], place.itrs_xyz.km, atol=1e-7)
    latitude = np.radians(NORTH.latitude_deg)
    assert np.isclose(found.up[0, 2], np.sin(latitude))


def test_the_axes_are_a_right_handed_frame() -> None:
    found = stations([NORTH, SOUTH])
    np.testing.assert_allclose(np.cross(found.east, found.north), found.up, atol=1e-15)
    np.testing.assert_allclose(np.linalg.norm(found.east, axis=1), 1.0)


def test_a_subset_may_repeat_a_station() -> None:
    found = stations([NORTH, SOUTH]).subset(np.array([1, 1]))
    assert found.positions_km.shape == (2, 3)
    assert np.array_equal(found.up[0], found.up[1])
