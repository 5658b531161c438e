"""From intervals above the mask to windows: whole passes, cuts by notches and by the planning horizon."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, fields
from typing import TypeVar

import numpy as np

from passplan.geometry import stencil
from passplan.geometry.masks import Mask, joined_masks
from passplan.geometry.notches import cut_to_masks
from passplan.geometry.pointing import azimuth_of
from passplan.geometry.reach import Reach, cut_to_reach
from passplan.geometry.regimes import ALWAYS_S
from passplan.geometry.roots import Flags, Indices
from passplan.geometry.scan import Spans, spans
from passplan.geometry.scene import Scene, view
from passplan.geometry.sky import sky
from passplan.geometry.stations import Stations
from passplan.geometry.summits import Summits, summits
from passplan.geometry.timescale import Floats
from passplan.geometry.trajectory import Block

_STEEP_SINE = 0.98
# Where in a gap between two spans it is looked first whether the object has set.
_PROBES = (0.5, 0.25, 0.75, 0.375)
# Spans cut to shaped masks or limits of mounts at once; bounds the memory of their polynomials.
_SPANS_AT_ONCE = 2_000


@dataclass(frozen=True)
class Rows:
    """Windows as columns (n,). Times are ``utc_s``; ``whole_*`` are the edges without the planning horizon.

    The culmination is that of the whole pass. Rows outside the horizon (``inside`` false) are kept where
    they belong to a pass that has a window in it.
    """

    spacecraft: Indices
    antenna: Indices
    whole_start_s: Floats
    whole_end_s: Floats
    open_start: Flags
    open_end: Flags
    culmination_s: Floats
    culmination_deg: Floats
    inside: Flags
    start_s: Floats
    end_s: Floats
    peak_s: Floats
    peak_deg: Floats
    start_azimuth_deg: Floats
    end_azimuth_deg: Floats
    range_km: Floats

    def take(self, index: object) -> Rows:
        """The rows picked by a NumPy index."""
        return Rows(*(getattr(self, f.name)[index] for f in fields(self)))


def joined(parts: Sequence[Rows]) -> Rows:
    """All rows one after the other."""
    return Rows(*(np.concatenate([getattr(part, f.name) for part in parts]) for f in fields(Rows)))


def block_rows(
    block: Block,
    places: Stations,
    masks: Sequence[Mask],
    antennas: Indices,
    start_s: float,
    end_s: float,
    reaches: Sequence[Reach | None] = (),
) -> Rows:
    """The windows of one block from the antennas numbered ``antennas`` (with their places, masks and reaches)."""
    sines = np.sin(np.radians([mask.lowest_deg for mask in masks]))
    scene = view(block, places, sines)
    low, high = (start_s - block.start_s) / block.step_s, (end_s - block.start_s) / block.step_s
    found, top = spans(scene, low, high)
    found, top, number = _near_horizon(found, top, _pass_numbers(scene, found), low, high)
    crown = _crowns(block.step_s, found, number, top)
    found, crown, top = _cut_by_masks(block, places, masks, scene, found, crown, top)
    found, crown, top = _cut_by_reaches(block, places, reaches, scene, found, crown, top)
    start, end = np.clip(found.start, low, high), np.clip(found.end, low, high)
    inside = start < end
    cut = np.flatnonzero(inside & ((start != found.start) | (end != found.end)))
    if cut.size:
        part = summits(scene, found.pair[cut], start[cut], end[cut])
        for whole, clipped in ((top.at, part.at), (top.sine, part.sine), (top.range_km, part.range_km)):
            whole[cut] = clipped
    antenna, own = np.divmod(found.pair, scene.objects)
    azimuth = _azimuths(block, places, antenna, own, found.centre, np.stack([start, end]), inside)

    def utc(x: Floats) -> Floats:
        return np.asarray(block.start_s + block.step_s * x)

    return Rows(
        block.objects[own],
        antennas[antenna],
        utc(found.start),
        utc(found.end),
        found.open_start,
        found.open_end,
        utc(crown.at),
        np.degrees(np.arcsin(np.minimum(crown.sine, 1.0))),
        inside,
        np.clip(utc(start), start_s, end_s),
        np.clip(utc(end), start_s, end_s),
        utc(top.at),
        _peak_deg(block, places, antenna, own, top),
        azimuth[0],
        azimuth[1],
        top.range_km,
    )


def _pass_numbers(scene: Scene, found: Spans) -> Indices:
    """Number of the pass of each span: neighbours share one if the object stays above the horizon between."""
    breaks = np.ones(found.pair.size, bool)
    gap = np.flatnonzero(found.pair[1:] == found.pair[:-1])
    pair, low, high = found.pair[gap], found.end[gap], found.start[gap + 1]
    floor = np.minimum(scene.sines, 0.0)[pair]
    # Nearly all gaps are settled by a sample in their middle, the others by one beside it: passes below the mask are
    # in the middle of long gaps.
    up = np.arange(gap.size)
    for share in _PROBES:
        sample = np.rint(low[up] + share * (high[up] - low[up])).astype(np.int64)
        flat = pair[up] * scene.length + sample
        level = scene.up_km.reshape(-1).take(flat) - floor[up] * np.sqrt(scene.range_km2.reshape(-1).take(flat))
        up = up[level > 0.0]
    breaks[gap[up] + 1] = _sets_between(scene, pair[up], low[up], high[up])
    return np.cumsum(breaks) - 1


def _sets_between(scene: Scene, pair: Indices, low: Floats, high: Floats) -> Flags:
    """Whether the object is below the true horizon anywhere in each gap (looked at four times a step)."""
    if not pair.size:
        return np.zeros(0, bool)
    count = np.ceil((high - low) * 4).astype(np.int64) + 2
    first = np.cumsum(count) - count
    gap = np.repeat(np.arange(pair.size), count)
    at = low[gap] + (high - low)[gap] * ((np.arange(gap.size) - first[gap]) / (count - 1)[gap])
    up, square = scene.at(pair[gap], at)
    below = up <= np.minimum(scene.sines, 0.0)[pair[gap]] * np.sqrt(square)
    return np.asarray(np.logical_or.reduceat(below, first))


def _near_horizon(
    found: Spans, top: Summits, number: Indices, low: float, high: float
) -> tuple[Spans, Summits, Indices]:
    """Only the passes with a span in the planning horizon, all their spans."""
    touches = (found.end > low) & (found.start < high)
    wanted = np.zeros(int(number[-1]) + 1 if number.size else 0, bool)
    wanted[number[touches]] = True
    keep = np.flatnonzero(wanted[number])
    return _rows(found, keep), _rows(top, keep), number[keep]


@dataclass(frozen=True)
class _Crowns:
    """Culmination of each span's pass: instant (grid steps) and sine; ``endless`` where the pass lasts for days."""

    at: Floats
    sine: Floats
    endless: Flags


