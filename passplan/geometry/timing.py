"""How well an orbit's timing is known: along-track sigma from the age of the elements, as seconds."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from passplan.geometry.regimes import MU_KM3_S2, OrbitClass, orbit_class, semi_major_axis_km
from passplan.geometry.timescale import Floats, utc_seconds
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.run import OrbitSource


@dataclass(frozen=True)
class Growth:
    """Along-track sigma: ``at_epoch_km`` and ``per_day_km`` for each day from the epoch, either way."""

    at_epoch_km: float
    per_day_km: float


# Common practice, no source: about 1 km at epoch for low orbits, growing by 1-3 km a day along track
# (more for the low perigee of eccentric ones, less where there is no drag).
GROWTH: Mapping[OrbitClass, Growth] = {
    "low": Growth(1.0, 2.0),
    "medium": Growth(1.0, 0.5),
    "geosynchronous": Growth(2.0, 1.0),
    "eccentric": Growth(2.0, 3.0),
}
# An operator's ephemeris: common practice, no source.
EPHEMERIS_SIGMA_KM = 0.1


def timing_sigma_s(source: OrbitSource, utc_s: Floats, growth: Mapping[OrbitClass, Growth] = GROWTH) -> Floats:
    """Standard deviation (s) of the instants of windows at ``utc_s`` (n,): along-track sigma over mean speed.

    The mean speed is that of a circular orbit of the same period, v = sqrt(mu / a) (Kepler).
    """
    if not isinstance(source, ElementSet):
        state = source.segments[0]
        radius_km = float(np.linalg.norm(state.positions_km[0]))
        return np.full(utc_s.shape, EPHEMERIS_SIGMA_KM / math.sqrt(MU_KM3_S2 / radius_km))
    motion = source.satrec.no_kozai / 60.0
    model = growth[orbit_class(motion, source.satrec.ecco)]
    age_days = np.abs(utc_s - float(utc_seconds(source.epoch_utc))) / 86_400.0
    speed_km_s = math.sqrt(MU_KM3_S2 / semi_major_axis_km(motion))
    return np.asarray((model.at_epoch_km + model.per_day_km * age_days) / speed_km_s, float)
