"""Where a mask that depends on azimuth lets an object through: windows above its lowest point, cut to shape.

Between two instants at which the azimuth passes a corner of the mask the mask is one straight line,
so elevation minus mask is smooth and its zeros are found as exactly as those of a constant mask.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from passplan.geometry import stencil
from passplan.geometry.masks import Mask
from passplan.geometry.roots import Flags, Indices, solve
from passplan.geometry.stations import Stations
from passplan.geometry.timescale import Floats

# Nodes per grid step; elevation and azimuth bend little between them.
_NODES_PER_STEP = 16
_LEAST_NODES = 8
# In grid steps.
_TOLERANCE = 1e-8


@dataclass(frozen=True)
class Sky:
    """East, north and up (km) of windows' objects from one antenna, from a block's positions (3, objects, times)."""

    positions_km: Floats
    here: Stations

    def powers(self, objects: Indices, at: Floats) -> tuple[Floats, Indices]:
        """Polynomials (3, 14, n) of east, north and up around grid instants ``at``, and where their x is 0."""
        first, zero = stencil.place(np.floor(at).astype(np.int64), self.positions_km.shape[2])
        powers = np.stack([stencil.polynomials(part, objects, first) for part in self.positions_km])
        axes = np.concatenate([self.here.east, self.here.north, self.here.up])
        local = np.einsum("ij,jkn->ikn", axes, powers)
        local[:, 0] -= (axes @ self.here.positions_km[0])[:, None]
        return local, zero

    def at(self, objects: Indices, at: Floats) -> Floats:
        """East, north and up (3, n) at grid instants ``at``."""
        sample = np.floor(at).astype(np.int64)
        place = np.concatenate(stencil.interpolate(tuple(self.positions_km), objects, sample, at[None]))
        axes = np.concatenate([self.here.east, self.here.north, self.here.up])
        return np.asarray(axes @ (place - self.here.positions_km.T))


def cut_to_mask(
    sky: Sky, mask: Mask, objects: Indices, start: Floats, end: Floats, peak: Floats
) -> tuple[Indices, Floats, Floats]:
    """Pieces of the windows [start, end] (grid steps) above ``mask``: window number, start and end of each piece."""
    window, at = nodes(start, end, peak)
    window, at = _with_corners(sky, mask, objects, window, at)
    same = window[1:] == window[:-1]
    owner, left, right = window[:-1][same], at[:-1][same], at[1:][same]
    middle = 0.5 * (left + right)
    east, north, _ = sky.at(objects[owner], middle)
    piece = mask.piece(np.degrees(np.arctan2(east, north)) % 360.0)
    # Both halves of each interval, in time order.
    halves = np.stack([np.stack([left, middle], -1), np.stack([middle, right], -1)], 1).reshape(-1, 2)
    owner, piece = np.repeat(owner, 2), np.repeat(piece, 2)
    over = [_clearance(sky.at(objects[owner], halves[:, side]), mask, piece) > 0.0 for side in (0, 1)]
    begin, finish = halves[:, 0].copy(), halves[:, 1].copy()
    turns = np.flatnonzero(over[0] != over[1])
    root = _edge(sky, mask, objects[owner[turns]], piece[turns], halves[turns], over[1][turns])
    rises = over[1][turns]
    begin[turns[rises]] = root[rises]
    finish[turns[~rises]] = root[~rises]
    keep = over[0] | over[1]
    owner, begin, finish = owner[keep], begin[keep], finish[keep]
    if not owner.size:
        return owner, begin, finish
    fresh = np.ones(owner.size, bool)
    fresh[1:] = (owner[1:] != owner[:-1]) | (begin[1:] != finish[:-1])
    heads = np.flatnonzero(fresh)
    return owner[heads], begin[heads], finish[np.append(heads[1:] - 1, owner.size - 1)]


def nodes(start: Floats, end: Floats, peak: Floats) -> tuple[Indices, Floats]:
    """Evenly spread instants in each window, its edges and its peak among them."""
    count = np.maximum(np.ceil((end - start) * _NODES_PER_STEP).astype(np.int64), _LEAST_NODES)
    window = np.repeat(np.arange(start.size), count + 1)
    number = np.arange(window.size) - np.repeat(np.cumsum(count + 1) - count - 1, count + 1)
    at = start[window] + (end - start)[window] * (number / count[window])
    last = number == count[window]
    at[last] = end
    return _merged(window, at, np.arange(start.size), np.clip(peak, start, end))


def _merged(window: Indices, at: Floats, more_window: Indices, more_at: Floats) -> tuple[Indices, Floats]:
    window, at = np.concatenate([window, more_window]), np.concatenate([at, more_at])
    order = np.lexsort((at, window))
    return window[order], at[order]


def _with_corners(sky: Sky, mask: Mask, objects: Indices, window: Indices, at: Floats) -> tuple[Indices, Floats]:
    """The nodes and every instant at which an azimuth passes a corner of the mask."""
    east, north, _ = sky.at(objects[window], at)
    found_window, found_at = [], []
    for corner in np.radians(np.unique(mask.begin_deg)):
        across = east * np.cos(corner) - north * np.sin(corner)
        sign = across > 0.0
        turn = np.flatnonzero((sign[1:] != sign[:-1]) & (window[1:] == window[:-1]))
        if not turn.size:
            continue
        local, zero = sky.powers(objects[window[turn]], at[turn])
        line = local[0] * np.cos(corner) - local[1] * np.sin(corner)

        low, high = at[turn] - zero, at[turn + 1] - zero
        x = solve(_straight, (line,), low, high, 0.5 * (low + high), ~sign[turn], _TOLERANCE)
        # The line through the zenith has two ends; only one of them is the corner.
        ahead = stencil.value(local[0], x) * np.sin(corner) + stencil.value(local[1], x) * np.cos(corner) > 0.0
        found_window.append(window[turn][ahead])
        found_at.append((x + zero)[ahead])
    if not found_at:
        return window, at
    return _merged(window, at, np.concatenate(found_window), np.concatenate(found_at))


def _clearance(enu: Floats, mask: Mask, piece: Indices) -> Floats:
    """Elevation above the line of ``piece``, deg; the line is drawn on beyond its ends."""
    east, north, up = enu
    elevation = np.degrees(np.arctan2(up, np.hypot(east, north)))
    return np.asarray(elevation - _line(mask, piece, np.degrees(np.arctan2(east, north))))


def _line(mask: Mask, piece: Indices, azimuth_deg: Floats) -> Floats:
    centre = 0.5 * (mask.begin_deg + mask.finish_deg)[piece]
    apart = (azimuth_deg - centre + 180.0) % 360.0 - 180.0
    return np.asarray(0.5 * (mask.first_deg + mask.last_deg)[piece] + mask.slope[piece] * apart)


def _edge(sky: Sky, mask: Mask, objects: Indices, piece: Indices, bracket: Floats, rising: Flags) -> Floats:
    """Instants at which the elevation passes the line of ``piece`` within each bracket."""
    if not objects.size:
        return np.zeros(0)
    local, zero = sky.powers(objects, bracket[:, 0])
    centre = 0.5 * (mask.begin_deg + mask.finish_deg)[piece]
    level = 0.5 * (mask.first_deg + mask.last_deg)[piece]
    data = (local, np.stack([centre, level, mask.slope[piece]]))
    low, high = bracket[:, 0] - zero, bracket[:, 1] - zero
    return np.asarray(solve(_clearance_slope, data, low, high, 0.5 * (low + high), rising, _TOLERANCE) + zero)


def _straight(x: Floats, line: Floats) -> tuple[Floats, Floats]:
    return stencil.slope(line, x)


def _clearance_slope(x: Floats, local: Floats, line: Floats) -> tuple[Floats, Floats]:
    """Elevation above the mask's line (centre, level, slope) in deg, and its change per grid step."""
    (e, de), (n, dn), (u, du) = (stencil.slope(part, x) for part in local)
    flat = np.maximum(np.hypot(e, n), 1e-9)
    rate = (du * flat - u * (e * de + n * dn) / flat) / (flat**2 + u**2)
    turn = (de * n - e * dn) / flat**2
    apart = (np.degrees(np.arctan2(e, n)) - line[0] + 180.0) % 360.0 - 180.0
    clearance = np.degrees(np.arctan2(u, flat)) - (line[1] + line[2] * apart)
    return clearance, np.degrees(rate - np.radians(line[2]) * np.degrees(turn))
