"""The geometry floor against other libraries and textbook figures; the source stands beside each."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray
from skyfield.api import EarthSatellite, wgs84

from passplan.geometry.pointing import look_angles
from passplan.geometry.regimes import MU_KM3_S2, semi_major_axis_km
from passplan.geometry.timescale import timescale, utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.geometry.windows import find_windows
from passplan.inputs.elements.mean import MeanElements, element_set
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.ground import Antenna, Site

Floats = NDArray[np.float64]

START = np.datetime64("2021-09-18T00:00:00", "ms")
END = START + np.timedelta64(24, "h")
SITE = Site(name="Fell", latitude_deg=52.3, longitude_deg=-3.2, height_m=420.0)


def _orbit(rev_per_day: float, eccentricity: float, inclination_deg: float, perigee_deg: float = 40.0) -> ElementSet:
    """An invented object; epoch 2021-09-17T00:00:00 (day 7 930 since 2000)."""
    mean = MeanElements(
        name="PLOVER",
        catalogue_number=90_007,
        international_designator="2021-900A",
        epoch_days=7_930,
        epoch_s=0.0,
        mean_motion_rev_per_day=rev_per_day,
        eccentricity=eccentricity,
        inclination_deg=inclination_deg,
        raan_deg=75.0,
        argument_of_perigee_deg=perigee_deg,
        mean_anomaly_deg=15.0,
        bstar_per_earth_radius=5e-5,
    )
    return element_set(mean, Path("invented.tle"), "line 1")


ORBITS = {
    "low": _orbit(14.9, 0.001, 98.1),
    "lower": _orbit(15.7, 0.003, 51.6),
    "medium": _orbit(2.0057, 0.01, 55.0),
    "eccentric": _orbit(2.006, 0.73, 63.4, 270.0),
    "tilted synchronous": _orbit(1.0027, 0.07, 63.0),
}


def _skyfield_elevation(source: ElementSet) -> Callable[[Floats], Floats]:
    """Elevation (deg) by Skyfield's own ``altaz`` (geometric, no refraction) at seconds after START."""
    sight = EarthSatellite.from_satrec(source.satrec, timescale()) - wgs84.latlon(
        SITE.latitude_deg, SITE.longitude_deg, SITE.height_m
    )

    def elevation(seconds: Floats) -> Floats:
        times = timescale().utc(2021, 9, 18, 0, 0, seconds)
        return np.asarray(sight.at(times).altaz()[0].degrees, float)

    return elevation


def _root(elevation: Callable[[Floats], Floats], level_deg: float, near: Floats) -> Floats:
    """The crossing of ``level_deg`` within half a second of each instant, by bisection; NaN where there is none."""
    low, high = near - 0.5, near + 0.5
    rising = elevation(high) > level_deg
    crosses = rising != (elevation(low) > level_deg)
    for _ in range(20):
        middle = 0.5 * (low + high)
        past = (elevation(middle) > level_deg) == rising
        low, high = np.where(past, low, middle), np.where(past, middle, high)
    return np.where(crosses, 0.5 * (low + high), np.nan)


@pytest.mark.parametrize("mask_deg", [0.0, 5.0, 30.0, 60.0])
@pytest.mark.parametrize("name", ORBITS)
def test_instants_are_the_roots_of_skyfields_elevation(name: str, mask_deg: float) -> None:
    # Skyfield (github.com/skyfielders/python-skyfield): to 1 ms, or 0.0001 deg where a pass only grazes the mask.
    antenna = Antenna(name="Dish", site="Fell", min_elevation_deg=mask_deg)
    table = find_windows({"Plover": ORBITS[name]}, {"Dish": antenna}, {"Fell": SITE}, START, END)
    elevation = _skyfield_elevation(ORBITS[name])
    edges = np.concatenate([(table[c].to_numpy() - START) / np.timedelta64(1, "s") for c in ("aos_utc", "los_utc")])
    inner = edges[(edges > 0.0) & (edges < 86_400.0)]
    if inner.size:
        near = np.abs(_root(elevation, mask_deg, inner) - inner) < 1e-3
        assert np.all(near | (np.abs(elevation(inner) - mask_deg) < 1e-4))
    peaks = ((table["peak_utc"].to_numpy() - START) / np.timedelta64(1, "s")).astype(float)
    if peaks.size:
        np.testing.assert_allclose(table["peak_elevation_deg"], elevation(peaks), atol=1e-3)