def _crowns(step_s: float, found: Spans, number: Indices, top: Summits) -> _Crowns:
    """The highest moment of each pass; in a pass that does not end for days each span goes by its own."""
    fresh = np.diff(number, prepend=-1) != 0
    if fresh.all():
        return _Crowns(top.at.copy(), top.sine.copy(), (found.end - found.start) * step_s >= ALWAYS_S)
    heads = np.flatnonzero(fresh)
    tails = np.append(heads[1:], number.size) - 1
    which = np.cumsum(fresh) - 1
    best = np.lexsort((top.sine, which))[tails][which]
    endless = ((found.end[tails] - found.start[heads]) * step_s >= ALWAYS_S)[which]
    best = np.where(endless, np.arange(number.size), best)
    return _Crowns(top.at[best], top.sine[best], endless)


def _cut_by_masks(
    block: Block, places: Stations, masks: Sequence[Mask], scene: Scene, found: Spans, crown: _Crowns, top: Summits
) -> tuple[Spans, _Crowns, Summits]:
    """Spans above the lowest point of a mask that depends on azimuth, replaced by their pieces above the mask."""
    shaped = np.array([not mask.constant for mask in masks])
    if not shaped.any():
        return found, crown, top
    antenna, own = np.divmod(found.pair, scene.objects)
    table = joined_masks(masks)
    mine = np.flatnonzero(shaped[antenna])
    parents, starts, ends = [], [], []
    for at in range(0, mine.size, _SPANS_AT_ONCE):
        some = mine[at : at + _SPANS_AT_ONCE]
        here = places.subset(antenna[some])
        heaven = sky(block, here, own[some], found.centre[some], found.start[some], found.end[some])
        pieces = cut_to_masks(heaven, table, antenna[some], found.start[some], found.end[some], top.at[some])
        parents.append(some[pieces.window])
        starts.append(pieces.start)
        ends.append(pieces.end)
    if not mine.size:
        return found, crown, top
    pieces_of = np.concatenate(parents), np.concatenate(starts), np.concatenate(ends)
    return _replaced(scene, found, crown, top, np.flatnonzero(~shaped[antenna]), *pieces_of)


