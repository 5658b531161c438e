from __future__ import annotations

import numpy as np
import pytest
from astropy import units as u
from astropy.coordinates import ITRS, EarthLocation, get_sun
from astropy.time import Time
from astropy.utils import iers
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.geometry.sun import (
    local_axes,
    pointing_vectors,
    sun_direction,
    sun_look_deg,
    sun_separation_deg,
)
from passplan.inputs.ground import Site

SITE = Site(name="Strand", latitude_deg=52.0, longitude_deg=4.0)


def _angle_deg(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    return np.asarray(np.degrees(np.arccos(np.clip(np.einsum("ij,ij->i", a, b), -1.0, 1.0))))


@pytest.mark.filterwarnings("ignore")
def test_within_a_hundredth_of_a_degree_of_astropy_over_thirty_years() -> None:
    """Astropy: ``get_sun`` (apparent, after ERFA) in ITRS, with its built-in Earth rotation table."""
    times = np.arange("2015-01-01T00:00", "2045-01-01T00:00", 123_457 * 60, dtype="datetime64[s]").astype("M8[ms]")
    offline = iers.conf.set_temp("auto_download", False), iers.conf.set_temp("auto_max_age", None)
    with offline[0], offline[1], iers.conf.set_temp("iers_degraded_accuracy", "ignore"):
        moments = Time(times)
        centre = EarthLocation.from_geocentric(0, 0, 0, u.m)
        place = get_sun(moments).transform_to(ITRS(obstime=moments, location=centre))
        expected = place.cartesian.xyz.value.T
    expected = expected / np.linalg.norm(expected, axis=1)[:, None]
    worst = _angle_deg(sun_direction(times), expected).max()
    assert worst < 0.015


def test_noon_and_midnight_at_greenwich() -> None:
    # Equinox of 2027: 20 March 20:25 UTC. At noon the Sun stands near the meridian, 38 deg high at 52 N.
    azimuth, elevation = sun_look_deg(SITE, np.array(["2027-03-20T11:51", "2027-03-20T23:51"], "datetime64[ms]"))
    assert azimuth[0] == pytest.approx(180.0, abs=0.6)
    assert elevation[0] == pytest.approx(38.0, abs=0.2)
    assert elevation[1] == pytest.approx(-38.0, abs=0.3)


@settings(deadline=None, max_examples=50)
@given(st.floats(-90.0, 90.0), st.floats(-180.0, 180.0), st.floats(0.0, 360.0), st.floats(-90.0, 90.0))
def test_axes_are_a_right_handed_frame(lat: float, lon: float, azimuth: float, elevation: float) -> None:
    axes = local_axes(Site(name="Any", latitude_deg=lat, longitude_deg=lon))
    assert axes @ axes.T == pytest.approx(np.eye(3), abs=1e-12)
    assert np.linalg.det(axes) == pytest.approx(1.0)
    assert np.linalg.norm(pointing_vectors(np.array([azimuth]), np.array([elevation]))) == pytest.approx(1.0)


def test_the_two_ways_to_the_angle_from_the_sun_agree_but_for_its_parallax() -> None:
    times = np.arange("2027-01-01T00:00", "2027-12-31T00:00", 7_001, dtype="datetime64[m]").astype("M8[ms]")
    azimuth, elevation = sun_look_deg(SITE, times)
    assert sun_separation_deg(SITE, times, azimuth, elevation).max() < 1e-6
    by_vectors = _angle_deg(pointing_vectors(azimuth, elevation), sun_direction(times) @ local_axes(SITE).T)
    assert by_vectors.max() < 0.0025
