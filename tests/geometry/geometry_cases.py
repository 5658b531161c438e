"""Invented orbits and places for the tests of the geometry floor."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.pointing import look_angles
from passplan.geometry.windows import find_windows
from passplan.inputs.elements.mean import MeanElements, element_set
from passplan.inputs.elements.model import ElementSet
from passplan.inputs.ground import Antenna, Site
from passplan.inputs.run import OrbitSource

START = np.datetime64("2027-03-09T00:00:00", "ms")
END = START + np.timedelta64(24, "h")


def orbit(
    rev_per_day: float = 15.2,
    eccentricity: float = 0.001,
    inclination_deg: float = 97.4,
    raan_deg: float = 120.0,
    perigee_deg: float = 90.0,
    anomaly_deg: float = 10.0,
    bstar: float = 1e-4,
    epoch_day: int = 9_928,
    epoch_s: float = 43_200.0,
) -> ElementSet:
    """An element set of 2027-03-08 (day 9 928 since 2000) at noon unless told otherwise."""
    mean = MeanElements(
        name="TEAL",
        catalogue_number=90_001,
        international_designator="2027-001A",
        epoch_days=epoch_day,
        epoch_s=epoch_s,
        mean_motion_rev_per_day=rev_per_day,
        eccentricity=eccentricity,
        inclination_deg=inclination_deg,
        raan_deg=raan_deg,
        argument_of_perigee_deg=perigee_deg,
        mean_anomaly_deg=anomaly_deg,
        bstar_per_earth_radius=bstar,
    )
    return element_set(mean, Path("invented.tle"), "line 1")


LOW = orbit()
INCLINED = orbit(rev_per_day=15.6, inclination_deg=51.6, raan_deg=40.0, anomaly_deg=200.0)
MEDIUM = orbit(rev_per_day=2.0057, eccentricity=0.005, inclination_deg=55.0, bstar=0.0)
GEOSYNCHRONOUS = orbit(rev_per_day=1.0027, eccentricity=0.0002, inclination_deg=0.05, anomaly_deg=165.0, bstar=0.0)
TILTED = orbit(rev_per_day=1.0027, eccentricity=0.001, inclination_deg=62.0, anomaly_deg=165.0, bstar=0.0)
ECCENTRIC = orbit(rev_per_day=2.006, eccentricity=0.72, inclination_deg=63.4, perigee_deg=270.0, bstar=0.0)
REGIMES = {
    "low": LOW,
    "inclined": INCLINED,
    "medium": MEDIUM,
    "geosynchronous": GEOSYNCHRONOUS,
    "tilted": TILTED,
    "eccentric": ECCENTRIC,
}
# Its drag brings it down within the day.
DECAYING = orbit(rev_per_day=16.3, inclination_deg=51.6, bstar=4e-3)

NORTH = Site(name="North", latitude_deg=67.9, longitude_deg=21.1, height_m=390.0)
SOUTH = Site(name="South", latitude_deg=-35.4, longitude_deg=148.9, height_m=680.0)
SITES = {"North": NORTH, "South": SOUTH}


def antenna(site: Site = NORTH, min_elevation_deg: float = 5.0, **more: object) -> Antenna:
    """An antenna named Dish."""
    return Antenna.model_validate({"name": "Dish", "site": site.name, "min_elevation_deg": min_elevation_deg, **more})


def windows(
    source: OrbitSource, dish: Antenna, site: Site = NORTH, start: np.datetime64 = START, end: np.datetime64 = END
) -> pd.DataFrame:
    """The windows of one spacecraft, Teal, from one antenna."""
    return find_windows({"Teal": source}, {"Dish": dish}, {site.name: site}, start, end)


def spans_s(table: pd.DataFrame, start: np.datetime64 = START) -> NDArray[np.float64]:
    """AOS and LOS (n, 2) in seconds from ``start``."""
    return np.stack([(table[c].to_numpy() - start) / np.timedelta64(1, "s") for c in ("aos_utc", "los_utc")], axis=-1)


def at_s(seconds: NDArray[np.float64], start: np.datetime64 = START) -> NDArray[np.datetime64]:
    """Instants in microseconds, ``seconds`` after ``start``."""
    return start.astype("datetime64[us]") + np.rint(seconds * 1e6).astype("timedelta64[us]")


def elevation_deg(source: OrbitSource, site: Site, seconds: NDArray[np.float64]) -> NDArray[np.float64]:
    """Elevation by direct evaluation, without the search's interpolation."""
    return look_angles(source, site, at_s(seconds)).elevation_deg


def dense_spans_s(source: OrbitSource, site: Site, mask_deg: float, length_s: int = 86_400) -> NDArray[np.float64]:
    """Intervals above ``mask_deg`` by 1 s sampling with a finer look wherever an extreme comes near the mask."""
    seconds = np.arange(length_s + 1.0)
    level = elevation_deg(source, site, seconds)
    turn = np.flatnonzero((np.diff(level[:-1]) > 0.0) != (np.diff(level[1:]) > 0.0)) + 1
    near = turn[np.abs(level[turn] - mask_deg) < 1.5]
    fine = [np.linspace(max(k - 1, 0), min(k + 1, length_s), 201) for k in near.tolist()]
    seconds = np.unique(np.concatenate([seconds, *fine]))
    above = elevation_deg(source, site, seconds) > mask_deg
    change = np.flatnonzero(above[1:] != above[:-1])
    low, high, rising = seconds[change], seconds[change + 1], above[change + 1]
    for _ in range(24 if change.size else 0):
        middle = 0.5 * (low + high)
        past = (elevation_deg(source, site, middle) > mask_deg) == rising
        low, high = np.where(past, low, middle), np.where(past, middle, high)
    starts = np.concatenate([[0.0] if above[0] else [], high[rising]])
    ends = np.concatenate([high[~rising], [float(length_s)] if above[-1] else []])
    return np.stack([starts, ends], axis=-1)
