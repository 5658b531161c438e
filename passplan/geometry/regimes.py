"""How finely an orbit has to be sampled, how far beyond the horizon a pass may go on, and its class."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from sgp4.api import Satrec

OrbitClass = Literal["low", "medium", "geosynchronous", "eccentric"]

MU_KM3_S2 = 398_600.4418
_RADIUS_KM = 6_378.137
# Even steps that divide the day, so that every horizon sees the same grid.
_LADDER_S = (15.0, 30.0, 60.0, 120.0, 240.0, 300.0, 600.0, 900.0, 1_800.0)
_ANGLE_PER_STEP_RAD = 0.37
_STEPS_TO_SINGULARITY = 8.0
_LOW_APOGEE_KM = 2_500.0
# A pass of two days counts as "always up"; half a day more lets its edges be seen.
ALWAYS_S = 2.0 * 86_400.0
_LONG_REACH_S = ALWAYS_S + 43_200.0


@dataclass(frozen=True)
class Regime:
    """Sampling step and reach (how far beyond each end of the horizon to look), both in seconds."""

    step_s: float
    reach_s: float


def regime(mean_motion_rad_s: float, eccentricity: float) -> Regime:
    """The regime of an orbit with this mean motion and eccentricity.

    Two bounds hold the step: the angle swept per step at perigee, n sqrt(1+e)/(1-e)^1.5 (Kepler), and the
    distance from the real time axis to the nearest singularity of Kepler's equation,
    (arcosh(1/e) - sqrt(1-e^2))/n, which is what limits polynomial interpolation of eccentric orbits.
    """
    e = min(max(eccentricity, 1e-6), 0.99)
    perigee_rate = mean_motion_rad_s * math.sqrt(1.0 + e) / (1.0 - e) ** 1.5
    singularity_s = (math.acosh(1.0 / e) - math.sqrt(1.0 - e * e)) / mean_motion_rad_s
    bound = min(_ANGLE_PER_STEP_RAD / perigee_rate, singularity_s / _STEPS_TO_SINGULARITY)
    step = max((s for s in _LADDER_S if s <= bound), default=_LADDER_S[0])
    apogee_km = semi_major_axis_km(mean_motion_rad_s) * (1.0 + e)
    if apogee_km - _RADIUS_KM > _LOW_APOGEE_KM:
        return Regime(step, _LONG_REACH_S)
    # Longest pass above -5 deg: Earth central angle arccos(R cos(el)/r) - el each way (textbook geometry).
    low = math.radians(-5.0)
    half_angle = math.acos(_RADIUS_KM * math.cos(low) / max(apogee_km, _RADIUS_KM + 100.0)) - low
    longest_s = 1.3 * 2.0 * half_angle / mean_motion_rad_s
    return Regime(step, step * math.ceil(max(longest_s, 7.0 * step) / step))


def regime_of(satrec: Satrec) -> Regime:
    """The regime of an element set."""
    return regime(satrec.no_kozai / 60.0, satrec.ecco)


def regime_of_state(position_km: NDArray[np.float64], velocity_km_s: NDArray[np.float64]) -> Regime:
    """The regime of the orbit through an inertial state (3,), (3,), by the energy and angular momentum integrals.

    A state that is not on a closed orbit is taken as that of a very eccentric one.
    """
    radius = float(np.linalg.norm(position_km))
    energy = 0.5 * float(velocity_km_s @ velocity_km_s) - MU_KM3_S2 / radius
    if energy >= 0.0:
        return Regime(_LADDER_S[0], _LONG_REACH_S)
    axis_km = -0.5 * MU_KM3_S2 / energy
    momentum = np.cross(position_km, velocity_km_s)
    eccentricity = math.sqrt(max(0.0, 1.0 - float(momentum @ momentum) / (MU_KM3_S2 * axis_km)))
    return regime(math.sqrt(MU_KM3_S2 / axis_km**3), eccentricity)


def semi_major_axis_km(mean_motion_rad_s: float) -> float:
    """Kepler's third law: a = (mu / n^2)^(1/3)."""
    return float((MU_KM3_S2 / mean_motion_rad_s**2) ** (1.0 / 3.0))


def orbit_class(mean_motion_rad_s: float, eccentricity: float) -> OrbitClass:
    """The usual classes: eccentric from e = 0.25, low up to a period of 128 minutes, geosynchronous within 2 %."""
    if eccentricity >= 0.25:
        return "eccentric"
    period_min = 2.0 * math.pi / mean_motion_rad_s / 60.0
    if period_min <= 128.0:
        return "low"
    return "geosynchronous" if abs(period_min / 1_436.07 - 1.0) <= 0.02 else "medium"