@pytest.mark.parametrize("name", ORBITS)
def test_pointing_is_skyfields(name: str) -> None:
    seconds = np.linspace(0.0, 86_400.0, 97)
    times = timescale().utc(2021, 9, 18, 0, 0, seconds)
    place = wgs84.latlon(SITE.latitude_deg, SITE.longitude_deg, SITE.height_m)
    topocentric = (EarthSatellite.from_satrec(ORBITS[name].satrec, timescale()) - place).at(times)
    altitude, azimuth, distance = topocentric.altaz()
    instants = START.astype("datetime64[us]") + np.rint(seconds * 1e6).astype("timedelta64[us]")
    found = look_angles(ORBITS[name], SITE, instants)
    np.testing.assert_allclose(found.elevation_deg, altitude.degrees, atol=1e-6)
    np.testing.assert_allclose(np.cos(np.radians(found.azimuth_deg - azimuth.degrees)), 1.0, atol=1e-12)
    np.testing.assert_allclose(found.range_km, distance.km, atol=1e-4)
    rate = topocentric.frame_latlon_and_rates(place)[5].km_per_s
    np.testing.assert_allclose(found.range_rate_km_s, rate, atol=1e-6)


@pytest.mark.parametrize("name", ORBITS)
def test_pointing_is_astropys_by_its_own_frames(name: str) -> None:
    # astropy: TEME -> ITRS -> AltAz of the offset from the site (so without aberration), pressure 0 (no refraction).
    # Its Earth rotation comes from its own bundled IERS tables, with polar motion: 0.01 deg and 100 m.
    from astropy import units as u
    from astropy.coordinates import ITRS, TEME, AltAz, CartesianRepresentation, EarthLocation
    from astropy.time import Time
    from astropy.utils import iers

    seconds = np.linspace(0.0, 86_400.0, 49)
    with iers.conf.set_temp("auto_download", False):
        time = Time("2021-09-18T00:00:00", scale="utc") + seconds * u.s
        _, positions, _ = ORBITS[name].satrec.sgp4_array(time.utc.jd1, time.utc.jd2)
        fixed = TEME(CartesianRepresentation(positions.T * u.km), obstime=time).transform_to(ITRS(obstime=time))
        here = EarthLocation.from_geodetic(SITE.longitude_deg * u.deg, SITE.latitude_deg * u.deg, SITE.height_m * u.m)
        line = ITRS(fixed.cartesian - here.get_itrs(time).cartesian, obstime=time, location=here)
        sky = line.transform_to(AltAz(obstime=time, location=here, pressure=0.0 * u.hPa))
        altitude, azimuth, distance = sky.alt.deg, sky.az.deg, sky.distance.to_value(u.km)
    instants = START.astype("datetime64[us]") + np.rint(seconds * 1e6).astype("timedelta64[us]")
    found = look_angles(ORBITS[name], SITE, instants)
    np.testing.assert_allclose(found.elevation_deg, altitude, atol=0.01)
    turn = (found.azimuth_deg - azimuth + 180.0) % 360.0 - 180.0
    np.testing.assert_allclose(turn * np.cos(np.radians(altitude)), 0.0, atol=0.01)
    np.testing.assert_allclose(found.range_km, distance, atol=0.1)


