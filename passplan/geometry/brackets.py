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

from passplan.geometry.curves import excess, excess_slope, vertex
from passplan.geometry.roots import Flags, Indices, solve
from passplan.geometry.scene import Scene
from passplan.geometry.timescale import Floats

# The true curve lies within so much of its second difference of the parabola through three samples: it is a few
# hundredths at the steps that ``regimes`` chooses, and a hundredth more between the looks. The parabola
# itself rises above the samples by at most an eighth.
_SLACK = 0.1
# No arc between two samples is longer than its chord by so much: the objects turn by a third of a radian at most.
_ARC = 1.1
_LOOKS = np.linspace(-1.0, 1.0, 9)[:, None]


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
    # All pairs in one row, which compares twice as fast; what seems to be at a seam between two is left out.
    flat, up = scene.excess_km.reshape(-1), above.reshape(-1)
    climbing, inner = flat[1:] > flat[:-1], up[1:-1]
    crests = np.flatnonzero(climbing[:-1] > (climbing[1:] | inner)) + 1
    valleys = np.flatnonzero((climbing[1:] & inner) > climbing[:-1]) + 1
    crests = crests[flat.take(crests) > -_rise_km(scene).take(crests // scene.length)]
    crests, valleys = (some[_is_inside(some, scene.length)] for some in (crests, valleys))
    tops, dips = _excursions(scene, crests, True), _excursions(scene, valleys, False)
    return Brackets(*(np.concatenate([getattr(tops, f.name), getattr(dips, f.name)]) for f in fields(Brackets)))


def _is_inside(flat: Indices, length: int) -> Flags:
    """Whether samples, by their number, are not at an end of their pair."""
    sample = flat % length
    return np.asarray((sample > 0) & (sample < length - 1))


def _rise_km(scene: Scene) -> Floats:
    """More than F can rise above a sample that is no lower than its neighbours, within a step of it (pairs,).

    Within a step the range changes by an arc at most, so P is higher by sin(m) arcs at a neighbour at most, and between
    the samples by their second difference and the slack; the term in the range adds as much again. (Own derivation.)
    """
    steps = 2.0 * _ARC * np.abs(scene.sines).reshape(-1, scene.objects) * scene.step_km
    return np.asarray((steps + (0.125 + _SLACK) * scene.bend_km).reshape(-1))


def _excursions(scene: Scene, flat: Indices, top: bool) -> Brackets:
    """Of discrete extrema on the wrong side of zero, those whose true extremum lies on the other side.

    ``flat`` are their numbers among all samples. Each gives two brackets, in time order. The guesses are the zeros of
    the parabola at the extremum.
    """
    pair, sample = np.divmod(flat, scene.length)
    likely = _may_cross(scene, pair, sample, top)
    pair, sample = pair[likely], sample[likely]
    powers, zero = scene.polynomials(pair, sample)
    data = powers, scene.sines[pair]
    guess = zero + vertex(scene.excess_km.reshape(-1), pair * scene.length + sample)
    x = solve(excess_slope, data, zero - 1.0, zero + 1.0, guess, not top, scene.tolerance)
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
    """A safe sieve: can F reach zero within a step of ``sample``? Parabolas of P and D tell, within ``_SLACK``."""
    flat = pair * scene.length + sample
    sine, side = scene.sines[pair], 1.0 if top else -1.0
    up, square = scene.up_km.reshape(-1), scene.range_km2.reshape(-1)
    reach = _extent(up, flat, side)
    # Most tops are far below the horizon, and P alone settles them; most others are settled by the samples of D.
    keep = np.flatnonzero((reach >= 0.0) | (sine < 0.0)) if top else np.arange(pair.size)
    reach, flat, sine = reach[keep], flat[keep], sine[keep]
    lean = -np.sign(side * sine)
    distance2 = lean * _extent(square, flat, lean)
    near = np.flatnonzero(reach - side * sine * np.sqrt(np.maximum(distance2, 0.0)) >= 0.0)
    keep, flat, sine, lean = keep[near], flat[near], sine[near], lean[near]
    up_there, bend = _parabola(up, flat)
    up_there += side * _SLACK * bend
    square_there, bend = _parabola(square, flat)
    square_there += lean * _SLACK * bend
    level = side * (up_there - sine * np.sqrt(np.maximum(square_there, 0.0)))
    may = np.zeros(pair.size, bool)
    may[keep] = level.max(axis=0, initial=-np.inf) >= 0.0
    return may


def _extent(values: Floats, at: Indices, lean: Floats | float) -> Floats:
    """The most that ``lean`` (1 or -1) times the curve through each value and its neighbours can be between them."""
    before, here, after = (values.take(at + k) for k in (-1, 0, 1))
    most = np.maximum(np.maximum(lean * before, lean * here), lean * after)
    return np.asarray(most + (0.125 + _SLACK) * np.abs(before - 2.0 * here + after))


def _parabola(values: Floats, at: Indices) -> tuple[Floats, Floats]:
    """The parabola through each value and its neighbours at the ``_LOOKS``, (looks, n), and its second difference."""
    before, here, after = (values.take(at + k) for k in (-1, 0, 1))
    second = before - 2.0 * here + after
    return here + _LOOKS * (0.5 * (after - before) + _LOOKS * (0.5 * second)), np.abs(second)
