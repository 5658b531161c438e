"""The highest and the nearest moment of each window."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from passplan.geometry import stencil
from passplan.geometry.curves import toward_nearest, toward_peak, vertex
from passplan.geometry.roots import Flags, Indices, solve
from passplan.geometry.scene import Scene
from passplan.geometry.timescale import Floats

# In grid steps; elevation and range are flat at their extremes.
TOLERANCE = 1e-4


@dataclass(frozen=True)
class Summits:
    """Per window: instant (grid steps) and sine of the highest elevation, and the least range (km)."""

    at: Floats
    sine: Floats
    range_km: Floats


def summits(scene: Scene, pair: Indices, start: Floats, end: Floats) -> Summits:
    """Highest elevation and least range of the windows [start, end] (grid steps) of ``pair``, each (n,).

    An extreme lies near a discrete extremum of the samples in and next to the window, each of which is
    refined, or at an edge: the elevation peaks where P' D = P D'/2, the range is least where D' = 0. The
    edges are looked at where that leaves doubt: nothing found inside, an extreme just outside, or a better
    sample outside.
    """
    highest, nearest = _Best(start.size), _Best(start.size)
    doubtful = _near_samples(scene, pair, start, end, highest, nearest)
    for at in (start[doubtful], end[doubtful]):
        up, square = scene.at(pair[doubtful], at)
        highest.offer(doubtful, at, up / np.sqrt(square))
        nearest.offer(doubtful, at, -square)
    return Summits(highest.at, highest.score, np.sqrt(-nearest.score))


def _near_samples(scene: Scene, pair: Indices, start: Floats, end: Floats, highest: _Best, nearest: _Best) -> Indices:
    """Offer the extremes near the samples from two before each window to two after it; returns doubtful windows."""
    low = np.maximum(np.floor(start).astype(np.int64) - 1, 0)
    high = np.minimum(np.floor(end).astype(np.int64) + 2, scene.length - 1)
    window, sample = _ragged(low, high)
    flat = pair[window] * scene.length + sample
    square = scene.range_km2.reshape(-1).take(flat)
    sine = scene.up_km.reshape(-1).take(flat) / np.sqrt(square)
    crest, hollow = _tops(sine, window), _tops(-square, window)
    spot = np.flatnonzero(crest | hollow)
    owner, own_sample = window[spot], sample[spot]
    powers, zero = scene.polynomials(pair[owner], own_sample)
    doubtful = np.zeros(start.size, bool)
    for best, wanted, slope, rising in (
        (highest, crest[spot], toward_peak, False),
        (nearest, hollow[spot], toward_nearest, True),
    ):
        pick = np.flatnonzero(wanted)
        here = powers.take(pick, axis=-1)
        middle = zero[pick]
        guess = middle + vertex(square, spot[pick])
        data = (here if best is highest else stencil.derivative(here[:, 1]),)
        x = solve(slope, data, middle - 1.0, middle + 1.0, guess, rising, TOLERANCE)
        at = x + (own_sample[pick] - middle)
        inside = (at >= start[owner[pick]]) & (at <= end[owner[pick]])
        if best is highest:
            up, distance2 = stencil.value(here, x)
            score = up / np.sqrt(distance2)
        else:
            score = -stencil.value(here[:, 1], x)
        best.offer(owner[pick], at, np.where(inside, score, -np.inf))
        doubtful[owner[pick][~inside]] = True
    ends = np.cumsum(high - low + 1)
    for best, values in ((highest, sine), (nearest, -square)):
        doubtful |= _outside_better(best, values, ends, high - low)
    return np.flatnonzero(doubtful)


class _Best:
    """Keeps the best offer per window."""

    def __init__(self, size: int) -> None:
        self.at = np.full(size, np.nan)
        self.score = np.full(size, -np.inf)

    def offer(self, window: Indices, at: Floats, score: Floats) -> None:
        """Take the offers that beat what is there; ``window`` may name one several times."""
        if window.size > 1 and np.any(window[1:] == window[:-1]):
            # Ascending scores: of several offers to one window the best is written last.
            order = np.argsort(score, kind="stable")
            window, at, score = window[order], at[order], score[order]
        better = np.flatnonzero(score > self.score[window])
        self.at[window[better]], self.score[window[better]] = at[better], score[better]


def _ragged(low: Indices, high: Indices) -> tuple[Indices, Indices]:
    """Window number and sample number of all samples low..high of each window."""
    count = high - low + 1
    window = np.repeat(np.arange(low.size), count)
    return window, np.arange(window.size) - np.repeat(np.cumsum(count) - count - low, count)


def _tops(values: Floats, window: Indices) -> Flags:
    """Whether a value is not below its neighbours, all three in one window."""
    top = np.zeros(values.size, bool)
    if values.size > 2:
        climbing = values[1:] > values[:-1]
        top[1:-1] = (climbing[:-1] > climbing[1:]) & (window[2:] == window[:-2])
    return top


def _outside_better(best: _Best, values: Floats, ends: Indices, spread: Indices) -> Flags:
    """Windows without an extreme inside, or with an outermost sample that beats it."""
    if not ends.size:
        return np.zeros(0, bool)
    last, first = values[ends - 1], values[ends - 1 - spread]
    return np.asarray((best.score == -np.inf) | (last > best.score) | (first > best.score))
