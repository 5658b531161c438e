"""Where F passes zero: between samples of different sign, and where only a close look shows it.

    F                     .  a hidden pass: no sample above zero, found at the discrete maximum
    |      ___           . .
0 --+-----/---\\---------.---.-------
    |    /     \\       *     *
    |___/       \\_____/       \\____
"""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np

from passplan.geometry.curves import excess, excess_slope
from passplan.geometry.roots import Flags, Indices, solve
from passplan.geometry.scene import Scene
from passplan.geometry.timescale import Floats

# The parabola through three samples rises above them by at most an eighth of its second difference, and the
# true curve lies within a few hundredths of the parabola.
_SLACK = 0.25


@dataclass(frozen=True)
class Brackets:
    """Brackets [low, high] of crossings and first guesses, in steps from ``sample``."""

    pair: Indices
    sample: Indices
    low: Floats
    high: Floats
    guess: Floats
    rising: Flags


def brackets(scene: Scene, above: Flags) -> Brackets:
    """Brackets of every zero of F, in order of pair and time; ``above`` is F > 0 at the samples (pairs, times)."""
    plain, hidden = _plain(scene, above), _hidden(scene, above)
    if not hidden.pair.size:
        return plain
    # The few hidden ones are put among the many.
    keys = [part.pair * float(scene.length) + part.sample + 0.5 * (part.low + part.high) for part in (plain, hidden)]
    order = np.argsort(keys[1], kind="stable")
    place = np.searchsorted(keys[0], keys[1][order])
    columns = ((getattr(plain, f.name), getattr(hidden, f.name)[order]) for f in fields(Brackets))
    return Brackets(*(np.insert(many, place, few) for many, few in columns))


def _plain(scene: Scene, above: Flags) -> Brackets:
    """Intervals between samples of different sign."""
    pair, interval = np.divmod(np.flatnonzero(above[:, 1:] != above[:, :-1]), scene.length - 1)
    guess = _cubic_guess(scene, pair, interval)
    return Brackets(pair, interval, np.zeros(pair.size), np.ones(pair.size), guess, ~above[pair, interval])


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


def _hidden(scene: Scene, above: Flags) -> Brackets:
    """Both sides of tops above zero and of dips below it that no change of sign between samples shows."""
    climbing = scene.excess_km[:, 1:] > scene.excess_km[:, :-1]
    inner = above[:, 1:-1]
    crest = climbing[:, :-1] > (climbing[:, 1:] | inner)
    valley = (climbing[:, 1:] & inner) > climbing[:, :-1]
    tops, dips = _excursions(scene, np.flatnonzero(crest), True), _excursions(scene, np.flatnonzero(valley), False)
    return Brackets(*(np.concatenate([getattr(tops, f.name), getattr(dips, f.name)]) for f in fields(Brackets)))


def _excursions(scene: Scene, flat: Indices, top: bool) -> Brackets:
    """Of discrete extrema on the wrong side of zero, those whose true extremum lies on the other side.

    Each gives two brackets, in time order. The guesses are the zeros of the parabola at the extremum.
    """
    pair, sample = np.divmod(flat, scene.length - 2)
    sample = sample + 1
    likely = _may_cross(scene, pair, sample, top)
    pair, sample = pair[likely], sample[likely]
    powers, zero = scene.polynomials(pair, sample)
    data = powers, scene.sines[pair]
    x = solve(excess_slope, data, zero - 1.0, zero + 1.0, zero, not top, scene.tolerance)
    height, bend = excess(x, *data)[0], excess_slope(x, *data)[1]
    over = np.flatnonzero((height > 0.0) == top)
    x, half = (x - zero)[over], np.sqrt(np.abs(2.0 * height[over] / bend[over]))
    one = np.ones(over.size)
    return Brackets(
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
