"""Windows across the seam of two ephemeris segments are one window, and instants are those of the message itself."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from passplan.geometry.masks import Mask
from passplan.geometry.passes import Rows
from passplan.geometry.pointing import look
from passplan.geometry.roots import Flags, Indices
from passplan.geometry.stations import Stations
from passplan.geometry.timescale import Floats
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.ephemeris import Ephemeris

# Segments that meet within the resolution of the table have no gap between them.
_SEAM_S = 2e-3
_PROBE_S = 0.05
_MOST_SHIFT_S = 10.0
_TURNS = 6


def without_seams(rows: Rows) -> Rows:
    """``rows`` with windows joined that meet at the end of one grid and the start of the next."""
    order = np.lexsort((rows.whole_start_s, rows.antenna, rows.spacecraft))
    rows = rows.take(order)
    meets = (rows.spacecraft[1:] == rows.spacecraft[:-1]) & (rows.antenna[1:] == rows.antenna[:-1])
    meets &= rows.open_end[:-1] & rows.open_start[1:]
    meets &= np.abs(rows.whole_start_s[1:] - rows.whole_end_s[:-1]) <= _SEAM_S
    for left in np.flatnonzero(meets)[::-1].tolist():
        _join(rows, left, left + 1)
    return rows.take(np.concatenate([[True], ~meets]))


def _join(rows: Rows, left: int, right: int) -> None:
    """Put what ``right`` adds into ``left``; rows at seams are few and their columns our own copies."""
    rows.whole_end_s[left], rows.open_end[left] = rows.whole_end_s[right], rows.open_end[right]
    if rows.culmination_deg[right] > rows.culmination_deg[left]:
        rows.culmination_s[left], rows.culmination_deg[left] = rows.culmination_s[right], rows.culmination_deg[right]
    if not rows.inside[right]:
        return
    if not rows.inside[left]:
        rows.start_s[left], rows.start_azimuth_deg[left] = rows.start_s[right], rows.start_azimuth_deg[right]
        rows.peak_deg[left] = -np.inf
        rows.range_km[left] = np.inf
    rows.inside[left] = True
    rows.end_s[left], rows.end_azimuth_deg[left] = rows.end_s[right], rows.end_azimuth_deg[right]
    rows.range_km[left] = min(rows.range_km[left], rows.range_km[right])
    if rows.peak_deg[right] > rows.peak_deg[left]:
        rows.peak_s[left], rows.peak_deg[left] = rows.peak_s[right], rows.peak_deg[right]


def settled(rows: Rows, sources: Mapping[int, Ephemeris], places: Stations, masks: Sequence[Mask]) -> Rows:
    """``rows`` with starts and ends that the mask sets moved to where the message's own interpolation puts them.

    The search runs on even samples of that interpolation, which has a kink at every state of the message.
    """
    start, end = rows.start_s.copy(), rows.end_s.copy()
    whole_start, whole_end = rows.whole_start_s.copy(), rows.whole_end_s.copy()
    for number, source in sources.items():
        mine = rows.spacecraft == number
        for edge, whole, opened in ((start, whole_start, rows.open_start), (end, whole_end, rows.open_end)):
            some = np.flatnonzero(mine & ~opened)
            at = _settle(source, rows.antenna[some], whole[some], places, masks)
            set_by_mask = edge[some] == whole[some]
            whole[some] = at
            edge[some[set_by_mask]] = at[set_by_mask]
    return replace(rows, start_s=start, end_s=end, whole_start_s=whole_start, whole_end_s=whole_end)


def _settle(source: Ephemeris, antenna: Indices, at: Floats, places: Stations, masks: Sequence[Mask]) -> Floats:
    """Newton's iteration with a slope from a probe beside; a step is taken only where it comes nearer to the mask."""
    best, origin = at.copy(), at
    miss = _clearance(source, antenna, best, places, masks)
    for _ in range(_TURNS):
        slope = (_clearance(source, antenna, best + _PROBE_S, places, masks) - miss) / _PROBE_S
        with np.errstate(divide="ignore", invalid="ignore"):
            tried = best - miss / slope
        there = _clearance(source, antenna, tried, places, masks)
        better: Flags = (np.abs(there) < np.abs(miss)) & (np.abs(tried - origin) < _MOST_SHIFT_S)
        best, miss = np.where(better, tried, best), np.where(better, there, miss)
    return best


def _clearance(source: Ephemeris, antenna: Indices, at: Floats, places: Stations, masks: Sequence[Mask]) -> Floats:
    """Elevation above the mask, deg; NaN outside the message's span."""
    found = look(*states_itrf(source, at), places.subset(antenna))
    level = np.full(at.size, np.nan)
    for number in np.unique(antenna).tolist():
        mine = np.flatnonzero((antenna == number) & np.isfinite(found.azimuth_deg))
        level[mine] = masks[number].elevation_deg(found.azimuth_deg[mine])
    return np.asarray(found.elevation_deg - level)
