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

from dataclasses import dataclass, fields

import numpy as np

from passplan.geometry import stencil
from passplan.geometry.products import pieces
from passplan.geometry.roots import Flags, Indices, solve
from passplan.geometry.stations import Stations
from passplan.geometry.timescale import Floats
from passplan.geometry.trajectory import Block

# The last Newton step, s. Newton is quadratic, so less than a microsecond is left after it; in a grazing pass,
# where it is not, as much is left as the step.
_TOLERANCE_S = 2e-4
# The parabola through three samples rises above them by at most an eighth of its second difference, and the
# true curve lies within a few hundredths of the parabola.
_SLACK = 0.25


@dataclass(frozen=True)
class Scene:
    """P (km), D (km2) and F (km) as (pairs, times) for antennas x objects; pair = antenna * objects + object.

    ``both`` is P and D as one array (2, pairs, times). ``sines`` (pairs,) are those of the lowest elevation
    of each pair's mask; ``tolerance`` is in grid steps.
    """

    both: Floats
    excess_km: Floats
    sines: Floats
    objects: int
    tolerance: float

    @property
    def length(self) -> int:
        """Samples per pair."""
        return int(self.excess_km.shape[1])

    @property
    def up_km(self) -> Floats:
        """P (pairs, times)."""
        return np.asarray(self.both[0])

    @property
    def range_km2(self) -> Floats:
        """D (pairs, times)."""
        return np.asarray(self.both[1])

    def polynomials(self, pair: Indices, sample: Indices) -> tuple[Floats, Floats]:
        """P and D as polynomials (14, 2, n) around ``sample``, and the x of that sample in them."""
        first, zero = stencil.place(sample, self.length)
        rows = np.concatenate([pair, pair + self.sines.size])
        powers = stencil.polynomials(self.both.reshape(-1, self.length), rows, np.concatenate([first, first]))
        return powers.reshape(stencil.POINTS, 2, -1), (sample - zero).astype(float)

    def at(self, pair: Indices, at: Floats) -> tuple[Floats, Floats]:
        """P and D (n,) at grid instants ``at``."""
        up, square = stencil.interpolate((self.both[0], self.both[1]), pair, at)
        return up, square


@dataclass(frozen=True)
class Spans:
    """Intervals above the mask: pair, start and end in grid steps; open where the grid, not the mask, ends one."""

    pair: Indices
    start: Floats
    end: Floats
    open_start: Flags
    open_end: Flags


def view(block: Block, places: Stations, sines: Floats) -> Scene:
    """The scene of ``block`` from n antennas at ``places`` with the sines of their lowest elevations (n,).

    P and D are linear in (r, |r|^2, 1), so one matrix product gives both for every antenna.
    """
    _, objects, length = block.positions_km.shape
    flat = block.positions_km.reshape(3, -1)
    extended = np.empty((5, flat.shape[1]))
    extended[:3] = flat
    np.einsum("ij,ij->j", flat, flat, out=extended[3])
    extended[4] = 1.0
    count = sines.size
    linear = np.zeros((2 * count, 5))
    linear[:count, :3] = places.up
    linear[:count, 4] = -np.einsum("ij,ij->i", places.up, places.positions_km)
    linear[count:, :3] = -2.0 * places.positions_km
    linear[count:, 3] = 1.0
    linear[count:, 4] = np.einsum("ij,ij->i", places.positions_km, places.positions_km)
    both = np.empty((2 * count, flat.shape[1]))
    excess = np.empty((count, flat.shape[1]))
    for piece in pieces(2 * count, 5, flat.shape[1]):
        part, here = both[:, piece], excess[:, piece]
        np.matmul(linear, extended[:, piece], out=part)
        np.sqrt(part[count:], out=here)
        np.multiply(here, -sines[:, None], out=here)
        np.add(here, part[:count], out=here)
    return Scene(
        both.reshape(2, -1, length),
        excess.reshape(-1, length),
        np.repeat(sines, objects),
        objects,
        _TOLERANCE_S / block.step_s,
    )


