"""From the frames that orbits come in to the Earth-fixed frame (ITRF, polar motion off, as Skyfield's default)."""

from __future__ import annotations

import numpy as np

from passplan.geometry.timescale import Floats, sidereal_angle_rad, skyfield_time

# Rotation rate of the Earth in UT1, rad/s (IERS Conventions 2010, table 1.1; the value Skyfield uses).
EARTH_RATE_RAD_S = 7.292115e-5
_NUTATION_STEP_S = 1_800.0
INERTIAL_FRAMES = ("ICRF", "GCRF", "EME2000")


def turn_about_z(positions: Floats, cosine: Floats, sine: Floats) -> Floats:
    """Components of vectors (..., 3) in axes turned about z by the angle of ``cosine`` and ``sine``."""
    x, y = positions[..., 0], positions[..., 1]
    turned = np.empty_like(positions)
    np.add(cosine * x, sine * y, out=turned[..., 0])
    np.subtract(cosine * y, sine * x, out=turned[..., 1])
    turned[..., 2] = positions[..., 2]
    return turned


def teme_to_itrf(positions_km: Floats, velocities_km_s: Floats, utc_s: Floats) -> tuple[Floats, Floats]:
    """Earth-fixed positions and velocities (n, 3) of TEME states at ``utc_s`` (n,) (AIAA 2006-6753, appendix C)."""
    angle = sidereal_angle_rad(utc_s)
    cosine, sine = np.cos(angle), np.sin(angle)
    return _with_rotation(turn_about_z(positions_km, cosine, sine), turn_about_z(velocities_km_s, cosine, sine))


def inertial_to_itrf(frame: str, positions_km: Floats, velocities_km_s: Floats, utc_s: Floats) -> tuple[Floats, Floats]:
    """Earth-fixed states of ICRF, GCRF or EME2000 states (IAU 2000A precession and nutation, by Skyfield)."""
    from skyfield.framelib import ICRS_to_J2000

    if frame == "EME2000":
        positions_km, velocities_km_s = positions_km @ ICRS_to_J2000, velocities_km_s @ ICRS_to_J2000
    matrix, equinoxes = _slow_part(utc_s)
    angle = sidereal_angle_rad(utc_s) + equinoxes
    cosine, sine = np.cos(angle), np.sin(angle)
    turned = [
        turn_about_z(np.einsum("nij,nj->ni", matrix, part), cosine, sine) for part in (positions_km, velocities_km_s)
    ]
    return _with_rotation(turned[0], turned[1])


def _slow_part(utc_s: Floats) -> tuple[Floats, Floats]:
    """Bias, precession and nutation (n, 3, 3), and what apparent sidereal angle adds to the mean one, in rad.

    The nutation series is dear and its shortest term takes days, so it is summed every half hour and
    joined by straight lines (an error below a millionth of an arcsecond).
    """
    low, high = float(utc_s.min()), float(utc_s.max())
    nodes = np.linspace(low, high, int((high - low) // _NUTATION_STEP_S) + 2)
    time = skyfield_time(nodes)
    matrices = np.moveaxis(np.asarray(time.M), -1, 0)
    full = 2.0 * np.pi
    apart = np.remainder(np.asarray(time.gast) / 24.0 * full - sidereal_angle_rad(nodes) + np.pi, full) - np.pi
    width = max(nodes[1] - nodes[0], 1e-9)
    interval = np.clip(((utc_s - low) // width).astype(int), 0, nodes.size - 2)
    part = (utc_s - nodes[interval]) / width
    matrix = matrices[interval] + part[:, None, None] * (matrices[interval + 1] - matrices[interval])
    return matrix, apart[interval] + part * (apart[interval + 1] - apart[interval])


def _with_rotation(positions_km: Floats, velocities_km_s: Floats) -> tuple[Floats, Floats]:
    """The velocity seen in the rotating frame: v - omega x r."""
    velocities = velocities_km_s.copy()
    velocities[..., 0] += EARTH_RATE_RAD_S * positions_km[..., 1]
    velocities[..., 1] -= EARTH_RATE_RAD_S * positions_km[..., 0]
    return positions_km, velocities
