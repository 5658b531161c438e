"""How long an axis takes from one angle to another, and an antenna from one contact to the next."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from passplan.geometry.timescale import Floats
from passplan.inputs.mounts import Mount


@dataclass(frozen=True)
class Stance:
    """Angles of both axes [deg], arrays of one shape; a lower axis with cables carries its whole turns."""

    lower_deg: Floats
    upper_deg: Floats


def slew_s(angle_deg: Floats, rate_deg_s: float | None, acceleration_deg_s2: float | None) -> Floats:
    """Least time [s] from rest to rest over ``angle_deg``; 0 for an axis without a rate limit.

    Trapezoidal profile (textbook kinematics): d / V + V / A, or 2 sqrt(d / A) where the angle is too
    short to reach the rate V.
    """
    angle = np.abs(np.asarray(angle_deg, float))
    if rate_deg_s is None:
        return np.zeros_like(angle)
    if acceleration_deg_s2 is None:
        return np.asarray(angle / rate_deg_s)
    ramp = rate_deg_s**2 / acceleration_deg_s2
    cruise = angle / rate_deg_s + rate_deg_s / acceleration_deg_s2
    return np.asarray(np.where(angle >= ramp, cruise, 2.0 * np.sqrt(angle / acceleration_deg_s2)))


def turnaround_s(mount: Mount | None, end: Stance, start: Stance) -> Floats:
    """Least time [s] from the ``end`` of one contact to the ``start`` of the next, both axes turning at once.

    It depends on the order: what counts is where the first contact leaves the axes and where the second
    one wants them, with the turns of the cables. Shapes broadcast. An azimuth without travel limits goes
    the shorter way round; 0 where the mount does not limit at all.
    """
    lower = np.asarray(start.lower_deg, float) - end.lower_deg
    upper = np.asarray(start.upper_deg, float) - end.upper_deg
    if mount is None or mount.kind == "fixed":
        return np.zeros_like(lower)
    if mount.kind == "az_el" and mount.lower_from_deg is None:
        lower = (lower + 180.0) % 360.0 - 180.0
    return np.maximum(
        slew_s(lower, mount.lower_rate_deg_s, mount.lower_acceleration_deg_s2),
        slew_s(upper, mount.upper_rate_deg_s, mount.upper_acceleration_deg_s2),
    )
