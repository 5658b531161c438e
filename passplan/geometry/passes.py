"""From intervals above the mask to windows: whole passes, cuts by notches and by the planning horizon."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields

import numpy as np

from passplan.geometry import stencil
from passplan.geometry.identity import ALWAYS, slots
from passplan.geometry.masks import Mask
from passplan.geometry.notches import Sky, cut_to_mask
from passplan.geometry.pointing import azimuth_of
from passplan.geometry.regimes import ALWAYS_S
from passplan.geometry.roots import Flags, Indices
from passplan.geometry.scan import Scene, Spans, spans, view
from passplan.geometry.stations import Stations
from passplan.geometry.summits import Summits, summits
from passplan.geometry.timescale import Floats
from passplan.geometry.trajectory import Block

_STEEP_SINE = 0.98


@dataclass(frozen=True)
class Rows:
    """Windows as columns (n,). Times are ``utc_s``; ``whole_*`` are the edges without the planning horizon.

    Rows outside the horizon (``inside`` false) are kept where they belong to a pass that has a window in it.
    """

    spacecraft: Indices
    antenna: Indices
    whole_start_s: Floats
    whole_end_s: Floats
    open_start: Flags
    open_end: Flags
    slot: Indices
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
    block: Block, places: Stations, masks: Sequence[Mask], antennas: Indices, start_s: float, end_s: float
) -> Rows:
    """The windows of one block from the antennas numbered ``antennas`` (with their places and masks)."""
    sines = np.sin(np.radians([mask.lowest_deg for mask in masks]))
    scene = view(block, places, sines)
    found = spans(scene)
    low, high = (start_s - block.start_s) / block.step_s, (end_s - block.start_s) / block.step_s
    first_pass = _pass_numbers(scene, found)
    found, number = _near_horizon(found, first_pass, low, high)
    top = summits(scene, found.pair, found.start, found.end)
    slot = _slots(block, found, number, top)
    found, slot, top = _cut_by_masks(block, places, masks, scene, found, slot, top)
    start, end = np.clip(found.start, low, high), np.clip(found.end, low, high)
    inside = start < end
    cut = np.flatnonzero(inside & ((start != found.start) | (end != found.end)))
    if cut.size:
        part = summits(scene, found.pair[cut], start[cut], end[cut])
        for whole, clipped in ((top.at, part.at), (top.sine, part.sine), (top.range_km, part.range_km)):
            whole[cut] = clipped
    antenna, own = np.divmod(found.pair, scene.objects)
    azimuth = _azimuths(block, places, antenna, own, (start, end), inside)

    def utc(x: Floats) -> Floats:
        return np.asarray(block.start_s + block.step_s * x)

    return Rows(
        block.objects[own],
        antennas[antenna],
        utc(found.start),
        utc(found.end),
        found.open_start,
        found.open_end,
        slot,
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
    # Nearly all gaps are settled by the sample in their middle.
    middle = np.rint(0.5 * (low + high)).astype(np.int64)
    floor = np.minimum(scene.sines, 0.0)
    up = np.flatnonzero(scene.up_km[pair, middle] > floor[pair] * np.sqrt(scene.range_km2[pair, middle]))
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
    up, square = (stencil.interpolate(part, pair[gap], at) for part in (scene.up_km, scene.range_km2))
    below = up <= np.minimum(scene.sines, 0.0)[pair[gap]] * np.sqrt(square)
    return np.asarray(np.logical_or.reduceat(below, first))


def _near_horizon(found: Spans, number: Indices, low: float, high: float) -> tuple[Spans, Indices]:
    """Only the passes with a span in the planning horizon, all their spans."""
    touches = (found.end > low) & (found.start < high)
    wanted = np.zeros(int(number[-1]) + 1 if number.size else 0, bool)
    wanted[number[touches]] = True
    keep = wanted[number]
    return Spans(*(getattr(found, f.name)[keep] for f in fields(Spans))), number[keep]


def _slots(block: Block, found: Spans, number: Indices, top: Summits) -> Indices:
    """The slot of each span from the culmination of its pass; spans and passes of days are told apart.

    In a pass that never ends within the reach, a span that goes on for days is ``always``, and a span
    between two dips below the mask goes by its own culmination.
    """
    if not number.size:
        return np.zeros(0, np.int64)
    heads = np.flatnonzero(np.diff(number, prepend=-1))
    tails = np.append(heads[1:], number.size) - 1
    culmination = top.at.copy()
    if heads.size < number.size:
        which = np.cumsum(np.diff(number, prepend=-1) != 0) - 1
        order = np.lexsort((top.sine, which))
        culmination = top.at[order[tails]][which]
        endless = ((found.end[tails] - found.start[heads]) * block.step_s >= ALWAYS_S)[which]
        culmination = np.where(endless, top.at, culmination)
    slot = slots(block.start_s + block.step_s * culmination)
    return np.where((found.end - found.start) * block.step_s >= ALWAYS_S, ALWAYS, slot)


def _cut_by_masks(
    block: Block,
    places: Stations,
    masks: Sequence[Mask],
    scene: Scene,
    found: Spans,
    slot: Indices,
    top: Summits,
) -> tuple[Spans, Indices, Summits]:
    """Spans above the lowest point of a mask that depends on azimuth, replaced by their pieces above the mask."""
    antenna, own = np.divmod(found.pair, scene.objects)
    for number, mask in enumerate(masks):
        if mask.constant:
            continue
        mine = np.flatnonzero(antenna == number)
        if not mine.size:
            continue
        sky = Sky(block.positions_km, places.subset(slice(number, number + 1)))
        piece, start, end = cut_to_mask(sky, mask, own[mine], found.start[mine], found.end[mine], top.at[mine])
        parent = mine[piece]
        above = summits(scene, found.pair[parent], start, end)
        rest = np.flatnonzero(antenna != number)
        index = np.concatenate([rest, parent])
        opened = found.open_start[parent] & (start == found.start[parent])
        closed = found.open_end[parent] & (end == found.end[parent])
        found = Spans(
            found.pair[index],
            np.concatenate([found.start[rest], start]),
            np.concatenate([found.end[rest], end]),
            np.concatenate([found.open_start[rest], opened]),
            np.concatenate([found.open_end[rest], closed]),
        )
        slot = slot[index]
        top = Summits(*(np.concatenate([getattr(top, f.name)[rest], getattr(above, f.name)]) for f in fields(Summits)))
        antenna, own = antenna[index], own[index]
    return found, slot, top


def _azimuths(
    block: Block, places: Stations, antenna: Indices, own: Indices, edges: tuple[Floats, Floats], inside: Flags
) -> tuple[Floats, Floats]:
    """Azimuths (deg) at both edges of the windows inside the planning horizon; NaN for the others."""
    found = np.full((2, antenna.size), np.nan)
    some = np.flatnonzero(inside)
    at = np.concatenate([edge[some] for edge in edges])
    east, north, _ = _local(block, places, np.tile(antenna[some], 2), np.tile(own[some], 2), at)
    found[:, some] = azimuth_of(east, north).reshape(2, -1)
    return found[0], found[1]


def _peak_deg(block: Block, places: Stations, antenna: Indices, own: Indices, top: Summits) -> Floats:
    """Elevation at the highest moment; near the zenith from the horizontal distance, as the arcsine is blunt there."""
    degrees = np.degrees(np.arcsin(np.minimum(top.sine, 1.0)))
    steep = np.flatnonzero(top.sine > _STEEP_SINE)
    east, north, up = _local(block, places, antenna[steep], own[steep], top.at[steep])
    degrees[steep] = np.degrees(np.arctan2(up, np.hypot(east, north)))
    return np.asarray(degrees)


def _local(block: Block, places: Stations, antenna: Indices, own: Indices, at: Floats) -> tuple[Floats, Floats, Floats]:
    """East, north and up (km) at grid instants ``at`` for each window's antenna and object."""
    first, zero = stencil.place(np.floor(at).astype(np.int64), block.positions_km.shape[2])
    weight = stencil.weights(at - zero)
    rows = (np.einsum("ij,ij->j", weight, stencil.samples(part, own, first)) for part in block.positions_km)
    line = np.stack(list(rows), axis=-1) - places.positions_km[antenna]
    east, north, up = (np.einsum("ij,ij->i", axis[antenna], line) for axis in (places.east, places.north, places.up))
    return east, north, up
