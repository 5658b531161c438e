"""Where the sun stands, well enough to draw it: 0.01 deg in its place, a few hundredths at the station."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from passplan.inputs.ground import Site

Floats = NDArray[np.float64]
_J2000 = np.datetime64("2000-01-01T12:00:00", "ms")


def sun_path(site: Site, times_utc: NDArray[np.datetime64]) -> tuple[Floats, Floats]:
    """Azimuth from true north and geometric elevation of the sun's centre in deg, each of shape (n,).

    Low-precision solar coordinates and mean sidereal time of the Astronomical Almanac, section C
    (from memory); UT1 is taken as UTC, parallax and refraction are left out.
    """
    days = (np.asarray(times_utc).astype("datetime64[ms]") - _J2000) / np.timedelta64(86_400_000, "ms")
    anomaly = np.radians(357.528 + 0.9856003 * days)
    longitude = np.radians(280.460 + 0.9856474 * days + 1.915 * np.sin(anomaly) + 0.020 * np.sin(2.0 * anomaly))
    obliquity = np.radians(23.439 - 4e-7 * days)
    right_ascension = np.arctan2(np.cos(obliquity) * np.sin(longitude), np.cos(longitude))
    declination = np.arcsin(np.sin(obliquity) * np.sin(longitude))
    sidereal = np.radians(280.46061837 + 360.98564736629 * days + site.longitude_deg)
    hour, latitude = sidereal - right_ascension, np.radians(site.latitude_deg)
    up = np.sin(latitude) * np.sin(declination) + np.cos(latitude) * np.cos(declination) * np.cos(hour)
    north = np.cos(latitude) * np.sin(declination) - np.sin(latitude) * np.cos(declination) * np.cos(hour)
    east = -np.cos(declination) * np.sin(hour)
    return np.degrees(np.arctan2(east, north)) % 360.0, np.degrees(np.arcsin(np.clip(up, -1.0, 1.0)))
