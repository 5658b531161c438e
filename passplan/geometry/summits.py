"""The highest and the nearest moment of each window."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from passplan.geometry import stencil
from passplan.geometry.roots import Indices, solve
from passplan.geometry.scan import TOLERANCE, Scene
from passplan.geometry.timescale import Floats


@dataclass(frozen=True)
class Summits:
    """Per window: instant (grid steps) and sine of the highest elevation, and the least distance (km)."""

    at: Floats
    sine: Floats
    range_km: Floats


def summits(scene: Scene, pair: Indices, start: Floats, end: Floats) -> Summits:
    """Highest elevation and least range of the windows [start, end] (grid steps) of ``pair``, each (n,).

    The extremes lie at an edge, or near a discrete extremum of the samples in and next to the window;
    each of these is refined. The elevation peaks where P' D = P D'/2, the range where D' = 0.
    """
    low = np.clip(np.floor(start).astype(np.int64) - 1, 0, scene.length - 1)
    high = np.clip(np.floor(end).astype(np.int64) + 2, 0, scene.length - 1)
    window, sample = _ragged(low, high)
    flat = pair[window] * scene.length + sample
    up, square = scene.up_km.reshape(-1)[flat], scene.range_km2.reshape(-1)[flat]
    sine = up / np.sqrt(square)
    edge_at, edge_sine, edge_nearness = _edges(scene, pair, start, end)
    highest = _Best(edge_at, edge_sine)
    crest = _interior_maxima(sine, window)
    at, reached, _ = _refine(scene, pair[window[crest]], sample[crest], _toward_peak, False)
    inside = (at >= start[window[crest]]) & (at <= end[window[crest]])
    highest.offer(window[crest][inside], at[inside], reached[inside])
    nearest = _Best(edge_at, edge_nearness)
    close = _interior_maxima(-square, window)
    at, _, distance = _refine(scene, pair[window[close]], sample[close], _toward_nearest, True)
    inside = (at >= start[window[close]]) & (at <= end[window[close]])
    nearest.offer(window[close][inside], at[inside], -distance[inside])
    return Summits(highest.at, highest.score, -nearest.score)


class _Best:
    """Keeps the best offer per window."""

    def __init__(self, at: tuple[Floats, Floats], score: tuple[Floats, Floats]) -> None:
        later = score[1] > score[0]
        self.at = np.where(later, at[1], at[0])
        self.score = np.where(later, score[1], score[0])

    def offer(self, window: Indices, at: Floats, score: Floats) -> None:
        # Ascending scores, so that of several offers to one window the best is written last.
        order = np.argsort(score, kind="stable")
        window, at, score = window[order], at[order], score[order]
        better = score > self.score[window]
        self.at[window[better]], self.score[window[better]] = at[better], score[better]


def _ragged(low: Indices, high: Indices) -> tuple[Indices, Indices]:
    """Window number and sample number of all samples low..high of each window."""
    count = high - low + 1
    window = np.repeat(np.arange(low.size), count)
    ends = np.cumsum(count)
    return window, np.arange(window.size) - np.repeat(ends - count - low, count)


def _interior_maxima(values: Floats, window: Indices) -> Indices:
    """Places where a value is not below its neighbours, all three in one window."""
    if values.size < 3:
        return np.zeros(0, np.int64)
    climbing = values[1:] > values[:-1]
    top = climbing[:-1] & ~climbing[1:] & (window[2:] == window[:-2])
    return np.flatnonzero(top) + 1


def _edges(
    scene: Scene, pair: Indices, start: Floats, end: Floats
) -> tuple[tuple[Floats, Floats], tuple[Floats, Floats], tuple[Floats, Floats]]:
    sines, nearness = [], []
    for at in (start, end):
        up, square = _at(scene, pair, at)
        distance = np.sqrt(square)
        sines.append(up / distance)
        nearness.append(-distance)
    return (start, end), (sines[0], sines[1]), (nearness[0], nearness[1])


def _at(scene: Scene, pair: Indices, at: Floats) -> tuple[Floats, Floats]:
    """P and D at any instants."""
    first, zero = stencil.place(np.floor(at).astype(np.int64), scene.length)
    weight = stencil.weights(at - zero)
    index = pair * scene.length + first + np.arange(stencil.POINTS)[:, None]
    up = np.einsum("ij,ij->j", weight, scene.up_km.reshape(-1)[index])
    return up, np.einsum("ij,ij->j", weight, scene.range_km2.reshape(-1)[index])


def _toward_peak(up: Floats, square: Floats, x: Floats) -> tuple[Floats, Floats]:
    p, dp, ddp = stencil.bend(up, x)
    d, dd, ddd = stencil.bend(square, x)
    return dp * d - 0.5 * p * dd, ddp * d + 0.5 * (dp * dd - p * ddd)


def _toward_nearest(up: Floats, square: Floats, x: Floats) -> tuple[Floats, Floats]:
    _, dd, ddd = stencil.bend(square, x)
    return dd, ddd


def _refine(
    scene: Scene, pair: Indices, sample: Indices, slope_of: object, rising: bool
) -> tuple[Floats, Floats, Floats]:
    """Instant (grid steps), sine of elevation and range at the true extremum within a step of ``sample``."""
    first, zero = stencil.place(sample, scene.length)
    up = stencil.polynomials(scene.up_km, pair, first)
    square = stencil.polynomials(scene.range_km2, pair, first)
    middle = (sample - zero).astype(float)

    def function(active: Indices, x: Floats) -> tuple[Floats, Floats]:
        if active.size == pair.size:
            return slope_of(up, square, x)  # type: ignore[operator,no-any-return]
        return slope_of(up[:, active], square[:, active], x)  # type: ignore[operator,no-any-return]

    direction: NDArray[np.bool_] = np.full(pair.size, rising)
    x = solve(function, middle - 1.0, middle + 1.0, middle, direction, TOLERANCE)
    distance = np.sqrt(stencil.value(square, x))
    return x + zero, stencil.value(up, x) / distance, distance
