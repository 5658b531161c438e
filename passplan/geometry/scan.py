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

from passplan.geometry import stencil
from passplan.geometry.products import product
from passplan.geometry.roots import Flags, Indices, solve
from passplan.geometry.stations import Stations
from passplan.geometry.timescale import Floats
from passplan.geometry.trajectory import Block

# The last Newton step, s. Newton is quadratic, so less than a microsecond is left after it; in a grazing pass,
# where it is not, 2 ms off is a billionth of a degree off.
_TOLERANCE_S = 2e-3
# A parabola through three samples misses the true extremum between them by less than half its bend.
_SLACK = 0.5


@dataclass(frozen=True)
class Scene:
    """P (km), D (km2) and F (km) as (pairs, times) for antennas x objects; pair = antenna * objects + object.

    ``sines`` (pairs,) are those of the lowest elevation of each pair's mask; ``tolerance`` is in grid steps.
    """

    up_km: Floats
    range_km2: Floats
    excess_km: Floats
    sines: Floats
    objects: int
    tolerance: float

    @property
    def length(self) -> int:
        """Samples per pair."""
        return int(self.up_km.shape[1])

    def polynomials(self, pair: Indices, sample: Indices) -> tuple[Floats, Floats, Floats]:
        """P and D as polynomials (14, n) around ``sample``, and the x of that sample in them."""
        first, zero = stencil.place(sample, self.length)
        up, square = (stencil.polynomials(part, pair, first) for part in (self.up_km, self.range_km2))
        return up, square, (sample - zero).astype(float)


@dataclass(frozen=True)
class Spans:
    """Intervals above the mask: pair, start and end in grid steps; open where the grid, not the mask, ends one."""

    pair: Indices
    start: Floats
    end: Floats
    open_start: Flags
    open_end: Flags


def view(block: Block, places: Stations, sines: Floats) -> Scene:
    """The scene of ``block`` from n antennas at ``places`` with the sines of their lowest elevations (n,)."""
    flat = block.positions_km.reshape(3, -1)
    up = product(places.up, flat)
    up -= np.einsum("ij,ij->i", places.up, places.positions_km)[:, None]
    distance = product(-2.0 * places.positions_km, flat)
    distance += np.einsum("ij,ij->j", flat, flat)
    distance += np.einsum("ij,ij->i", places.positions_km, places.positions_km)[:, None]
    excess = np.sqrt(distance)
    excess *= -sines[:, None]
    excess += up
    objects = block.positions_km.shape[1]
    shape = (-1, block.positions_km.shape[2])
    parts = (part.reshape(shape) for part in (up, distance, excess))
    return Scene(*parts, np.repeat(sines, objects), objects, _TOLERANCE_S / block.step_s)


def spans(scene: Scene) -> Spans:
    """Every interval with F > 0, hidden passes and hidden dips included, ordered by pair and time."""
    above = scene.excess_km > 0.0
    pair, interval = np.divmod(np.flatnonzero(above[:, 1:] != above[:, :-1]), scene.length - 1)
    rising = ~above[pair, interval]
    hidden = _hidden(scene, above)
    at = _crossings(scene, pair, interval, rising)
    if hidden.pair.size:
        pair, at, rising = _inserted(pair, at, rising, hidden, _hidden_crossings(scene, hidden), scene.length)
    return _paired(pair, at, rising, above)


@dataclass(frozen=True)
class _Hidden:
    """Extremes beyond zero between samples: within a step of ``sample``, ``at`` steps from it; tops or dips."""

    pair: Indices
    sample: Indices
    at: Floats
    top: Flags


def _excess(x: Floats, up: Floats, square: Floats, sine: Floats) -> tuple[Floats, Floats]:
    """F and its slope."""
    p, dp = stencil.slope(up, x)
    d, dd = stencil.slope(square, x)
    root = np.sqrt(d)
    dd /= root
    root *= sine
    p -= root
    dd *= sine
    dd *= 0.5
    dp -= dd
    return p, dp


def _excess_slope(x: Floats, up: Floats, square: Floats, sine: Floats) -> tuple[Floats, Floats]:
    """The slope of F and its bend."""
    _, dp, ddp = stencil.bend(up, x)
    d, dd, ddd = stencil.bend(square, x)
    root = np.sqrt(d)
    return dp - 0.5 * sine * dd / root, ddp - 0.5 * sine * (ddd / root - 0.5 * dd * dd / (d * root))


def _crossings(scene: Scene, pair: Indices, interval: Indices, rising: Flags) -> Floats:
    """Zeros of F (grid steps) in intervals between samples of different sign."""
    up, square, zero = scene.polynomials(pair, interval)
    left, right = scene.excess_km[pair, interval], scene.excess_km[pair, interval + 1]
    guess = zero + left / (left - right)
    x = solve(_excess, (up, square, scene.sines[pair]), zero, zero + 1.0, guess, rising, scene.tolerance)
    return np.asarray(x + (interval - zero), float)


