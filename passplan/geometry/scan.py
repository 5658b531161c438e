"""Rises and sets above a constant elevation, for all pairs of a block at once.

For an object at r and an antenna at s with vertical u, two scalars are smooth in time and carry the
whole question:

    P = u . (r - s)   (km above the antenna's horizontal plane),   D = |r - s|^2   (km2)

The object is above elevation m while F = P - sin(m) sqrt(D) > 0. sqrt(D) itself is not smooth (it has
a sharp bottom in an overhead pass), so P and D are what gets interpolated.

        F                     .  a hidden pass: no sample above zero, found at the discrete maximum
        |      ___           . .
    0 --+-----/---\\---------.---.-------
        |    /     \\       *     *
        |___/       \\_____/       \\____
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from passplan.geometry import stencil
from passplan.geometry.roots import Indices, solve
from passplan.geometry.stations import Stations
from passplan.geometry.timescale import Floats
from passplan.geometry.trajectory import Block

# In grid steps: a microsecond or better for every step in use, and near the end of double precision.
TOLERANCE = 1e-9
# A parabola through three samples misses the true extremum between them by less than half its bend.
_SLACK = 0.5


@dataclass(frozen=True)
class Scene:
    """P (km), D (km2) and F (km) as (pairs, times) for antennas x objects; pair = antenna * objects + object."""

    up_km: Floats
    range_km2: Floats
    excess_km: Floats
    sines: Floats
    objects: int

    @property
    def length(self) -> int:
        """Samples per pair."""
        return int(self.up_km.shape[1])


@dataclass(frozen=True)
class Spans:
    """Intervals above the mask: pair, start and end in grid steps; open where the grid, not the mask, ends one."""

    pair: Indices
    start: Floats
    end: Floats
    open_start: NDArray[np.bool_]
    open_end: NDArray[np.bool_]


def view(block: Block, places: Stations, sines: Floats) -> Scene:
    """The scene of ``block`` from n antennas at ``places`` with the sines of their lowest elevations (n,)."""
    flat = block.positions_km.reshape(3, -1)
    up = places.up @ flat
    up -= np.einsum("ij,ij->i", places.up, places.positions_km)[:, None]
    distance = (-2.0 * places.positions_km) @ flat
    distance += np.einsum("ij,ij->j", flat, flat)
    distance += np.einsum("ij,ij->i", places.positions_km, places.positions_km)[:, None]
    excess = np.sqrt(distance)
    excess *= -sines[:, None]
    excess += up
    objects = block.positions_km.shape[1]
    shape = (-1, block.positions_km.shape[2])
    return Scene(up.reshape(shape), distance.reshape(shape), excess.reshape(shape), np.repeat(sines, objects), objects)


def spans(scene: Scene) -> Spans:
    """Every interval with F > 0, hidden passes and hidden dips included, ordered by pair and time."""
    above = scene.excess_km > 0.0
    change = above[:, 1:] != above[:, :-1]
    pair, interval = np.divmod(np.flatnonzero(change), scene.length - 1)
    crossing = _Brackets(pair, interval, np.zeros(pair.size), np.ones(pair.size), ~above[pair, interval])
    hidden = _hidden(scene, above)
    brackets = crossing.joined(hidden) if hidden.pair.size else crossing
    at = _cross(scene, brackets)
    order = np.lexsort((at, brackets.pair)) if hidden.pair.size else np.arange(at.size)
    pair, at, rising = brackets.pair[order], at[order], brackets.rising[order]
    return _paired(pair, at, rising, above)


@dataclass(frozen=True)
class _Brackets:
    """Brackets [low, high] around crossings, in steps from sample ``base``."""

    pair: Indices
    base: Indices
    low: Floats
    high: Floats
    rising: NDArray[np.bool_]

    def joined(self, other: _Brackets) -> _Brackets:
        names = ("pair", "base", "low", "high", "rising")
        return _Brackets(*(np.concatenate([getattr(self, n), getattr(other, n)]) for n in names))


def _paired(pair: Indices, at: Floats, rising: NDArray[np.bool_], above: NDArray[np.bool_]) -> Spans:
    """Match rises with sets; pairs that are up at an end of the grid get that end."""
    last = above.shape[1] - 1
    opened, unclosed = np.flatnonzero(above[:, 0]), np.flatnonzero(above[:, -1])
    start_pair = np.concatenate([pair[rising], opened])
    start = np.concatenate([at[rising], np.zeros(opened.size)])
    end_pair = np.concatenate([pair[~rising], unclosed])
    end = np.concatenate([at[~rising], np.full(unclosed.size, float(last))])
    open_start = np.arange(start.size) >= start.size - opened.size
    open_end = np.arange(end.size) >= end.size - unclosed.size
    if opened.size or unclosed.size:
        first, second = np.lexsort((start, start_pair)), np.lexsort((end, end_pair))
        start_pair, start, open_start = start_pair[first], start[first], open_start[first]
        end, open_end = end[second], open_end[second]
    return Spans(start_pair, start, end, open_start, open_end)


def _cross(scene: Scene, b: _Brackets) -> Floats:
    """The crossings in grid steps."""
    first, zero = stencil.place(b.base, scene.length)
    up = stencil.polynomials(scene.up_km, b.pair, first)
    square = stencil.polynomials(scene.range_km2, b.pair, first)
    sine = scene.sines[b.pair]
    shift = (b.base - zero).astype(float)

    def function(active: Indices, x: Floats) -> tuple[Floats, Floats]:
        whole = active.size == sine.size
        p, dp = stencil.slope(up if whole else up[:, active], x)
        d, dd = stencil.slope(square if whole else square[:, active], x)
        s = sine if whole else sine[active]
        root = np.sqrt(d)
        return p - s * root, dp - 0.5 * s * dd / root

    nearest = np.minimum(b.base + 1, scene.length - 1)
    left, right = scene.excess_km[b.pair, b.base], scene.excess_km[b.pair, nearest]
    guess = np.where((b.low == 0.0) & (b.high == 1.0), left / np.where(left == right, 1.0, left - right), 0.5 * (b.low + b.high))
    x = solve(function, b.low + shift, b.high + shift, guess + shift, b.rising, TOLERANCE)
    return np.asarray(x + zero, float)


def _hidden(scene: Scene, above: NDArray[np.bool_]) -> _Brackets:
    """Brackets of pairs of crossings that no change of sign between samples shows."""
    climbing = scene.excess_km[:, 1:] > scene.excess_km[:, :-1]
    inner = above[:, 1:-1]
    crest = climbing[:, :-1] & ~climbing[:, 1:]
    crest &= ~inner
    valley = climbing[:, 1:] & ~climbing[:, :-1]
    valley &= inner
    parts = [_excursions(scene, np.flatnonzero(part), top) for part, top in ((crest, True), (valley, False))]
    return parts[0].joined(parts[1])


def _excursions(scene: Scene, flat: Indices, top: bool) -> _Brackets:
    """Of discrete extrema on the wrong side of zero, those whose true extremum lies on the other side."""
    pair, sample = np.divmod(flat, scene.length - 2)
    sample = sample + 1
    likely = _may_cross(scene, pair, sample, top)
    pair, sample = pair[likely], sample[likely]
    first, zero = stencil.place(sample, scene.length)
    up = stencil.polynomials(scene.up_km, pair, first)
    square = stencil.polynomials(scene.range_km2, pair, first)
    sine = scene.sines[pair]
    middle = (sample - zero).astype(float)

    def function(active: Indices, x: Floats) -> tuple[Floats, Floats]:
        p, dp, ddp = stencil.bend(up[:, active], x)
        d, dd, ddd = stencil.bend(square[:, active], x)
        s, root = sine[active], np.sqrt(d)
        return dp - 0.5 * s * dd / root, ddp - 0.5 * s * (ddd / root - 0.5 * dd * dd / (d * root))

    x = solve(function, middle - 1.0, middle + 1.0, middle, np.full(pair.size, not top), TOLERANCE)
    extreme = stencil.value(up, x) - sine * np.sqrt(stencil.value(square, x))
    over = np.flatnonzero((extreme > 0.0) == top)
    pair, sample, x = pair[over], sample[over], (x - middle)[over]
    one, sign = np.ones(pair.size), np.full(pair.size, top)
    before = _Brackets(pair, sample, -one, x, sign)
    return before.joined(_Brackets(pair, sample, x, one, ~sign))


def _may_cross(scene: Scene, pair: Indices, sample: Indices, top: bool) -> NDArray[np.bool_]:
    """A safe first sieve: can F reach zero within a step of ``sample``, by bounds on P and D apart?"""
    flat = pair * scene.length + sample
    p0, p1, p2 = (scene.up_km.reshape(-1)[flat + k] for k in (-1, 0, 1))
    d0, d1, d2 = (scene.range_km2.reshape(-1)[flat + k] for k in (-1, 0, 1))
    p_bend, d_bend = _SLACK * np.abs(p0 - 2.0 * p1 + p2), _SLACK * np.abs(d0 - 2.0 * d1 + d2)
    near = np.sqrt(np.maximum(np.minimum(np.minimum(d0, d1), d2) - d_bend, 0.0))
    far = np.sqrt(np.maximum(np.maximum(d0, d1), d2) + d_bend)
    sine = scene.sines[pair]
    if top:
        reach = np.maximum(np.maximum(p0, p1), p2) + p_bend
        return np.asarray(reach >= sine * np.where(sine >= 0.0, near, far))
    reach = np.minimum(np.minimum(p0, p1), p2) - p_bend
    return np.asarray(reach <= sine * np.where(sine >= 0.0, far, near))
