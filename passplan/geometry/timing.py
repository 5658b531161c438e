"""How well an orbit's timing is known: along-track sigma from the age of the elements, as seconds."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.regimes import MU_KM3_S2, orbit_class, semi_major_axis_km
from passplan.geometry.timescale import DAY_S, Floats, utc_seconds
from passplan.inputs.ephemeris import Ephemeris
from passplan.inputs.policy import Timing
from passplan.inputs.run import OrbitSource

DEFAULT = Timing()


@dataclass(frozen=True)
class TimingModel:
    """Sigma = (``at_epoch_km`` + ``per_day_km`` x age) / ``speed_km_s``, one element per orbit source."""

    at_epoch_km: Floats
    per_day_km: Floats
    speed_km_s: Floats
    epoch_s: Floats

    def sigma_s(self, source: NDArray[np.int64], utc_s: Floats) -> Floats:
        """Standard deviation (s) of the instants of windows at ``utc_s`` (n,) of the sources numbered ``source``."""
        age_days = np.abs(utc_s - self.epoch_s[source]) / DAY_S
        return np.asarray((self.at_epoch_km[source] + self.per_day_km[source] * age_days) / self.speed_km_s[source])


def timing_model(sources: Sequence[OrbitSource], timing: Timing = DEFAULT) -> TimingModel:
    """The model for each source, by its orbit class. Speeds are v = sqrt(mu / a), the mean speed of the orbit."""
    rows = np.array([_row(source, timing) for source in sources], float).reshape(-1, 3)
    never = np.datetime64("2000-01-01", "us")
    epochs = [never if isinstance(source, Ephemeris) else source.epoch_utc for source in sources]
    return TimingModel(rows[:, 0], rows[:, 1], rows[:, 2], utc_seconds(np.array(epochs, "datetime64[us]")))


def off_pointing_deg(windows: pd.DataFrame, orbits: Mapping[str, OrbitSource], timing: Timing = DEFAULT) -> Floats:
    """Sigma [deg] of the pointing of each row of ``windows``, where its spacecraft is nearest.

    The along-track sigma, seen square on from the least range: arctan(sigma / range) (geometry; elsewhere
    along the window it is less).
    """
    model = timing_model(list(orbits.values()), timing)
    source = pd.Index(list(orbits)).get_indexer(pd.Index(windows["spacecraft"]))
    sigma_km = windows["timing_sigma_s"].to_numpy() * model.speed_km_s[source]
    return np.asarray(np.degrees(np.arctan2(sigma_km, windows["min_range_km"].to_numpy())), float)


def _row(source: OrbitSource, timing: Timing) -> tuple[float, float, float]:
    if isinstance(source, Ephemeris):
        radius_km = float(np.linalg.norm(source.segments[0].positions_km[0]))
        return timing.ephemeris_km, 0.0, math.sqrt(MU_KM3_S2 / radius_km)
    motion = source.satrec.no_kozai / 60.0
    model = getattr(timing, orbit_class(motion, source.satrec.ecco))
    return model.at_epoch_km, model.per_day_km, math.sqrt(MU_KM3_S2 / semi_major_axis_km(motion))
