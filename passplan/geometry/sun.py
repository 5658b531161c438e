"""Where the Sun stands, to about 0.01 deg: enough to know when it is in a beam.

Source: The Astronomical Almanac, section C, "low-precision formulas for the Sun's coordinates" (0.01 deg
from 1950 to 2050), and the mean sidereal time of the IAU 1982 system; UT1 is taken as UTC (at most 0.004 deg),
and the Sun as infinitely far (0.002 deg).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from passplan.inputs.ground import Site

Floats = NDArray[np.float64]

_NOON_2000 = np.datetime64("2000-01-01T12:00:00", "ms")


def sun_direction(times_utc: NDArray[np.datetime64]) -> Floats:
    """Unit vectors towards the Sun in Earth-fixed axes (ITRF), shape (n, 3), at UTC times of shape (n,)."""
    days = (times_utc - _NOON_2000) / np.timedelta64(1, "ms") / 86_400_000.0
    longitude, anomaly = 280.460 + 0.9856474 * days, np.radians(357.528 + 0.9856003 * days)
    ecliptic = np.radians(longitude + 1.915 * np.sin(anomaly) + 0.020 * np.sin(2.0 * anomaly))
    obliquity = np.radians(23.439 - 0.0000004 * days)
    sidereal = np.radians((280.46061837 + 360.98564736629 * days) % 360.0)
    x, y = np.cos(ecliptic), np.cos(obliquity) * np.sin(ecliptic)
    east, north = np.cos(sidereal), np.sin(sidereal)
    return np.column_stack((x * east + y * north, y * east - x * north, np.sin(obliquity) * np.sin(ecliptic)))


def sun_look_deg(site: Site, times_utc: NDArray[np.datetime64]) -> tuple[Floats, Floats]:
    """Azimuth and elevation of the Sun's centre [deg] from a site at UTC times (geometric, no refraction)."""
    local = sun_direction(times_utc) @ local_axes(site).T
    azimuth = np.degrees(np.arctan2(local[:, 0], local[:, 1])) % 360.0
    return azimuth, np.degrees(np.arcsin(np.clip(local[:, 2], -1.0, 1.0)))


def local_axes(site: Site) -> Floats:
    """East, north and (geodetic) up at a site as rows, in Earth-fixed axes."""
    latitude, longitude = np.radians(site.latitude_deg), np.radians(site.longitude_deg)
    sin_lat, cos_lat, sin_lon, cos_lon = np.sin(latitude), np.cos(latitude), np.sin(longitude), np.cos(longitude)
    return np.array([
        [-sin_lon, cos_lon, 0.0],
        [-sin_lat * cos_lon, -sin_lat * sin_lon, cos_lat],
        [cos_lat * cos_lon, cos_lat * sin_lon, sin_lat],
    ])


def pointing_vectors(azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
    """Unit vectors (east, north, up), shape (n, 3), of directions in the sky."""
    azimuth, elevation = np.radians(azimuth_deg), np.radians(elevation_deg)
    flat = np.cos(elevation)
    return np.column_stack((np.sin(azimuth) * flat, np.cos(azimuth) * flat, np.sin(elevation)))
