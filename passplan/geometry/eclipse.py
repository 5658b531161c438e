"""When the Earth stands between a spacecraft and the Sun."""

from __future__ import annotations

from typing import Literal

import numpy as np

from passplan.geometry.stations import EQUATORIAL_RADIUS_KM
from passplan.geometry.sun import sun_itrf_km
from passplan.geometry.timescale import Floats, datetimes_ms, utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.run import OrbitSource

Shadow = Literal["centre", "penumbra", "umbra"]

# Nominal solar radius, IAU 2015 Resolution B3.
_SUN_RADIUS_KM = 695_700.0
_STEP_S = 20.0
_HALVINGS = 16


def eclipses(
    source: OrbitSource, start_utc: np.datetime64, end_utc: np.datetime64, *, shadow: Shadow = "centre"
) -> np.ndarray:
    """Intervals (n, 2) of ``datetime64[ms]`` within [start, end] in which a spacecraft is in the Earth's shadow.

    ``centre``: the Sun's centre is hidden, the usual choice for power; ``penumbra``: any part of the Sun is;
    ``umbra``: all of it. The Earth is a sphere of its equatorial radius, without air, as reference libraries
    take it (its flattening moves the edges by seconds at high latitudes). Edges are found to a millisecond;
    shadows shorter than 20 s may be missed. Where the orbit source has no answer there is no eclipse.
    """
    start_s, end_s = float(utc_seconds(start_utc)), float(utc_seconds(end_utc))
    times = np.linspace(start_s, end_s, max(int(np.ceil((end_s - start_s) / _STEP_S)) + 1, 2))
    dark = shade_deg(source, times, shadow=shadow) > 0.0
    change = np.flatnonzero(dark[1:] != dark[:-1])
    low, high = times[change].copy(), times[change + 1].copy()
    for _ in range(_HALVINGS if change.size else 0):
        middle = 0.5 * (low + high)
        like_first = (shade_deg(source, middle, shadow=shadow) > 0.0) == dark[change]
        low, high = np.where(like_first, middle, low), np.where(like_first, high, middle)
    edges = 0.5 * (low + high)
    begins = np.concatenate([[start_s] if dark[0] else [], edges[dark[change + 1]]])
    ends = np.concatenate([edges[dark[change]], [end_s] if dark[-1] else []])
    return np.stack([datetimes_ms(begins), datetimes_ms(ends)], axis=-1)


def shade_deg(source: OrbitSource, utc_s: Floats, *, shadow: Shadow = "centre") -> Floats:
    """How deep [deg] the Sun stands below the Earth's limb, seen from a spacecraft at ``utc_s`` (n,).

    Negative in sunlight; NaN where the orbit source has no answer. Textbook geometry: the limb is
    arcsin(R / r) from the Earth's centre.
    """
    positions, _ = states_itrf(source, utc_s)
    sight = sun_itrf_km(utc_s) - positions
    radius, distance = np.linalg.norm(positions, axis=1), np.linalg.norm(sight, axis=1)
    # The angle between the Earth's centre and the Sun, by its tangent: exact at small angles too.
    across = np.linalg.norm(np.cross(positions, sight), axis=1)
    apart = np.degrees(np.arctan2(across, -np.einsum("ij,ij->i", positions, sight)))
    limb = np.degrees(np.arcsin(np.minimum(EQUATORIAL_RADIUS_KM / radius, 1.0)))
    disc = np.degrees(np.arcsin(_SUN_RADIUS_KM / distance))
    return np.asarray(limb - apart + {"centre": 0.0, "penumbra": disc, "umbra": -disc}[shadow])
