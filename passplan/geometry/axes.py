"""From directions in the sky to the angles of a mount's two axes."""

from __future__ import annotations

import numpy as np

from passplan.geometry.timescale import Floats
from passplan.inputs.mounts import Mount


def axis_angles_deg(mount: Mount, azimuth_deg: Floats, elevation_deg: Floats) -> tuple[Floats, Floats]:
    """Angles of the lower and the upper axis [deg] that point at a direction, arrays of any shape.

    ``az_el``: azimuth and elevation themselves. ``x_y``: Y is the angle towards the lower axis, X the angle
    about it, both 0 at the zenith (textbook geometry): with the direction's components u along the lower
    axis, v level and to the right of it, and w up, sin Y = u and tan X = v / w.
    """
    azimuth, elevation = np.asarray(azimuth_deg, float), np.asarray(elevation_deg, float)
    if mount.kind != "x_y":
        return azimuth, elevation
    turn = np.radians(azimuth - (mount.lower_axis_azimuth_deg or 0.0))
    height = np.radians(elevation)
    along, level, up = np.cos(height) * np.cos(turn), np.cos(height) * np.sin(turn), np.sin(height)
    return np.degrees(np.arctan2(level, up)), np.degrees(np.arctan2(along, np.hypot(level, up)))


def off_axis_deg(lower_apart_deg: Floats, upper_deg: Floats) -> Floats:
    """Angle on the sky [deg] that the lower axis is off by, at an angle of the upper axis.

    For both kinds of mount a turn of the lower axis moves the beam along a small circle of radius
    cos(upper); the chord gives sin(off / 2) = cos(upper) |sin(apart / 2)| (spherical geometry).
    """
    chord = np.cos(np.radians(upper_deg)) * np.abs(np.sin(np.radians(lower_apart_deg) / 2.0))
    return np.asarray(np.degrees(2.0 * np.arcsin(np.clip(chord, 0.0, 1.0))))


def lower_width_deg(off_deg: float, upper_deg: Floats) -> Floats:
    """How far [deg] the lower axis may be off for the beam to be off by ``off_deg`` on the sky; 360 for any angle.

    The inverse of :func:`off_axis_deg`.
    """
    room = np.maximum(np.cos(np.radians(upper_deg)), 1e-12)
    chord = np.sin(np.radians(min(off_deg, 180.0)) / 2.0) / room
    return np.where(chord < 1.0, np.degrees(2.0 * np.arcsin(np.minimum(chord, 1.0))), 360.0)


def cone_angle_deg(mount: Mount, azimuth_deg: Floats, elevation_deg: Floats) -> Floats:
    """Angle [deg] between directions and the boresight of a fixed aperture (zenith unless it says otherwise)."""
    boresight = 90.0 if mount.boresight_elevation_deg is None else mount.boresight_elevation_deg
    return separation_deg(azimuth_deg, elevation_deg, mount.boresight_azimuth_deg or 0.0, boresight)


def separation_deg(
    azimuth_deg: Floats | float, elevation_deg: Floats | float, other_azimuth_deg: Floats | float,
    other_elevation_deg: Floats | float,
) -> Floats:
    """Angle [deg] between two directions of one sky (haversine formula, exact at small angles)."""
    a, b = np.radians(elevation_deg), np.radians(other_elevation_deg)
    turn = np.radians(np.asarray(other_azimuth_deg, float) - azimuth_deg)
    half = np.sin((b - a) / 2.0) ** 2 + np.cos(a) * np.cos(b) * np.sin(turn / 2.0) ** 2
    return np.asarray(np.degrees(2.0 * np.arcsin(np.sqrt(np.clip(half, 0.0, 1.0)))))
