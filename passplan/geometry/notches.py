"""Where a mask that depends on azimuth lets an object through: windows above its lowest point, cut to shape.

Between two instants at which the azimuth passes a corner of the mask the mask is one straight line,
so elevation minus mask is smooth and its zeros are found as exactly as those of a constant mask.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from passplan.geometry import stencil
from passplan.geometry.masks import Masks
from passplan.geometry.roots import Flags, Indices, solve
from passplan.geometry.sky import Sky
from passplan.geometry.timescale import Floats

# Nodes per grid step, besides both edges and the peak; azimuth and elevation bend little between them.
_NODES_PER_STEP = 4
# In grid steps.
_TOLERANCE = 1e-7
_PROBE = 1e-5
_ROUNDING = 1e-9


@dataclass(frozen=True)
class Pieces:
    """Parts of windows: number of the window, start and end in grid steps."""

    window: Indices
    start: Floats
    end: Floats


def cut_to_masks(sky: Sky, masks: Masks, antenna: Indices, start: Floats, end: Floats, peak: Floats) -> Pieces:
    """The parts of the windows [start, end] (grid steps) above the mask of ``antenna``, in order of window and time.

    ``sky`` holds the windows; ``peak`` is their highest moment. All (n,).
    """
    window, at = _nodes(start, end, np.clip(peak, start, end))
    number = sky.number(window, at)
    (east, north, up), (east_rate, north_rate, _) = stencil.slope(sky.local(number), at - sky.zero[number])
    # Most of a pass is above the highest point of the mask.
    clear = up > np.hypot(east, north) * np.tan(np.radians(masks.highest_deg))[antenna[window]]
    left = np.flatnonzero(window[1:] == window[:-1])
    free = clear[left] & clear[left + 1]
    above = Pieces(window[left[free]], at[left[free]], at[left[free] + 1])
    left = left[~free]
    turning = (east_rate * north > east * north_rate)[[left, left + 1]]
    intervals = _cut_at_turns(sky, window[left], at[[left, left + 1]], turning)
    return _merged(above, _visible(sky, masks, _within_one_line(sky, masks, antenna, *intervals)))


def _nodes(start: Floats, end: Floats, peak: Floats) -> tuple[Indices, Floats]:
    """Instants in each window in order of time: both edges, the peak, and even ones between."""
    first = np.floor(start * _NODES_PER_STEP).astype(np.int64) + 1
    count = np.maximum(np.ceil(end * _NODES_PER_STEP).astype(np.int64) - first, 0)
    own = np.arange(start.size)
    window = np.repeat(own, count)
    even = (np.arange(window.size) - np.repeat(np.cumsum(count) - count - first, count)) / _NODES_PER_STEP
    window = np.concatenate([own, window, own, own])
    at = np.concatenate([start, even, peak, end])
    order = np.lexsort((at, window))
    return window[order], at[order]


def _cut_at_turns(sky: Sky, window: Indices, at: Floats, clockwise: Flags) -> tuple[Indices, Floats]:
    """The intervals ``at`` (2, n), cut where the azimuth stops and turns back; ``clockwise`` (2, n) at their ends."""
    turns = np.flatnonzero(clockwise[0] != clockwise[1])
    number = sky.number(window[turns], at[0, turns])
    zero = sky.zero[number]
    low, high = at[:, turns] - zero
    data = (sky.local(number)[:, :2],)
    root = solve(_azimuth_rate, data, low, high, 0.5 * (low + high), clockwise[1, turns], _TOLERANCE) + zero
    more = np.stack([root, at[1, turns]])
    at = at.copy()
    at[1, turns] = root
    return np.concatenate([window, window[turns]]), np.concatenate([at, more], axis=-1)


def _azimuth_rate(x: Floats, local: Floats) -> tuple[Floats, Floats]:
    """What has the sign of the azimuth's rate, and its slope."""
    (e, n), (de, dn), (dde, ddn) = stencil.bend(local, x)
    return de * n - e * dn, dde * n - e * ddn


@dataclass(frozen=True)
class _Spans:
    """Parts of windows in which the mask is the straight line of one piece."""

    window: Indices
    start: Floats
    end: Floats
    piece: Indices


def _within_one_line(sky: Sky, masks: Masks, antenna: Indices, window: Indices, at: Floats) -> _Spans:
    """The intervals ``at`` (2, n) of ``window``, cut where the azimuth passes a corner of the mask.

    In an interval the azimuth turns one way and by less than half a circle, so its ends tell the corners between.
    """
    azimuth_deg = np.stack([_azimuth_deg(sky, window, side) for side in at])
    owner = antenna[window]
    first, last = (masks.piece(owner, side) for side in azimuth_deg)
    clockwise = (azimuth_deg[1] - azimuth_deg[0] + 180.0) % 360.0 - 180.0 > 0.0
    sense = np.where(clockwise, 1, -1)
    count = (sense * (last - first)) % masks.count[owner]
    # Back in its own piece, but behind where it began: it went by all the corners.
    count[(count == 0) & ((azimuth_deg[1] > azimuth_deg[0]) != clockwise)] = -1
    count = np.where(count < 0, masks.count[owner], count)
    part = np.repeat(np.arange(window.size), count)
    nth = np.arange(part.size) - np.repeat(np.cumsum(count) - count, count)
    corner = masks.beside(first[part], owner[part], np.where(clockwise[part], nth + 1, -nth))
    passed = _passes(sky, window[part], at[:, part], masks.corner_deg[corner], clockwise[part])
    # Each interval becomes count + 1 spans.
    part = np.repeat(np.arange(window.size), count + 1)
    nth = np.arange(part.size) - np.repeat(np.cumsum(count + 1) - count - 1, count + 1)
    begin, finish = at[0, part], at[1, part]
    begin[nth > 0] = passed
    finish[nth < count[part]] = passed
    return _Spans(window[part], begin, finish, masks.beside(first[part], owner[part], sense[part] * nth))