def _hidden_crossings(scene: Scene, hidden: _Hidden) -> tuple[Floats, Floats]:
    """Zeros of F (grid steps) before and after each hidden extreme."""
    up, square, zero = scene.polynomials(hidden.pair, hidden.sample)
    data = (up, square, scene.sines[hidden.pair])
    extreme = zero + hidden.at
    before = solve(_excess, data, zero - 1.0, extreme, 0.5 * (zero - 1.0 + extreme), hidden.top, scene.tolerance)
    after = solve(_excess, data, extreme, zero + 1.0, 0.5 * (extreme + zero + 1.0), ~hidden.top, scene.tolerance)
    return before + (hidden.sample - zero), after + (hidden.sample - zero)


def _inserted(
    pair: Indices, at: Floats, rising: Flags, hidden: _Hidden, crossings: tuple[Floats, Floats], length: int
) -> tuple[Indices, Floats, Flags]:
    """All crossings in order of pair and time: the few hidden ones put among the many."""
    more_pair = np.repeat(hidden.pair, 2)
    more_at = np.stack(crossings, axis=-1).reshape(-1)
    more_rising = np.stack([hidden.top, ~hidden.top], axis=-1).reshape(-1)
    key = more_pair * float(length) + more_at
    order = np.argsort(key, kind="stable")
    place = np.searchsorted(pair * float(length) + at, key[order])
    return (
        np.insert(pair, place, more_pair[order]),
        np.insert(at, place, more_at[order]),
        np.insert(rising, place, more_rising[order]),
    )


def _paired(pair: Indices, at: Floats, rising: Flags, above: Flags) -> Spans:
    """Match rises with sets; pairs that are up at an end of the grid get that end."""
    opened, unclosed = np.flatnonzero(above[:, 0]), np.flatnonzero(above[:, -1])
    rises, falls = np.flatnonzero(rising), np.flatnonzero(~rising)
    first = np.searchsorted(pair[rises], opened, side="left")
    last = np.searchsorted(pair[falls], unclosed, side="right")
    return Spans(
        np.insert(pair[rises], first, opened),
        np.insert(at[rises], first, 0.0),
        np.insert(at[falls], last, float(above.shape[1] - 1)),
        np.insert(np.zeros(rises.size, bool), first, True),
        np.insert(np.zeros(falls.size, bool), last, True),
    )


def _hidden(scene: Scene, above: Flags) -> _Hidden:
    """Tops above zero and dips below it that no change of sign between samples shows."""
    climbing = scene.excess_km[:, 1:] > scene.excess_km[:, :-1]
    inner = above[:, 1:-1]
    crest = climbing[:, :-1] > (climbing[:, 1:] | inner)
    valley = (climbing[:, 1:] & inner) > climbing[:, :-1]
    tops, dips = (_excursions(scene, np.flatnonzero(part), top) for part, top in ((crest, True), (valley, False)))
    names = ("pair", "sample", "at", "top")
    return _Hidden(*(np.concatenate([getattr(tops, name), getattr(dips, name)]) for name in names))


def _excursions(scene: Scene, flat: Indices, top: bool) -> _Hidden:
    """Of discrete extrema on the wrong side of zero, those whose true extremum lies on the other side."""
    pair, sample = np.divmod(flat, scene.length - 2)
    sample = sample + 1
    likely = _may_cross(scene, pair, sample, top)
    pair, sample = pair[likely], sample[likely]
    up, square, zero = scene.polynomials(pair, sample)
    data = (up, square, scene.sines[pair])
    falling = np.full(pair.size, not top)
    x = solve(_excess_slope, data, zero - 1.0, zero + 1.0, zero, falling, scene.tolerance)
    over = np.flatnonzero((_excess(x, *data)[0] > 0.0) == top)
    return _Hidden(pair[over], sample[over], (x - zero)[over], np.full(over.size, top))


def _may_cross(scene: Scene, pair: Indices, sample: Indices, top: bool) -> Flags:
    """A safe first sieve: can F reach zero within a step of ``sample``, by bounds on P and D apart?"""
    flat = pair * scene.length + sample
    up, square, sine = scene.up_km.reshape(-1), scene.range_km2.reshape(-1), scene.sines[pair]
    p0, p1, p2 = (up.take(flat + k) for k in (-1, 0, 1))
    p_bend = _SLACK * np.abs(p0 - 2.0 * p1 + p2)
    d0, d1, d2 = (square.take(flat + k) for k in (-1, 0, 1))
    d_bend = _SLACK * np.abs(d0 - 2.0 * d1 + d2)
    near = np.sqrt(np.maximum(np.minimum(np.minimum(d0, d1), d2) - d_bend, 0.0))
    far = np.sqrt(np.maximum(np.maximum(d0, d1), d2) + d_bend)
    if top:
        reach = np.maximum(np.maximum(p0, p1), p2) + p_bend
        return np.asarray(reach >= sine * np.where(sine >= 0.0, near, far))
    reach = np.minimum(np.minimum(p0, p1), p2) - p_bend
    return np.asarray(reach <= sine * np.where(sine >= 0.0, far, near))
