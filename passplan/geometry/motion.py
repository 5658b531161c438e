"""How pointing changes: rates of the angles, Doppler, tables along windows, and two spacecraft in one sky."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.axes import separation_deg
from passplan.geometry.pointing import look_angles, sample_windows
from passplan.geometry.stations import Stations, stations
from passplan.geometry.timescale import Floats, datetimes_ms, utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.ground import Site
from passplan.inputs.run import OrbitSource

# Exact by the definition of the metre.
LIGHT_KM_S = 299_792.458

POINTING_COLUMNS = (
    "window_id", "spacecraft", "antenna", "time_utc", "azimuth_deg", "elevation_deg", "range_km", "range_rate_km_s",
    "azimuth_rate_deg_s", "elevation_rate_deg_s",
)  # fmt: skip


@dataclass(frozen=True)
class Rates:
    """Rates of azimuth and (geometric) elevation, deg/s."""

    azimuth_deg_s: Floats
    elevation_deg_s: Floats


def rates(positions_km: Floats, velocities_km_s: Floats, here: Stations) -> Rates:
    """Rates of pointing to Earth-fixed states (n, 3) from ``here``, n stations.

    Derivatives of atan2(east, north) and atan2(up, level) (calculus); near the zenith the first is the
    angular rate across the line of sight divided by cos(elevation).
    """
    line = positions_km - here.positions_km
    e, n, u = (np.einsum("ij,ij->i", axis, line) for axis in (here.east, here.north, here.up))
    de, dn, du = (np.einsum("ij,ij->i", axis, velocities_km_s) for axis in (here.east, here.north, here.up))
    level2 = np.maximum(e**2 + n**2, 1e-18)
    level = np.sqrt(level2)
    azimuth = (de * n - e * dn) / level2
    elevation = (du * level - u * (e * de + n * dn) / level) / (level2 + u**2)
    return Rates(np.degrees(azimuth), np.degrees(elevation))


def doppler_hz(range_rate_km_s: Floats, frequency_mhz: float) -> Floats:
    """Shift [Hz] of a carrier received on the ground, first order: -f (dr/dt) / c (textbook)."""
    return np.asarray(-frequency_mhz * 1e6 * np.asarray(range_rate_km_s, float) / LIGHT_KM_S)


def pointing_table(
    windows: pd.DataFrame,
    orbits: Mapping[str, OrbitSource],
    sites: Mapping[str, Site],
    *,
    step_s: float = 10.0,
    frequency_mhz: float | None = None,
    refraction: bool = False,
) -> pd.DataFrame:
    """Pointing along every window: one row at AOS, every ``step_s`` from there, and at LOS.

    Columns as ``POINTING_COLUMNS``, and ``doppler_hz`` where a frequency is given. With ``refraction`` the
    elevation is the apparent one; its rate is geometric.
    """
    origin = np.datetime64("2000-01-01", "ms")
    samples = sample_windows(windows, orbits, sites, origin, step_s, refraction=refraction)
    row = np.repeat(np.arange(len(windows)), np.diff(samples.offsets))
    azimuth_rate, elevation_rate = np.empty(row.size), np.empty(row.size)
    places = stations(list(sites.values()))
    site = pd.Index(list(sites)).get_indexer(pd.Index(windows["site"]))[row]
    names = windows["spacecraft"].to_numpy()[row]
    for name in pd.unique(pd.Series(names)):
        mine = np.flatnonzero(names == name)
        found = rates(*states_itrf(orbits[str(name)], samples.time_s[mine]), places.subset(site[mine]))
        azimuth_rate[mine], elevation_rate[mine] = found.azimuth_deg_s, found.elevation_deg_s
    table = pd.DataFrame({
        "window_id": windows["window_id"].to_numpy()[row], "spacecraft": names,
        "antenna": windows["antenna"].to_numpy()[row], "time_utc": datetimes_ms(samples.time_s),
        "azimuth_deg": samples.azimuth_deg, "elevation_deg": samples.elevation_deg, "range_km": samples.range_km,
        "range_rate_km_s": samples.range_rate_km_s, "azimuth_rate_deg_s": azimuth_rate,
        "elevation_rate_deg_s": elevation_rate,
    }, columns=list(POINTING_COLUMNS))  # fmt: skip
    if frequency_mhz is not None:
        table["doppler_hz"] = doppler_hz(samples.range_rate_km_s, frequency_mhz)
    return table


def pointing_rates(source: OrbitSource, site: Site, times_utc: NDArray[np.datetime64]) -> Rates:
    """Rates of azimuth and elevation from ``site`` at ``times_utc`` (n,)."""
    times = np.atleast_1d(utc_seconds(np.asarray(times_utc)))
    return rates(*states_itrf(source, times), stations([site]).subset(np.zeros(times.size, np.int64)))


def spacecraft_separation_deg(
    one: OrbitSource, other: OrbitSource, site: Site, times_utc: NDArray[np.datetime64]
) -> Floats:
    """Angle [deg] between two spacecraft seen from ``site`` at ``times_utc`` (n,); NaN where either has no answer."""
    first, second = look_angles(one, site, times_utc), look_angles(other, site, times_utc)
    return separation_deg(first.azimuth_deg, first.elevation_deg, second.azimuth_deg, second.elevation_deg)
