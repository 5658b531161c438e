"""Windows made shorter at their ends, with everything that their rows say brought up to date."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pandas as pd

from passplan.geometry.pointing import look
from passplan.geometry.refraction import apparent_deg
from passplan.geometry.stations import stations
from passplan.geometry.timescale import Floats, datetimes_ms, utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.ground import Site
from passplan.inputs.run import OrbitSource


def trimmed(
    windows: pd.DataFrame, starts_s: Floats, ends_s: Floats, orbits: Mapping[str, OrbitSource],
    sites: Mapping[str, Site], *, refraction: bool = False,
) -> pd.DataFrame:
    """``windows`` from ``starts_s`` to ``ends_s`` (utc_s, (n,)) at the most; those of which nothing is left go.

    Identifiers stay, as does ``clipped`` at an end that stays. Peak and least range of a window whose
    culmination is cut off are those of the end that is nearer to it (between, both are monotone).
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
    for row in rows.tolist():
        source, site = orbits[str(table["spacecraft"].iat[row])], sites[str(table["site"].iat[row])]
        peak = float(utc_seconds(table["peak_utc"].to_numpy()[row]))
        kept = min(max(peak, start[row]), end[row])
        states = states_itrf(source, np.array([start[row], end[row], kept]))
        found = look(*states, stations([site]).subset(np.zeros(3, np.int64)))
        place = table.index[row]
        table.loc[place, ["aos_azimuth_deg", "los_azimuth_deg"]] = found.azimuth_deg[:2]
        if kept != peak:
            height = found.elevation_deg[2:]
            table.loc[place, "peak_utc"] = datetimes_ms(np.array([kept]))[0]
            table.loc[place, "peak_elevation_deg"] = float(
                apparent_deg(height, site.height_m / 1e3)[0] if refraction else height[0]
            )
            table.loc[place, "min_range_km"] = found.range_km[2]
    return table[end > start].reset_index(drop=True)


def _unclipped(clipped: pd.Series, late: np.ndarray, early: np.ndarray) -> pd.Series:
    """An end that was moved is no longer cut by the horizon."""
    start = clipped.isin(["start", "both"]).to_numpy() & ~late
    end = clipped.isin(["end", "both"]).to_numpy() & ~early
    words = np.select([start & end, start, end], ["both", "start", "end"], "none")
    return pd.Series(words, index=clipped.index, dtype=clipped.dtype)
