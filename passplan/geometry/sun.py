"""Where the Sun stands: its direction in the Earth-fixed frame, and how near a beam points to it."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.axes import separation_deg
from passplan.geometry.frames import turn_about_z
from passplan.geometry.pointing import look
from passplan.geometry.refraction import apparent_deg
from passplan.geometry.stations import stations
from passplan.geometry.timescale import DAY_S, Floats, sidereal_angle_rad, tai_minus_utc_s, utc_seconds
from passplan.inputs.ground import Site

AU_KM = 149_597_870.7
# Noon of 2000-01-01 TT, the epoch of the series, counted as this floor counts UTC.
_EPOCH_S = 43_200.0
_TT_MINUS_TAI_S = 32.184
_CENTURY_S = 36_525.0 * DAY_S
# VSOP87D, Earth, L0: amplitude [1e-8 rad], phase [rad], rate [rad per thousand years].
_PLANETS = np.array([
    (3_497, 2.7441, 5_753.3849), (3_418, 2.8289, 3.5231), (3_136, 3.6277, 77_713.7715), (2_676, 4.4181, 7_860.4194),
    (2_343, 6.1352, 3_930.2097), (1_324, 0.7425, 11_506.7698), (1_273, 2.0371, 529.6910), (1_199, 1.1096, 1_577.3435),
    (990, 5.233, 5_884.927), (902, 2.045, 26.298), (857, 3.508, 398.149), (780, 1.179, 5_223.694),
    (753, 2.533, 5_507.553), (492, 4.205, 775.523),
]).T  # fmt: skip


def sun_direction_itrf(times_utc: NDArray[np.datetime64]) -> Floats:
    """Unit vectors (n, 3) from the Earth's centre to the Sun, Earth-fixed, at ``times_utc`` (n,).

    Within 0.01 deg from 1950 to 2100; see :func:`sun_itrf_km`.
    """
    vectors = sun_itrf_km(np.atleast_1d(utc_seconds(np.asarray(times_utc))))
    return np.asarray(vectors / np.linalg.norm(vectors, axis=1)[:, None])


def sun_direction(times_utc: NDArray[np.datetime64]) -> Floats:
    """As :func:`sun_direction_itrf`; from a site the Sun stands within 0.0025 deg of there (its parallax)."""
    return sun_direction_itrf(times_utc)


def sun_itrf_km(utc_s: Floats) -> Floats:
    """Apparent position of the Sun (n, 3) in km, Earth-fixed, at ``utc_s`` (n,).

    Longitude, radius, obliquity, aberration and the main term of nutation by J. Meeus, Astronomical
    Algorithms, 2nd ed., chapter 25 (low accuracy, 0.01 deg), and the largest periodic terms of the Earth's
    longitude that are not its ellipse from the book's appendix (VSOP87D, P. Bretagnon and G. Francou,
    1988), both from memory: within 0.002 deg of astropy's. Nutation turns the sidereal angle too.
    """
    utc_s = np.asarray(utc_s, float)
    t = (utc_s - _EPOCH_S + tai_minus_utc_s(utc_s) + _TT_MINUS_TAI_S) / _CENTURY_S
    mean = 280.46646 + 36_000.76983 * t + 0.0003032 * t**2
    anomaly = np.radians(357.52911 + 35_999.05029 * t - 0.0001537 * t**2)
    eccentricity = 0.016708634 - 0.000042037 * t - 0.0000001267 * t**2
    centre = (
        (1.914602 - 0.004817 * t - 0.000014 * t**2) * np.sin(anomaly)
        + (0.019993 - 0.000101 * t) * np.sin(2.0 * anomaly)
        + 0.000289 * np.sin(3.0 * anomaly)
    )
    node = np.radians(125.04 - 1_934.136 * t)
    nutation = -0.00478 * np.sin(node)
    longitude = np.radians(mean + centre + _planets_deg(t) + nutation - 0.00569)
    true_anomaly = anomaly + np.radians(centre)
    radius_km = AU_KM * 1.000001018 * (1.0 - eccentricity**2) / (1.0 + eccentricity * np.cos(true_anomaly))
    obliquity = np.radians(23.4392911 - 0.0130042 * t + 0.00256 * np.cos(node))
    equatorial = np.stack(
        [np.cos(longitude), np.sin(longitude) * np.cos(obliquity), np.sin(longitude) * np.sin(obliquity)], axis=-1
    )
    angle = sidereal_angle_rad(utc_s) + np.radians(nutation) * np.cos(obliquity)
    return np.asarray(turn_about_z(equatorial * radius_km[:, None], np.cos(angle), np.sin(angle)))


def _planets_deg(t: Floats) -> Floats:
    """What the planets and the Moon add to the longitude at ``t`` (n,), Julian centuries from 2000."""
    size, phase, rate = _PLANETS[:, :, None]
    return np.asarray(np.degrees(1e-8 * (size * np.cos(phase + rate * t / 10.0)).sum(axis=0)))


def sun_look(site: Site, utc_s: Floats) -> tuple[Floats, Floats]:
    """Azimuth and geometric elevation [deg] of the Sun's centre from ``site`` at ``utc_s`` (n,)."""
    positions = sun_itrf_km(utc_s)
    here = stations([site]).subset(np.zeros(len(positions), np.int64))
    found = look(positions, np.zeros_like(positions), here)
    return found.azimuth_deg, found.elevation_deg


def sun_look_deg(site: Site, times_utc: NDArray[np.datetime64]) -> tuple[Floats, Floats]:
    """As :func:`sun_look`, at UTC times (n,)."""
    return sun_look(site, np.atleast_1d(utc_seconds(np.asarray(times_utc))))


def local_axes(site: Site) -> Floats:
    """East, north and (geodetic) up at a site as rows, in Earth-fixed axes."""
    here = stations([site])
    return np.concatenate([here.east, here.north, here.up])


def pointing_vectors(azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
    """Unit vectors (east, north, up), shape (n, 3), of directions in the sky."""
    azimuth, elevation = np.radians(azimuth_deg), np.radians(elevation_deg)
    flat = np.cos(elevation)
    return np.column_stack((np.sin(azimuth) * flat, np.cos(azimuth) * flat, np.sin(elevation)))


def sun_separation_deg(
    site: Site, times_utc: NDArray[np.datetime64], azimuth_deg: Floats, elevation_deg: Floats
) -> Floats:
    """Angle [deg] between beams towards geometric directions (n,) and the centre of the Sun, seen from ``site``."""
    azimuth, elevation = sun_look(site, np.atleast_1d(utc_seconds(np.asarray(times_utc))))
    return separation_deg(azimuth_deg, elevation_deg, azimuth, elevation)


def sun_separations_deg(
    sites: Mapping[str, Site], site_of: NDArray[np.str_], utc_s: Floats, azimuth_deg: Floats, elevation_deg: Floats,
    *, refraction: bool = False,
) -> Floats:
    """As :func:`sun_separation_deg`, for samples (n,) from many sites, named in ``site_of`` (n,).

    With ``refraction`` the elevations are apparent ones, and the Sun is taken where it appears.
    """
    found = np.full(utc_s.shape, np.nan)
    for name in np.unique(site_of).tolist():
        mine = np.flatnonzero(site_of == name)
        azimuth, elevation = sun_look(sites[name], utc_s[mine])
        if refraction:
            elevation = apparent_deg(elevation, sites[name].height_m / 1e3)
        found[mine] = separation_deg(azimuth_deg[mine], elevation_deg[mine], azimuth, elevation)
    return found
