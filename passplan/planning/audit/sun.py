"""Where the Sun stands, by a formula of the audit's own."""

from __future__ import annotations

import numpy as np

from passplan.inputs.ground import Site
from passplan.planning.audit.sky import Floats, Sight, instants_of

# What the plan's and the audit's Sun and interpolation may differ by.
_SLACK_DEG = 0.05


def separations_deg(site: Site, start_utc: np.datetime64, seen: Sight) -> tuple[Floats, Floats]:
    """The least and the greatest angle to the Sun [deg] that the plan may have counted at each instant.

    The plan takes the nearest approach within one of its samples before and after; so the least is that
    of two of the audit's instants on both sides, the greatest that of the way to the next on both sides.
    """
    away = _pointing(seen.azimuth_deg, seen.elevation_deg) - _sun(site, start_utc, seen.time_s)
    up = _pointing(seen.azimuth_deg, seen.elevation_deg)[2] - away[2] > 0.0
    near = np.full((5, seen.time_s.size), 180.0)
    # The way from each instant to the next, in forty small steps.
    for share in np.linspace(0.0, 1.0, 41):
        between = np.linalg.norm(away[:, :-1] * (1.0 - share) + away[:, 1:] * share, axis=0)
        angle = np.degrees(2.0 * np.arcsin(np.clip(between / 2.0, 0.0, 1.0)))
        near[0, :-1] = np.minimum(near[0, :-1], angle)
    near[1, 1:], near[2, 2:], near[3, :-1] = near[0, :-1], near[0, :-2], near[0, 1:]
    own = np.degrees(2.0 * np.arcsin(np.clip(np.linalg.norm(away, axis=0) / 2.0, 0.0, 1.0)))
    least, greatest = np.min(near, axis=0), np.minimum(own, np.minimum(near[0], near[1]))
    return (
        np.where(up, np.maximum(np.minimum(least, own) - _SLACK_DEG, 0.0), 180.0),
        np.where(up, greatest + _SLACK_DEG, 180.0),
    )


def toward_sun(start_utc: np.datetime64, time_s: Floats) -> Floats:
    """Earth-fixed unit vectors from the Earth to the Sun, shape (3, n)."""
    right_ascension, declination, sidereal = _sun_angles(start_utc, time_s)
    east = right_ascension - sidereal
    return np.array([
        np.cos(declination) * np.cos(east), np.cos(declination) * np.sin(east), np.sin(declination)])


def _sun(site: Site, start_utc: np.datetime64, time_s: Floats) -> Floats:
    """Unit vectors (east, north, up), shape (3, n)."""
    right_ascension, declination, sidereal = _sun_angles(start_utc, time_s)
    hour = sidereal + np.radians(site.longitude_deg) - right_ascension
    latitude = np.radians(site.latitude_deg)
    return np.array([
        -np.cos(declination) * np.sin(hour),
        np.sin(declination) * np.cos(latitude) - np.cos(declination) * np.cos(hour) * np.sin(latitude),
        np.sin(declination) * np.sin(latitude) + np.cos(declination) * np.cos(hour) * np.cos(latitude),
    ])


def _sun_angles(start_utc: np.datetime64, time_s: Floats) -> tuple[Floats, Floats, Floats]:
    """Right ascension, declination and Greenwich sidereal time [rad], each (n,).

    Source: Meeus, Astronomical Algorithms, ch. 25, low accuracy.
    """
    times = instants_of(start_utc, time_s)
    century = (times.tt - 2_451_545.0) / 36_525.0
    anomaly = np.radians(357.52911 + 35_999.05029 * century - 0.0001537 * century**2)
    centre = (
        (1.914602 - 0.004817 * century) * np.sin(anomaly) + (0.019993 - 0.000101 * century) * np.sin(2.0 * anomaly)
        + 0.000289 * np.sin(3.0 * anomaly)
    )
    node = np.radians(125.04 - 1_934.136 * century)
    longitude = np.radians(280.46646 + 36_000.76983 * century + centre - 0.00569 - 0.00478 * np.sin(node))
    tilt = np.radians(23.439291 - 0.0130042 * century + 0.00256 * np.cos(node))
    right_ascension = np.arctan2(np.cos(tilt) * np.sin(longitude), np.cos(longitude))
    declination = np.arcsin(np.sin(tilt) * np.sin(longitude))
    return right_ascension, declination, np.asarray(np.radians(times.gast * 15.0))


def _pointing(azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
    azimuth, elevation = np.radians(azimuth_deg), np.radians(elevation_deg)
    return np.array([
        np.cos(elevation) * np.sin(azimuth), np.cos(elevation) * np.cos(azimuth), np.sin(elevation),
    ])