def spans(scene: Scene) -> Spans:
    """Every interval with F > 0, hidden passes and hidden dips included, ordered by pair and time."""
    above = scene.excess_km > 0.0
    plain, hidden = _plain(scene, above), _hidden(scene, above)
    every = _Brackets(*(np.concatenate([getattr(plain, f.name), getattr(hidden, f.name)]) for f in fields(_Brackets)))
    powers, zero = scene.polynomials(every.pair, every.sample)
    data = powers, scene.sines[every.pair]
    x = solve(_excess, data, every.low + zero, every.high + zero, every.guess + zero, every.rising, scene.tolerance)
    pair, at, rising = every.pair, x + (every.sample - zero), every.rising
    if hidden.pair.size:
        pair, at, rising = _in_order(pair, at, rising, plain.pair.size, scene.length)
    return _paired(pair, at, rising, above)


@dataclass(frozen=True)
class _Brackets:
    """Brackets [low, high] of crossings and first guesses, in steps from ``sample``."""

    pair: Indices
    sample: Indices
    low: Floats
    high: Floats
    guess: Floats
    rising: Flags


def _excess(x: Floats, powers: Floats, sine: Floats) -> tuple[Floats, Floats]:
    """F and its slope."""
    (p, d), (dp, dd) = stencil.slope(powers, x)
    root = np.sqrt(d)
    dd /= root
    root *= sine
    p -= root
    dd *= sine
    dd *= 0.5
    dp -= dd
    return p, dp


def _excess_slope(x: Floats, powers: Floats, sine: Floats) -> tuple[Floats, Floats]:
    """The slope of F and its bend."""
    (_, d), (dp, dd), (ddp, ddd) = stencil.bend(powers, x)
    root = np.sqrt(d)
    return dp - 0.5 * sine * dd / root, ddp - 0.5 * sine * (ddd / root - 0.5 * dd * dd / (d * root))


def _plain(scene: Scene, above: Flags) -> _Brackets:
    """Intervals between samples of different sign."""
    pair, interval = np.divmod(np.flatnonzero(above[:, 1:] != above[:, :-1]), scene.length - 1)
    guess = _cubic_guess(scene, pair, interval)
    return _Brackets(pair, interval, np.zeros(pair.size), np.ones(pair.size), guess, ~above[pair, interval])


def _cubic_guess(scene: Scene, pair: Indices, interval: Indices) -> Floats:
    """A zero of F in each interval by the cubic through four samples: cheap, and saves turns of the dear iteration."""
    first = np.minimum(np.maximum(interval - 1, 0), scene.length - 4)
    flat = scene.excess_km.reshape(-1)
    at = pair * scene.length + first
    f0, f1, f2, f3 = (flat.take(at + k) for k in range(4))
    # Newton's form on the nodes 0, 1, 2, 3.
    a, b, c = f1 - f0, 0.5 * (f2 - 2.0 * f1 + f0), (f3 - 3.0 * f2 + 3.0 * f1 - f0) / 6.0
    offset = (interval - first).astype(float)
    left, right = flat.take(pair * scene.length + interval), flat.take(pair * scene.length + interval + 1)
    x = offset + left / (left - right)
    for _ in range(2):
        inner = b + c * (x - 2.0)
        outer = a + (x - 1.0) * inner
        slope = outer + x * (inner + (x - 1.0) * c)
        with np.errstate(divide="ignore", invalid="ignore"):
            x = x - (f0 + x * outer) / slope
        x = np.fmin(np.fmax(x, offset), offset + 1.0)
    return np.asarray(x - offset, float)