@pytest.mark.parametrize(("radius_km", "speed_km_s"), [(6_878.137, 7.61), (42_164.0, 3.07)])
def test_circular_speed(radius_km: float, speed_km_s: float) -> None:
    # Common practice, no source: v = sqrt(mu / r), 7.61 km/s at 500 km and 3.07 km/s at 42 164 km;
    # mu = 398 600.4418 km3/s2 (WGS 84 / EGM-96).
    assert MU_KM3_S2 == 398_600.4418
    assert math.sqrt(MU_KM3_S2 / radius_km) == pytest.approx(speed_km_s, abs=0.006)


def test_an_sgp4_orbit_has_the_circular_speed() -> None:
    source = _orbit(15.22, 0.0005, 97.4)
    positions, velocities = states_itrf(source, utc_seconds(START) + np.arange(0.0, 6_000.0, 60.0))
    # Back to inertial axes: the Earth turns at 7.292115e-5 rad/s (IERS Conventions 2010, table 1.1).
    inertial = velocities + np.cross([0.0, 0.0, 7.292115e-5], positions)
    speed = np.linalg.norm(inertial, axis=1).mean()
    assert speed == pytest.approx(math.sqrt(MU_KM3_S2 / np.linalg.norm(positions, axis=1).mean()), rel=2e-3)


def test_geosynchronous_radius() -> None:
    # Follows from Kepler's third law: a period of one sidereal day, 86 164.1 s, gives 42 164 km.
    assert semi_major_axis_km(2.0 * math.pi / 86_164.1) == pytest.approx(42_164.0, abs=1.0)


@pytest.mark.parametrize("rev_per_day", [15.2, 14.2, 13.0])
@pytest.mark.parametrize("mask_deg", [0.0, 10.0, 40.0])
def test_the_longest_pass_is_that_of_spherical_geometry(rev_per_day: float, mask_deg: float) -> None:
    # Textbook spherical geometry (common practice, no source): central angle = arccos(R cos(el) / r) - el, duration =
    # 2 x angle / orbital rate. It leaves out the Earth's rotation, which a polar orbit over a site near the pole hardly
    # sees.
    site = Site(name="Pole", latitude_deg=89.0, longitude_deg=0.0)
    antenna = Antenna(name="Dish", site="Pole", min_elevation_deg=mask_deg)
    orbits = {"Plover": _orbit(rev_per_day, 0.0001, 90.0)}
    table = find_windows(orbits, {"Dish": antenna}, {"Pole": site}, START, END)
    motion = 2.0 * math.pi * rev_per_day / 86_400.0
    mask, radius = math.radians(mask_deg), semi_major_axis_km(motion)
    angle = math.acos(6_356.75 * math.cos(mask) / radius) - mask
    assert table["duration_s"].max() == pytest.approx(2.0 * angle / motion, rel=0.03)


def test_the_azimuth_rate_near_the_zenith() -> None:
    # Textbook geometry: d(az)/dt = angular rate across the line of sight / cos(el).
    antenna = Antenna(name="Dish", site="Fell")
    week = START + np.timedelta64(7, "D")
    table = find_windows({"Plover": ORBITS["low"]}, {"Dish": antenna}, {"Fell": SITE}, START, week)
    best = table.loc[table["peak_elevation_deg"].idxmax()]
    assert best["peak_elevation_deg"] > 75.0
    around = best["peak_utc"].to_datetime64() + np.array([-100, 0, 100]).astype("timedelta64[ms]")
    found = look_angles(ORBITS["low"], SITE, around)
    azimuth, elevation = np.radians(found.azimuth_deg), np.radians(found.elevation_deg)
    line = np.stack([np.cos(elevation) * np.sin(azimuth), np.cos(elevation) * np.cos(azimuth), np.sin(elevation)], -1)
    across = math.acos(float(np.clip(line[0] @ line[2], -1.0, 1.0))) / 0.2
    turn = (found.azimuth_deg[2] - found.azimuth_deg[0] + 180.0) % 360.0 - 180.0
    assert abs(math.radians(turn)) / 0.2 == pytest.approx(across / math.cos(elevation[1]), rel=1e-3)
