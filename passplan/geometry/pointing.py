"""Where to point: azimuth, elevation, range and range rate, at given times and along windows."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.refraction import apparent_deg
from passplan.geometry.stations import Stations, stations
from passplan.geometry.timescale import Floats, utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.ground import Site
from passplan.inputs.run import OrbitSource


@dataclass(frozen=True)
class LookAngles:
    """Pointing at n times; NaN where the orbit source has no answer.

    Azimuth is from true north through east, in [0, 360); elevation is geometric (no refraction, no
    light time) above the horizontal plane of the WGS 84 ellipsoid; the range rate is positive when receding.
    """

    azimuth_deg: Floats
    elevation_deg: Floats
    range_km: Floats
    range_rate_km_s: Floats


@dataclass(frozen=True)
class Samples:
    """Pointing along windows, flat: window i owns the elements from ``offsets[i]`` to before ``offsets[i + 1]``.

    ``time_s`` counts from the horizon's start. The first and last samples of a window are at AOS and LOS.
    """

    time_s: Floats
    azimuth_deg: Floats
    elevation_deg: Floats
    range_km: Floats
    range_rate_km_s: Floats
    offsets: NDArray[np.int64]


def look_angles(
    source: OrbitSource, site: Site, times_utc: NDArray[np.datetime64], *, refraction: bool = False
) -> LookAngles:
    """Azimuth, elevation (deg), range (km) and range rate (km/s) from ``site`` at ``times_utc`` (n,).

    With ``refraction`` the elevation is the apparent one (ITU-R P.834).
    """
    times = np.atleast_1d(utc_seconds(np.asarray(times_utc)))
    positions, velocities = states_itrf(source, times)
    here = stations([site]).subset(np.zeros(times.size, np.int64))
    found = look(positions, velocities, here)
    if refraction:
        return replace(found, elevation_deg=apparent_deg(found.elevation_deg, site.height_m / 1e3))
    return found


def look(positions_km: Floats, velocities_km_s: Floats, here: Stations) -> LookAngles:
    """Pointing to Earth-fixed states (n, 3) from ``here``, n stations."""
    line = positions_km - here.positions_km
    east = np.einsum("ij,ij->i", here.east, line)
    north = np.einsum("ij,ij->i", here.north, line)
    up = np.einsum("ij,ij->i", here.up, line)
    distance = np.sqrt(np.einsum("ij,ij->i", line, line))
    rate = np.einsum("ij,ij->i", velocities_km_s, line) / distance
    # arctan2 keeps full precision near the zenith, where arcsin does not.
    elevation = np.degrees(np.arctan2(up, np.hypot(east, north)))
    return LookAngles(azimuth_of(east, north), elevation, distance, rate)


def azimuth_of(east: Floats, north: Floats) -> Floats:
    """Azimuth in [0, 360) deg."""
    azimuth = np.degrees(np.arctan2(east, north)) % 360.0
    return np.where(azimuth >= 360.0, 0.0, azimuth)


def sample_windows(
    windows: pd.DataFrame,
    orbits: Mapping[str, OrbitSource],
    sites: Mapping[str, Site],
    start_utc: np.datetime64,
    step_s: float = 10.0,
    *,
    refraction: bool = False,
) -> Samples:
    """Pointing along every row of ``windows``, in its order: at AOS, every ``step_s`` from there, and at LOS.

    With ``refraction`` elevations are apparent (ITU-R P.834), without it geometric.
    """
    row, time, offsets = instants(windows, step_s)
    found = look_at(windows, orbits, sites, row, time)
    elevation = found.elevation_deg
    if refraction:
        heights = np.array([sites[name].height_m / 1e3 for name in windows["site"]])
        elevation = apparent_deg(elevation, heights[row])
    since = time - float(utc_seconds(start_utc))
    return Samples(since, found.azimuth_deg, elevation, found.range_km, found.range_rate_km_s, offsets)


def look_at(
    windows: pd.DataFrame, orbits: Mapping[str, OrbitSource], sites: Mapping[str, Site], row: NDArray[np.int64],
    utc_s: Floats,
) -> LookAngles:
    """Pointing to the spacecraft of row ``row[i]`` of ``windows`` from its site, at ``utc_s[i]``."""
    columns = [np.empty(row.size) for _ in range(4)]
    for pick, positions, velocities, here in _seen(windows, orbits, sites, row, utc_s):
        found = look(positions, velocities, here)
        for column, values in zip(
            columns, (found.azimuth_deg, found.elevation_deg, found.range_km, found.range_rate_km_s), strict=True
        ):
            column[pick] = values
    return LookAngles(*columns)


def instants(windows: pd.DataFrame, step_s: float) -> tuple[NDArray[np.int64], Floats, NDArray[np.int64]]:
    """Row of ``windows`` and utc_s (n,) of instants at AOS, every ``step_s`` from there, and at LOS; and offsets.

    Row i owns the instants from ``offsets[i]`` to before ``offsets[i + 1]``.
    """
    aos, los = (utc_seconds(windows[c].to_numpy()) for c in ("aos_utc", "los_utc"))
    # LOS replaces a step that would fall on it or within a millisecond before it.
    between = np.maximum(np.ceil((los - aos - 1e-3) / step_s).astype(np.int64), 1)
    offsets = np.concatenate([[0], np.cumsum(between + 1)]).astype(np.int64)
    row = np.repeat(np.arange(aos.size), between + 1)
    time = aos[row] + (np.arange(row.size) - offsets[row]) * step_s
    time[offsets[1:] - 1] = los
    return row, time, offsets


def local_states(
    windows: pd.DataFrame, orbits: Mapping[str, OrbitSource], sites: Mapping[str, Site], row: NDArray[np.int64],
    utc_s: Floats,
) -> tuple[Floats, Floats]:
    """Position [km] and velocity [km/s] (3, n) of the spacecraft of row ``row[i]`` at ``utc_s[i]``, from its site.

    Along east, north and up.
    """
    position, velocity = np.empty((3, row.size)), np.empty((3, row.size))
    for pick, positions, velocities, here in _seen(windows, orbits, sites, row, utc_s):
        line = positions - here.positions_km
        for k, axis in enumerate((here.east, here.north, here.up)):
            position[k, pick] = np.einsum("ij,ij->i", axis, line)
            velocity[k, pick] = np.einsum("ij,ij->i", axis, velocities)
    return position, velocity


def _seen(
    windows: pd.DataFrame, orbits: Mapping[str, OrbitSource], sites: Mapping[str, Site], row: NDArray[np.int64],
    utc_s: Floats,
) -> Iterator[tuple[NDArray[np.int64], Floats, Floats, Stations]]:
    """Spacecraft by spacecraft: which of the instants are its own, its states there, and where it is seen from."""
    places = stations(list(sites.values()))
    site = pd.Index(list(sites)).get_indexer(pd.Index(windows["site"]))
    codes, known = pd.factorize(windows["spacecraft"])
    order = np.argsort(codes[row], kind="stable")
    edges = np.searchsorted(codes[row][order], np.arange(len(known) + 1))
    for code, name in enumerate(known):
        pick = order[edges[code] : edges[code + 1]]
        if pick.size:
            positions, velocities = states_itrf(orbits[str(name)], utc_s[pick])
            yield pick, positions, velocities, places.subset(site[row[pick]])
