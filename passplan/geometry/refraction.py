"""How much the air lifts a spacecraft: radio refraction, for visibility and for pointing alike."""

from __future__ import annotations

import numpy as np

from passplan.geometry.timescale import Floats

# The formula holds up to 10 deg; the cotangent law of a flat atmosphere carries it on to the zenith.
_JOIN_DEG = 10.0
_HIGHEST_KM = 3.0
# Below this, geometric rays do not reach a station at any height of the formula.
_LOWEST_DEG = -1.5
_TURNS = 40


def bending_deg(elevation_deg: Floats, height_km: Floats | float) -> Floats:
    """Apparent less geometric elevation [deg] at geometric ``elevation_deg``, arrays of any shape.

    ITU-R P.834-9, Annex 1, section 4 (mean atmosphere; coefficients from memory, checked against its
    value of about 0.19 deg at 5 deg): 1 / (1.728 + 0.5411 e + 0.03723 e^2 + h (0.1815 + 0.06272 e +
    0.01380 e^2) + h^2 (0.01727 + 0.008288 e)) with the elevation e [deg] and the station's height h [km],
    valid from the horizon to 10 deg and up to 3 km (higher stations are taken as at 3 km). Above 10 deg it
    is scaled on by cot e (common practice, no source). Below -1.5 deg it stays what it is there.
    """
    elevation = np.asarray(elevation_deg, float)
    h = np.clip(height_km, 0.0, _HIGHEST_KM)
    e = np.clip(elevation, _LOWEST_DEG, _JOIN_DEG)
    low = 1.0 / (
        1.728 + 0.5411 * e + 0.03723 * e**2
        + h * (0.1815 + 0.06272 * e + 0.01380 * e**2)
        + h**2 * (0.01727 + 0.008288 * e)
    )  # fmt: skip
    above = np.radians(np.clip(elevation, _JOIN_DEG, 90.0))
    # Exactly 1 at and below the join, 0 at the zenith.
    return np.asarray(low * np.tan(np.radians(_JOIN_DEG)) * np.cos(above) / np.sin(above))


def apparent_deg(elevation_deg: Floats, height_km: Floats | float) -> Floats:
    """Elevation as the antenna sees it, from the geometric one [deg]."""
    return np.asarray(np.asarray(elevation_deg, float) + bending_deg(elevation_deg, height_km))


def geometric_deg(apparent: Floats, height_km: Floats | float) -> Floats:
    """The geometric elevation [deg] that appears at ``apparent`` [deg]; inverse of :func:`apparent_deg`."""
    wanted = np.asarray(apparent, float)
    low, high = wanted - 1.5, wanted.copy()
    # The bending falls with elevation, slower than elevation rises, so the sum is monotone: halve.
    for _ in range(_TURNS):
        middle = 0.5 * (low + high)
        short = apparent_deg(middle, height_km) < wanted
        low, high = np.where(short, middle, low), np.where(short, high, middle)
    return np.asarray(0.5 * (low + high))
