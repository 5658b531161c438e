"""The Sun and eclipses against astropy (its built-in solar ephemeris, from the IAU's SOFA routines)."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from passplan.geometry.eclipse import eclipses
from passplan.geometry.refraction import apparent_deg
from passplan.geometry.sun import sun_direction_itrf, sun_look, sun_separation_deg, sun_separations_deg
from passplan.geometry.timescale import utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.elements.mean import MeanElements, element_set
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.ground import Site

Floats = NDArray[np.float64]


def _sun_km(times: NDArray[np.datetime64]) -> Floats:
    """Apparent Sun, Earth-fixed, by astropy's ``get_sun`` and its own chain from GCRS to ITRS."""
    from astropy import units as u
    from astropy.coordinates import ITRS, get_sun
    from astropy.time import Time
    from astropy.utils import iers

    with iers.conf.set_temp("auto_download", False), iers.conf.set_temp("auto_max_age", None):
        time = Time(times.astype("datetime64[ms]").astype(str), scale="utc")
        return np.asarray(get_sun(time).transform_to(ITRS(obstime=time)).cartesian.xyz.to_value(u.km).T)


def _orbit(rev_per_day: float, inclination_deg: float, raan_deg: float) -> ElementSet:
    mean = MeanElements(
        name="PLOVER", catalogue_number=90_007, international_designator="2021-900A", epoch_days=7_930, epoch_s=0.0,
        mean_motion_rev_per_day=rev_per_day, eccentricity=0.001, inclination_deg=inclination_deg, raan_deg=raan_deg,
        argument_of_perigee_deg=40.0, mean_anomaly_deg=15.0, bstar_per_earth_radius=1e-5,
    )  # fmt: skip
    return element_set(mean, Path("invented.tle"), "line 1")


def test_the_direction_of_the_sun_is_astropys_within_a_hundredth_of_a_degree() -> None:
    times = np.datetime64("2018-01-01T00:00:00", "ms") + (np.arange(150) * 1_975_321).astype("timedelta64[s]")
    reference = _sun_km(times)
    reference /= np.linalg.norm(reference, axis=1)[:, None]
    apart = np.degrees(np.arcsin(np.linalg.norm(np.cross(sun_direction_itrf(times), reference), axis=1)))
    assert apart.max() < 0.01
    assert apart.max() < 0.003


@pytest.mark.parametrize(
    ("rev_per_day", "inclination_deg", "raan_deg"),
    [(15.2, 97.4, 170.0), (2.0057, 55.0, 170.0), (1.0027, 0.1, 10.0)],
)
def test_eclipse_edges_are_astropys_within_a_second(
    rev_per_day: float, inclination_deg: float, raan_deg: float
) -> None:
    # Shadow of a sphere of the Earth's equatorial radius, the Sun's centre by astropy: angle Earth - Sun against the
    # limb, by arccos here.
    source = _orbit(rev_per_day, inclination_deg, raan_deg)
    start = np.datetime64("2021-09-18T00:00:00", "ms")
    found = eclipses(source, start, start + np.timedelta64(24, "h"))
    assert len(found) >= 1
    edges = found.ravel()
    edges = edges[(edges > start) & (edges < start + np.timedelta64(24, "h"))][:20]
    depth = []
    for shift in (-1_000, 1_000):
        times = edges + np.timedelta64(shift, "ms")
        position, _ = states_itrf(source, utc_seconds(times))
        sight = _sun_km(times) - position
        radius = np.linalg.norm(position, axis=1)
        cosine = -np.einsum("ij,ij->i", position, sight) / radius / np.linalg.norm(sight, axis=1)
        depth.append(np.arcsin(6_378.137 / radius) - np.arccos(cosine))
    # Within a second either side the Sun sets or rises for the reference too.
    assert np.all(depth[0] * depth[1] < 0.0)


def test_penumbra_holds_the_centre_and_the_centre_holds_the_umbra() -> None:
    source = _orbit(15.2, 97.4, 170.0)
    start = np.datetime64("2021-09-18T00:00:00", "ms")
    end = start + np.timedelta64(6, "h")
    lengths = [
        np.diff(eclipses(source, start, end, shadow=kind)).sum() / np.timedelta64(1, "s")
        for kind in ("penumbra", "centre", "umbra")
    ]
    assert lengths[0] > lengths[1] > lengths[2] > 0.0


def test_separation_from_the_sun_is_zero_towards_it() -> None:
    site = Site(name="Fell", latitude_deg=52.3, longitude_deg=-3.2, height_m=420.0)
    times = np.datetime64("2021-09-18T00:00:00", "ms") + (np.arange(24) * 3_600).astype("timedelta64[s]")
    from astropy import units as u
    from astropy.coordinates import AltAz, EarthLocation, get_sun
    from astropy.time import Time
    from astropy.utils import iers

    with iers.conf.set_temp("auto_download", False), iers.conf.set_temp("auto_max_age", None):
        time = Time(times.astype(str), scale="utc")
        here = EarthLocation.from_geodetic(site.longitude_deg * u.deg, site.latitude_deg * u.deg, site.height_m * u.m)
        sky = get_sun(time).transform_to(AltAz(obstime=time, location=here, pressure=0.0 * u.hPa))
        azimuth, elevation = sky.az.deg, sky.alt.deg
    assert sun_separation_deg(site, times, azimuth, elevation).max() < 0.01
    assert sun_separation_deg(site, times, azimuth, elevation - 3.0) == pytest.approx(3.0, abs=0.01)


def test_with_refraction_the_sun_stands_where_it_appears() -> None:
    site = Site(name="Isvarde", latitude_deg=69.31, longitude_deg=16.82, height_m=240.0)
    utc_s = utc_seconds(np.datetime64("2027-03-09T06:30:00", "ms") + np.arange(40) * np.timedelta64(60_000, "ms"))
    azimuth, elevation = sun_look(site, utc_s)
    names = np.full(utc_s.size, "Isvarde")
    seen = apparent_deg(elevation, site.height_m / 1e3)
    apart = sun_separations_deg({"Isvarde": site}, names, utc_s, azimuth, seen, refraction=True)
    # Two directions less than a microradian apart have a cosine of 1 in double precision.
    assert np.abs(apart).max() < 1e-4
    lifted = sun_separations_deg({"Isvarde": site}, names, utc_s, azimuth, seen)
    np.testing.assert_allclose(lifted, seen - elevation, atol=1e-4)
    assert lifted.max() > 0.1