def _in_order(
    pair: Indices, at: Floats, rising: Flags, plain: int, length: int
) -> tuple[Indices, Floats, Flags]:
    """All crossings in order of pair and time: the hidden ones at the end put among the ``plain`` ones before them."""
    key = pair * float(length) + at
    order = plain + np.argsort(key[plain:], kind="stable")
    place = np.searchsorted(key[:plain], key[order])
    return (
        np.insert(pair[:plain], place, pair[order]),
        np.insert(at[:plain], place, at[order]),
        np.insert(rising[:plain], place, rising[order]),
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


def _hidden(scene: Scene, above: Flags) -> _Brackets:
    """Both sides of tops above zero and of dips below it that no change of sign between samples shows."""
    climbing = scene.excess_km[:, 1:] > scene.excess_km[:, :-1]
    inner = above[:, 1:-1]
    crest = climbing[:, :-1] > (climbing[:, 1:] | inner)
    valley = (climbing[:, 1:] & inner) > climbing[:, :-1]
    tops, dips = _excursions(scene, np.flatnonzero(crest), True), _excursions(scene, np.flatnonzero(valley), False)
    return _Brackets(*(np.concatenate([getattr(tops, f.name), getattr(dips, f.name)]) for f in fields(_Brackets)))


def _excursions(scene: Scene, flat: Indices, top: bool) -> _Brackets:
    """Of discrete extrema on the wrong side of zero, those whose true extremum lies on the other side.

    Each gives two brackets, in time order. The guesses are the zeros of the parabola at the extremum.
    """
    pair, sample = np.divmod(flat, scene.length - 2)
    sample = sample + 1
    likely = _may_cross(scene, pair, sample, top)
    pair, sample = pair[likely], sample[likely]
    powers, zero = scene.polynomials(pair, sample)
    data = powers, scene.sines[pair]
    falling = np.full(pair.size, not top)
    x = solve(_excess_slope, data, zero - 1.0, zero + 1.0, zero, falling, scene.tolerance)
    height, bend = _excess(x, *data)[0], _excess_slope(x, *data)[1]
    over = np.flatnonzero((height > 0.0) == top)
    x, half = (x - zero)[over], np.sqrt(np.abs(2.0 * height[over] / bend[over]))
    one = np.ones(over.size)
    return _Brackets(
        np.repeat(pair[over], 2),
        np.repeat(sample[over], 2),
        np.stack([-one, x], axis=-1).reshape(-1),
        np.stack([x, one], axis=-1).reshape(-1),
        np.stack([x - half, x + half], axis=-1).reshape(-1),
        np.tile([top, not top], over.size),
    )


def _may_cross(scene: Scene, pair: Indices, sample: Indices, top: bool) -> Flags:
    """A safe first sieve: can F reach zero within a step of ``sample``, by bounds on P and D apart?"""
    flat = pair * scene.length + sample
    up, square, sine = scene.up_km.reshape(-1), scene.range_km2.reshape(-1), scene.sines[pair]
    p0, p1, p2 = (up.take(flat + k) for k in (-1, 0, 1))
    bend = _SLACK * np.abs(p0 - 2.0 * p1 + p2)
    reach = np.maximum(np.maximum(p0, p1), p2) + bend if top else np.minimum(np.minimum(p0, p1), p2) - bend
    # Most tops are far below the horizon, and P alone settles them.
    open_still = np.flatnonzero((reach >= 0.0) | (sine < 0.0)) if top else np.arange(pair.size)
    flat, sine = flat[open_still], sine[open_still]
    d0, d1, d2 = (square.take(flat + k) for k in (-1, 0, 1))
    bend = _SLACK * np.abs(d0 - 2.0 * d1 + d2)
    near = np.sqrt(np.maximum(np.minimum(np.minimum(d0, d1), d2) - bend, 0.0))
    far = np.sqrt(np.maximum(np.maximum(d0, d1), d2) + bend)
    bound = sine * np.where((sine >= 0.0) == top, near, far)
    may = np.zeros(pair.size, bool)
    may[open_still] = reach[open_still] >= bound if top else reach[open_still] <= bound
    return may
