"""Windows made shorter at their ends, with everything that their rows say brought up to date."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.pointing import LookAngles, look_at
from passplan.geometry.refraction import apparent_deg
from passplan.geometry.timescale import Floats, datetimes_ms, utc_seconds
from passplan.inputs.ground import Site
from passplan.inputs.run import OrbitSource

# Each round looks at so many points between the neighbours of the best so far: a day comes down to 20 ms.
_ROUNDS, _POINTS = 5, 33


def trimmed(
    windows: pd.DataFrame, starts_s: Floats, ends_s: Floats, orbits: Mapping[str, OrbitSource],
    sites: Mapping[str, Site], *, refraction: bool = False,
) -> pd.DataFrame:
    """``windows`` from ``starts_s`` to ``ends_s`` (utc_s, (n,)) at the most; those of which nothing is left go.

    Identifiers stay, as does ``clipped`` at an end that stays. Peak and least range are those of what is left.
    """
    aos, los = (utc_seconds(windows[c].to_numpy()) for c in ("aos_utc", "los_utc"))
    # Inward to whole milliseconds, the table's resolution.
    start = np.maximum(aos, np.ceil(starts_s * 1e3 - 1e-3) / 1e3)
    end = np.minimum(los, np.floor(ends_s * 1e3 + 1e-3) / 1e3)
    touched = (start > aos) | (end < los)
    if not touched.any():
        return windows
    table, rows = windows.copy(), np.flatnonzero(touched & (end > start))
    late, early = start > aos, end < los
    table["clipped"] = _unclipped(windows["clipped"], late, early)
    table["aos_utc"], table["los_utc"] = datetimes_ms(start), datetimes_ms(end)
    table["duration_s"] = np.round(end - start, 3)
    edges = look_at(table, orbits, sites, np.concatenate([rows, rows]), np.concatenate([start[rows], end[rows]]))
    azimuth = edges.azimuth_deg.reshape(2, -1)
    table["aos_azimuth_deg"] = _put(table["aos_azimuth_deg"], rows, azimuth[0])
    table["los_azimuth_deg"] = _put(table["los_azimuth_deg"], rows, azimuth[1])

    def best(some: NDArray[np.int64], score: Callable[[LookAngles], Floats]) -> tuple[Floats, Floats]:
        """When the score is highest in the windows ``some``, and the score."""
        low, high = start[some], end[some]
        for _ in range(_ROUNDS):
            grid = low[:, None] + (high - low)[:, None] * np.linspace(0.0, 1.0, _POINTS)
            seen = look_at(table, orbits, sites, np.repeat(some, _POINTS), grid.ravel())
            values = score(seen).reshape(grid.shape)
            k, each = np.argmax(values, axis=1), np.arange(some.size)
            low, high = grid[each, np.maximum(k - 1, 0)], grid[each, np.minimum(k + 1, _POINTS - 1)]
        return grid[each, k], values[each, k]

    table["min_range_km"] = _put(table["min_range_km"], rows, -best(rows, lambda seen: -seen.range_km)[1])
    peak = utc_seconds(windows["peak_utc"].to_numpy())
    gone = rows[(peak[rows] < start[rows]) | (peak[rows] > end[rows])]
    if gone.size:
        at, height = best(gone, lambda seen: seen.elevation_deg)
        if refraction:
            height = apparent_deg(height, np.array([sites[name].height_m / 1e3 for name in table["site"].iloc[gone]]))
        table["peak_utc"] = _put(table["peak_utc"], gone, datetimes_ms(at))
        table["peak_elevation_deg"] = _put(table["peak_elevation_deg"], gone, height)
    return table[end > start].reset_index(drop=True)


def _put(column: pd.Series, rows: NDArray[np.int64], values: NDArray[Any]) -> NDArray[Any]:
    """The values of a column with others in some rows."""
    changed = column.to_numpy().copy()
    changed[rows] = values
    return changed


def _unclipped(clipped: pd.Series, late: np.ndarray, early: np.ndarray) -> pd.Series:
    """An end that was moved is no longer cut by the horizon."""
    start = clipped.isin(["start", "both"]).to_numpy() & ~late
    end = clipped.isin(["end", "both"]).to_numpy() & ~early
    words = np.select([start & end, start, end], ["both", "start", "end"], "none")
    return pd.Series(words, index=clipped.index, dtype=clipped.dtype)
