"""Mounts and passes for the tests of antenna mechanics."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.stations import stations
from passplan.geometry.timescale import utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.ground import Site
from passplan.inputs.mounts import Mount
from passplan.inputs.run import OrbitSource

Floats = NDArray[np.float64]


def az_el(**limits: object) -> Mount:
    """An azimuth-elevation mount named Turntable."""
    return Mount.model_validate({"name": "Turntable", "kind": "az_el", **limits})


def x_y(**limits: object) -> Mount:
    """An X-Y mount whose lower axis lies north-south."""
    return Mount.model_validate({"name": "Cradle", "kind": "x_y", "lower_axis_azimuth_deg": 0.0, **limits})


def site_beside_track(source: OrbitSource, at: np.datetime64, zenith_distance_deg: float) -> Site:
    """A site at sea level from which ``source`` culminates near ``at``, so far from the zenith."""
    (position,), (velocity,) = states_itrf(source, np.atleast_1d(utc_seconds(at)))
    height_km = np.linalg.norm(position) - 6_371.0
    latitude, longitude = _geodetic(position)
    here = stations([Site(name="Under", latitude_deg=latitude, longitude_deg=longitude)])
    e, n = float(here.east[0] @ velocity), float(here.north[0] @ velocity)
    offset_deg = math.degrees(height_km * math.tan(math.radians(zenith_distance_deg)) / 6_371.0)
    across = (n / math.hypot(e, n), -e / math.hypot(e, n))
    return Site(
        name="Under", latitude_deg=latitude + offset_deg * across[1],
        longitude_deg=longitude + offset_deg * across[0] / math.cos(math.radians(latitude)),
    )


def _geodetic(position: Floats) -> tuple[float, float]:
    """Latitude and longitude of a point, by the usual fixed-point iteration."""
    x, y, z = position.tolist()
    ring, square = math.hypot(x, y), 0.00669437999014
    latitude = math.atan2(z, ring * (1.0 - square))
    for _ in range(8):
        normal = 6_378.137 / math.sqrt(1.0 - square * math.sin(latitude) ** 2)
        latitude = math.atan2(z + square * normal * math.sin(latitude), ring)
    return math.degrees(latitude), math.degrees(math.atan2(y, x))


@dataclass(frozen=True)
class FlatPass:
    """A straight level flight past a flat Earth: the geometry of a pass near its culmination, by hand."""

    speed_km_s: float
    height_km: float
    aside_km: float

    def azimuth_deg(self, t: Floats) -> Floats:
        """From the direction of the culmination."""
        return np.asarray(np.degrees(np.arctan2(self.speed_km_s * t, self.aside_km)))

    def elevation_deg(self, t: Floats) -> Floats:
        return np.asarray(np.degrees(np.arctan2(self.height_km, np.hypot(self.speed_km_s * t, self.aside_km))))

    def lead_loss_s(self, rate_deg_s: float, permitted_deg: float) -> float:
        """Seconds lost by the best slew that is back where the target's azimuth rate has fallen to the mount's.

        The azimuth rate is v c / (c^2 + v^2 t^2), c the distance aside; where it has fallen to the mount's the slew
        may be behind by what is permitted at the most. It leaves where the straight line of the mount's rate back
        from there cuts the azimuth curve again. Of all such lines the one that loses least.
        """
        v, c, rate = self.speed_km_s, self.aside_km, math.radians(rate_deg_s)
        meet = math.sqrt(v * c / rate - c * c) / v
        t = np.arange(-400.0, meet, 1e-3)
        room = math.degrees(math.radians(permitted_deg) / math.cos(math.radians(self.elevation_deg(np.array(meet)))))
        cosine = np.cos(np.radians(self.elevation_deg(t)))
        lost = []
        for behind in np.linspace(0.0, room, 5):
            line = self.azimuth_deg(np.array([meet]))[0] - behind - rate_deg_s * (meet - t)
            ahead = line - self.azimuth_deg(t)
            leave = t[np.flatnonzero((ahead <= 0.0) & (t < 0.0))[-1]]
            off = 2.0 * np.degrees(np.arcsin(cosine * np.sin(np.radians(np.abs(ahead) / 2.0))))
            lost.append(1e-3 * np.count_nonzero((t > leave) & (off > permitted_deg)))
        return float(min(lost))