def _azimuth_deg(sky: Sky, window: Indices, at: Floats) -> Floats:
    east, north, _ = sky.at(sky.number(window, at), at)
    return np.asarray(np.degrees(np.arctan2(east, north)) % 360.0)


def _passes(sky: Sky, window: Indices, at: Floats, corner_deg: Floats, clockwise: Flags) -> Floats:
    """Instants at which the azimuth passes ``corner_deg`` in the intervals ``at`` (2, n)."""
    number = sky.number(window, at[0])
    corner = np.radians(corner_deg)
    local = sky.local(number)
    across = local[:, 0] * np.cos(corner) - local[:, 1] * np.sin(corner)
    zero = sky.zero[number]
    low, high = at - zero
    return np.asarray(solve(_straight, (across,), low, high, 0.5 * (low + high), clockwise, _TOLERANCE) + zero)


def _straight(x: Floats, powers: Floats) -> tuple[Floats, Floats]:
    return stencil.slope(powers, x)


def _visible(sky: Sky, masks: Masks, spans: _Spans) -> Pieces:
    """The parts of ``spans`` above their line."""
    number = sky.number(spans.window, spans.start)
    zero, local = sky.zero[number], sky.local(number)
    line = np.stack([masks.centre_deg[spans.piece], masks.level_deg[spans.piece], masks.slope[spans.piece]])
    part, x = _cut_at_extremes(local, line, np.stack([spans.start, spans.end]) - zero)
    over = np.stack([_clearance(side, local.take(part, axis=-1), line[:, part])[0] > 0.0 for side in x])
    for rising in (True, False):
        turn = np.flatnonzero((over[1] == rising) & (over[0] != rising))
        data = local.take(part[turn], axis=-1), line[:, part[turn]]
        low, high = x[:, turn]
        x[0 if rising else 1, turn] = solve(_clearance, data, low, high, 0.5 * (low + high), rising, _TOLERANCE)
    seen = np.flatnonzero(over[0] | over[1])
    part, (start, end) = part[seen], x[:, seen] + zero[part[seen]]
    # Edges of spans stay the very numbers they were, rounding apart, so that neighbours meet.
    for edge, known in ((start, spans.start[part]), (end, spans.end[part])):
        np.copyto(edge, known, where=np.abs(edge - known) < _ROUNDING)
    return Pieces(spans.window[part], start, end)


def _cut_at_extremes(local: Floats, line: Floats, x: Floats) -> tuple[Indices, Floats]:
    """The spans ``x`` (2, n), cut where the clearance comes nearest to zero between ends of one sign.

    Returns the number of the span each part comes from, and its ends.
    """
    (first, rate), (last, end_rate) = (_clearance(side, local, line) for side in x)
    top = (first <= 0.0) & (last <= 0.0) & (rate > 0.0) & (end_rate < 0.0)
    dip = (first > 0.0) & (last > 0.0) & (rate < 0.0) & (end_rate > 0.0)
    turns = np.flatnonzero(top | dip)
    low, high = x[:, turns]
    data = local.take(turns, axis=-1), line[:, turns]
    at = solve(_clearance_bend, data, low, high, 0.5 * (low + high), dip[turns], _TOLERANCE)
    whole = x.copy()
    whole[1, turns] = at
    return np.append(np.arange(x.shape[1]), turns), np.concatenate([whole, np.stack([at, high])], axis=-1)


def _clearance(x: Floats, local: Floats, line: Floats) -> tuple[Floats, Floats]:
    """Elevation above the mask's line (centre, level, slope) in deg, and its change per grid step.

    The line is drawn on beyond its ends.
    """
    (e, n, u), (de, dn, du) = stencil.slope(local, x)
    flat = np.maximum(np.hypot(e, n), 1e-9)
    rate = (du * flat - u * (e * de + n * dn) / flat) / (flat**2 + u**2)
    turn = (de * n - e * dn) / flat**2
    apart = (np.degrees(np.arctan2(e, n)) - line[0] + 180.0) % 360.0 - 180.0
    clearance = np.degrees(np.arctan2(u, flat)) - (line[1] + line[2] * apart)
    return clearance, np.degrees(rate - line[2] * turn)


def _clearance_bend(x: Floats, local: Floats, line: Floats) -> tuple[Floats, Floats]:
    """The change of the clearance, and the change of that from a probe on both sides."""
    (_, before), (_, here), (_, after) = (_clearance(x + side, local, line) for side in (-_PROBE, 0.0, _PROBE))
    return here, (after - before) / (2.0 * _PROBE)


def _merged(one: Pieces, other: Pieces) -> Pieces:
    """All pieces in order, those that meet joined."""
    window = np.concatenate([one.window, other.window])
    start, end = np.concatenate([one.start, other.start]), np.concatenate([one.end, other.end])
    order = np.lexsort((start, window))
    window, start, end = window[order], start[order], end[order]
    keep = np.flatnonzero(end > start)
    window, start, end = window[keep], start[keep], end[keep]
    if not window.size:
        return Pieces(window, start, end)
    heads = np.flatnonzero(np.append(True, (window[1:] != window[:-1]) | (start[1:] > end[:-1] + _ROUNDING)))
    return Pieces(window[heads], start[heads], end[np.append(heads[1:] - 1, window.size - 1)])
