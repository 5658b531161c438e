"""Rises and sets above a constant elevation and the summit between, for all pairs of a scene at once."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from passplan.geometry import stencil
from passplan.geometry.brackets import Brackets, brackets
from passplan.geometry.curves import excess, toward_nearest, toward_peak
from passplan.geometry.roots import Flags, Indices, solve
from passplan.geometry.scene import Scene
from passplan.geometry.summits import TOLERANCE, Summits, summits
from passplan.geometry.timescale import Floats

# Grid steps between rise and set for which one stencil serves the whole span: nearly all passes of low orbits. Two
# steps from the middle its error is 1.8 times that in the middle. The span lies within ``stencil.NEAR`` of the middle.
_SHORT = 4
# Samples beyond a span at which it is looked whether the object has set.
_LOOKS = 3
# A search that ends within so many tolerances of an edge has gone to the edge.
_AT_EDGE = 4.0


@dataclass(frozen=True)
class Spans:
    """Intervals above the mask: pair, start and end in grid steps; open where the grid, not the mask, ends one.

    ``centre`` is the sample whose stencil serves the whole span, or -1 where the span is too long for that.
    """

    pair: Indices
    start: Floats
    end: Floats
    open_start: Flags
    open_end: Flags
    centre: Indices


def spans(scene: Scene, low: float, high: float) -> tuple[Spans, Summits]:
    """Every interval with F > 0 whose pass may touch [low, high] (grid steps), by pair and time, and its summit."""
    above = scene.excess_km > 0.0
    crossings = brackets(scene, above)
    pair, rise, fall = _matched(crossings, above)
    # One more at the end serves the spans without a crossing, numbered -1.
    before = np.append(crossings.sample + np.floor(crossings.low).astype(np.int64), 0)
    behind = np.append(crossings.sample + 1, scene.length - 1)
    kept = np.flatnonzero(~(_apart(scene, pair, before[rise], high, -1) | _apart(scene, pair, behind[fall], low, 1)))
    pair, rise, fall = pair[kept], rise[kept], fall[kept]
    closed = np.flatnonzero((rise >= 0) & (fall >= 0))
    first, last = crossings.sample[rise[closed]], crossings.sample[fall[closed]]
    centre = np.full(pair.size, -1)
    middle = (first + last) // 2
    centre[closed] = np.where((last - first <= _SHORT) & stencil.is_whole(middle, scene.length), middle, -1)
    found = Spans(pair, np.zeros(pair.size), np.full(pair.size, scene.length - 1.0), rise < 0, fall < 0, centre)
    top = Summits(*np.empty((3, pair.size)))
    _solve_short(scene, found, top, crossings, rise, fall, np.flatnonzero(centre >= 0))
    _solve_long(scene, found, top, crossings, rise, fall, np.flatnonzero(centre < 0))
    return found, top


def _matched(crossings: Brackets, above: Flags) -> tuple[Indices, Indices, Indices]:
    """Pair, rise and set (numbers of crossings) of each span; -1 for pairs that are up at an end of the grid."""
    opened, unclosed = np.flatnonzero(above[:, 0]), np.flatnonzero(above[:, -1])
    rises, falls = np.flatnonzero(crossings.rising), np.flatnonzero(~crossings.rising)
    before = np.searchsorted(crossings.pair[rises], opened, side="left")
    after = np.searchsorted(crossings.pair[falls], unclosed, side="right")
    pair = np.insert(crossings.pair[rises], before, opened)
    return pair, np.insert(rises, before, -1), np.insert(falls, after, -1)


def _apart(scene: Scene, pair: Indices, sample: Indices, edge: float, way: int) -> Flags:
    """Spans that are over at ``sample``, on this side of ``edge``, with the true horizon passed before it is reached.

    ``way`` is 1 where the edge is later, -1 where it is earlier. What no sample shows is not called apart.
    """
    apart = np.zeros(pair.size, bool)
    near = np.flatnonzero(way * (edge - sample) > 0.0)
    floor = np.minimum(scene.sines[pair[near]], 0.0)
    for step in range(_LOOKS):
        at = sample[near] + way * step
        on_the_way = way * (edge - at) > 0.0
        flat = pair[near] * scene.length + np.clip(at, 0, scene.length - 1)
        level = scene.up_km.reshape(-1).take(flat) - floor * np.sqrt(scene.range_km2.reshape(-1).take(flat))
        apart[near[on_the_way & (level < 0.0)]] = True
    return apart


def _solve_short(
    scene: Scene, found: Spans, top: Summits, crossings: Brackets, rise: Indices, fall: Indices, some: Indices
) -> None:
    """Edges and summits of the spans ``some``, which one polynomial each describes from rise to set."""
    pair, centre = found.pair[some], found.centre[some]
    powers = scene.near(pair, centre)
    data = powers, scene.sines[pair]
    edges = []
    for number, rising in ((rise[some], True), (fall[some], False)):
        shift = crossings.sample[number] - centre
        bracket = (part[number] + shift for part in (crossings.low, crossings.high, crossings.guess))
        before, after, guess = bracket
        edges.append(solve(excess, data, before, after, guess, rising, scene.tolerance))
    low, high = edges
    middle = 0.5 * (low + high)
    peak = solve(toward_peak, (powers,), low, high, middle, False, TOLERANCE)
    nearest = solve(toward_nearest, (stencil.derivative(powers[:, 1]),), low, high, peak, True, TOLERANCE)
    # At an edge the range is not flat: milliseconds away from it are metres.
    for edge in (low, high):
        np.copyto(nearest, edge, where=np.abs(nearest - edge) < _AT_EDGE * TOLERANCE)
    up, distance2 = stencil.value(powers, peak)
    found.start[some], found.end[some] = low + centre, high + centre
    top.at[some] = peak + centre
    top.sine[some] = up / np.sqrt(distance2)
    top.range_km[some] = np.sqrt(stencil.value(powers[:, 1], nearest))


def _solve_long(
    scene: Scene, found: Spans, top: Summits, crossings: Brackets, rise: Indices, fall: Indices, some: Indices
) -> None:
    """Edges and summits of the spans ``some``, each edge by its own stencil; open edges stay as they are."""
    for edge, numbers, rising in ((found.start, rise, True), (found.end, fall, False)):
        closed = some[numbers[some] >= 0]
        number = numbers[closed]
        powers, zero = scene.polynomials(found.pair[closed], crossings.sample[number])
        data = powers, scene.sines[found.pair[closed]]
        low, high, guess = (part[number] + zero for part in (crossings.low, crossings.high, crossings.guess))
        x = solve(excess, data, low, high, guess, rising, scene.tolerance)
        edge[closed] = x + (crossings.sample[number] - zero)
    part = summits(scene, found.pair[some], found.start[some], found.end[some])
    top.at[some], top.sine[some], top.range_km[some] = part.at, part.sine, part.range_km