def _cut_by_reaches(
    block: Block,
    places: Stations,
    reaches: Sequence[Reach | None],
    scene: Scene,
    found: Spans,
    crown: _Crowns,
    top: Summits,
) -> tuple[Spans, _Crowns, Summits]:
    """Spans of antennas whose mount cannot point everywhere, replaced by their pieces within its reach."""
    for number, reach in enumerate(reaches):
        if reach is None:
            continue
        antenna, own = np.divmod(found.pair, scene.objects)
        mine = np.flatnonzero(antenna == number)
        parents, starts, ends = [], [], []
        for at in range(0, mine.size, _SPANS_AT_ONCE):
            some = mine[at : at + _SPANS_AT_ONCE]
            here = places.subset(antenna[some])
            heaven = sky(block, here, own[some], found.centre[some], found.start[some], found.end[some])
            piece, start, end = cut_to_reach(heaven, reach, found.start[some], found.end[some], top.at[some])
            parents.append(some[piece])
            starts.append(start)
            ends.append(end)
        if mine.size:
            pieces_of = np.concatenate(parents), np.concatenate(starts), np.concatenate(ends)
            rest = np.flatnonzero(antenna != number)
            found, crown, top = _replaced(scene, found, crown, top, rest, *pieces_of)
    return found, crown, top


def _replaced(
    scene: Scene,
    found: Spans,
    crown: _Crowns,
    top: Summits,
    rest: Indices,
    parent: Indices,
    start: Floats,
    end: Floats,
) -> tuple[Spans, _Crowns, Summits]:
    """The spans ``rest`` as they are, and the pieces [start, end] of the spans ``parent`` instead of all others."""
    above = summits(scene, found.pair[parent], start, end)
    endless = crown.endless[parent]
    cut = Spans(
        found.pair[parent],
        start,
        end,
        found.open_start[parent] & (start == found.start[parent]),
        found.open_end[parent] & (end == found.end[parent]),
        found.centre[parent],
    )
    renamed = _Crowns(
        np.where(endless, above.at, crown.at[parent]), np.where(endless, above.sine, crown.sine[parent]), endless
    )
    return _followed(found, rest, cut), _followed(crown, rest, renamed), _followed(top, rest, above)


_Columns = TypeVar("_Columns", Spans, _Crowns, Summits)


def _rows(table: _Columns, index: Indices) -> _Columns:
    return type(table)(*(getattr(table, f.name)[index] for f in fields(table)))


def _followed(table: _Columns, rest: Indices, more: _Columns) -> _Columns:
    """The rows ``rest`` of ``table``, then ``more``."""
    names = [f.name for f in fields(table)]
    return type(table)(*(np.concatenate([getattr(table, name)[rest], getattr(more, name)]) for name in names))


def _azimuths(
    block: Block, places: Stations, antenna: Indices, own: Indices, centre: Indices, edges: Floats, inside: Flags
) -> Floats:
    """Azimuths (2, n) in deg at both ``edges`` of the windows inside the planning horizon; NaN for the others."""
    found = np.full(edges.shape, np.nan)
    short, long = np.flatnonzero(inside & (centre >= 0)), np.flatnonzero(inside & (centre < 0))
    axes = places.east, places.north
    found[:, short] = azimuth_of(*_along(
        block, places, axes, antenna[short], own[short], centre[short], edges[:, short], stencil.interpolate_near))
    for edge in (0, 1):
        at = edges[edge, long]
        sample = np.floor(at).astype(np.int64)
        east, north = _along(block, places, axes, antenna[long], own[long], sample, at[None])
        found[edge, long] = azimuth_of(east[0], north[0])
    return found


def _peak_deg(block: Block, places: Stations, antenna: Indices, own: Indices, top: Summits) -> Floats:
    """Elevation at the highest moment; near the zenith from the horizontal distance, as the arcsine is blunt there."""
    degrees = np.degrees(np.arcsin(np.minimum(top.sine, 1.0)))
    steep = np.flatnonzero(top.sine > _STEEP_SINE)
    at = top.at[steep]
    sample = np.floor(at).astype(np.int64)
    axes = places.east, places.north, places.up
    east, north, up = _along(block, places, axes, antenna[steep], own[steep], sample, at[None])
    degrees[steep] = np.degrees(np.arctan2(up[0], np.hypot(east[0], north[0])))
    return np.asarray(degrees)


def _along(
    block: Block,
    places: Stations,
    axes: Sequence[Floats],
    antenna: Indices,
    own: Indices,
    sample: Indices,
    at: Floats,
    interpolate: Callable[..., Floats] = stencil.interpolate,
) -> list[Floats]:
    """Distance (k, n) in km along each of the antennas' ``axes`` at grid instants ``at`` (k, n).

    ``sample`` (n,) is where the stencils lie.
    """
    line = [
        part - places.positions_km[:, k].take(antenna)
        for k, part in enumerate(interpolate(tuple(block.positions_km), own, sample, at))
    ]
    return [np.asarray(sum(axis[:, k].take(antenna) * part for k, part in enumerate(line))) for axis in axes]
