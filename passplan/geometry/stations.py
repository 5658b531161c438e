"""Where the antennas stand: site vectors and local axes in the Earth-fixed frame."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.timescale import Floats
from passplan.inputs.ground import Site

# WGS 84 defining parameters (NIMA TR8350.2).
EQUATORIAL_RADIUS_KM = 6_378.137
FLATTENING = 1.0 / 298.257223563


@dataclass(frozen=True)
class Stations:
    """Earth-fixed positions (n, 3) in km and the east, north and up unit vectors (n, 3) of n places.

    Up is the geodetic vertical: the geocentric one would move AOS by up to 36 s.
    """

    positions_km: Floats
    east: Floats
    north: Floats
    up: Floats

    def subset(self, index: NDArray[np.int64]) -> Stations:
        """The stations picked by index, repeats allowed."""
        return Stations(self.positions_km[index], self.east[index], self.north[index], self.up[index])


def stations(sites: Sequence[Site]) -> Stations:
    """Earth-fixed geometry of ``sites`` on the WGS 84 ellipsoid (closed formula, NIMA TR8350.2)."""
    latitude = np.radians([site.latitude_deg for site in sites])
    longitude = np.radians([site.longitude_deg for site in sites])
    height_km = np.array([site.height_m for site in sites], float) / 1e3
    sin_lat, cos_lat = np.sin(latitude), np.cos(latitude)
    sin_lon, cos_lon = np.sin(longitude), np.cos(longitude)
    square = FLATTENING * (2.0 - FLATTENING)
    normal_km = EQUATORIAL_RADIUS_KM / np.sqrt(1.0 - square * sin_lat**2)
    ring_km = (normal_km + height_km) * cos_lat
    axis_km = (normal_km * (1.0 - square) + height_km) * sin_lat
    positions = np.stack([ring_km * cos_lon, ring_km * sin_lon, axis_km], axis=-1)
    east = np.stack([-sin_lon, cos_lon, np.zeros_like(sin_lon)], axis=-1)
    north = np.stack([-sin_lat * cos_lon, -sin_lat * sin_lon, cos_lat], axis=-1)
    up = np.stack([cos_lat * cos_lon, cos_lat * sin_lon, sin_lat], axis=-1)
    return Stations(positions, east, north, up)
