"""The classes of a spacecraft as layers: storages of one class each that can be planned one by one.

A spacecraft sends the class that is worth most first, and when its storage is full it loses what is worth
least. Then the classes 1..k together (by falling weight) neither notice the classes below them nor care which
of them a MB belongs to: their joint amount follows the equations of a single class with their joint generation
and the whole capacity. With D(k) for what the classes 1..k deliver together, the worth is

    sum of w(k) (D(k) - D(k-1)) = sum of (w(k) - w(k+1)) D(k),   w after the last class = 0

so that a spacecraft with K classes is K independent storages, its layers: layer k holds the classes 1..k and is
worth w(k) - w(k+1) a MB; what overflows costs in the last one alone, which holds everything. (Own derivation;
``classes.py`` follows the classes themselves, and tests compare.)

A deadline limits what can be aboard of a class to what was acquired within it. As the oldest data goes first, a
single class with a deadline is exactly a storage of that capacity, which changes with time.

Where worth fades with age the same sum is taken over levels of worth instead of classes: with D(h) for the MB that are
worth more than h when they are sent, the worth is the integral of D(h). Of each class, what is younger than some age
is worth more than h, and no more of that can be delivered than by a storage of these classes with these ages as
deadlines. D falls as h rises, so that with levels 0 = h(0) < h(1) < ... up to the highest weight the worth is at most

    sum of (h(i) - h(i-1)) D(h(i-1))

(own derivation). Of fading worth, of deadlines of several classes and of storage freed late the layers thus allow at
least what is possible, so that bounds hold, and :attr:`~passplan.planning.problem.Fleet.loose` tells which spacecraft
they may overrate.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from itertools import pairwise

import numpy as np

from passplan.planning.arrays import Floats
from passplan.planning.streams import Keeping, Layer, Stream

# A class that fades has its levels this part of its weight apart, or a little less.
_LEVEL = 0.1


def is_loose(streams: Sequence[Stream], keeping: Keeping) -> bool:
    """Whether the layers of these classes may overrate them."""
    ages = any(math.isfinite(one.deadline_s) for one in streams)
    return (ages and (len(streams) > 1 or keeping.newest)) or any(one.fades for one in streams) or bool(
        keeping.acknowledged)


def layers_of(
    streams: Sequence[Stream], capacity_mb: float, spill_cost: float, *, by_level: bool = True,
) -> tuple[Layer, ...]:
    """The layers of classes given by falling weight. Their number does not change when all weights are scaled.

    Without ``by_level`` nothing is taken to fade, which may overrate it more.
    """
    for first, second in pairwise(streams):
        if second.weight > first.weight:
            raise ValueError(f"{second.name} is worth more than {first.name}; sort classes by falling weight")
    if by_level and any(one.fades for one in streams):
        return _by_level(streams, capacity_mb, spill_cost)
    below = [*(one.weight for one in streams[1:]), 0.0]
    return tuple(
        _layer(streams[: k + 1], one.weight - below[k], spill_cost if k == len(streams) - 1 else 0.0, capacity_mb)
        for k, one in enumerate(streams))


def _by_level(streams: Sequence[Stream], capacity_mb: float, spill_cost: float) -> tuple[Layer, ...]:
    """Layers by falling level of worth; the last one holds everything."""
    scale = max((one.weight / one.rank for one in streams if one.rank > 0.0), default=0.0)
    levels = sorted({0.0, *(level for one in streams for level in _levels(one))})
    layers = []
    for low, high in pairwise(levels):
        inside = [replace(one, deadline_s=min(one.deadline_s, age_s))
                  for one in streams for age_s in [_age_s(one, low)] if age_s > 0.0]
        if inside:
            layers.append(_layer(inside, scale * (high - low), 0.0, capacity_mb))
    return (*reversed(layers), _layer(streams, 0.0, spill_cost, capacity_mb))


def _levels(one: Stream) -> list[float]:
    """What a MB of the class can be worth, by its rank: wherever its fading bends, and in even steps between."""
    shares = one.fresh_share.tolist()
    for k in np.flatnonzero((np.diff(one.fresh_age_s) > 0.0) & (np.diff(one.fresh_share) < 0.0)).tolist():
        high, low = shares[k], shares[k + 1]
        shares += np.linspace(low, high, math.ceil((high - low) / _LEVEL - 1e-9), endpoint=False)[1:].tolist()
    return [one.rank * share for share in shares]


def _age_s(one: Stream, level: float) -> float:
    """Up to which age a MB is worth more than a level, by its rank; 0 where it never is."""
    ages, worths = one.fresh_age_s, one.rank * one.fresh_share
    above = int(np.count_nonzero(worths > level))
    if above == 0 or above == len(ages):
        return math.inf if above else 0.0
    from_s, until_s = float(ages[above - 1]), float(ages[above])
    high, low = float(worths[above - 1]), float(worths[above])
    return from_s + (until_s - from_s) * (high - level) / (high - low)


def _layer(inside: Sequence[Stream], weight: float, spill_cost: float, capacity_mb: float) -> Layer:
    """One storage for some classes together."""
    time_s = _with_crossings(np.unique(np.concatenate([one.edges() for one in inside])), inside, capacity_mb)
    made_mb = np.sum([one.made(time_s) for one in inside], axis=0)
    room_mb = np.minimum(capacity_mb, _fit_to_deliver(inside, time_s))
    return Layer(weight, spill_cost, float(sum(one.start_mb for one in inside)), time_s, made_mb, room_mb)


def _with_crossings(time_s: Floats, inside: Sequence[Stream], capacity_mb: float) -> Floats:
    """``time_s`` and the instants at which what is fit to deliver crosses the capacity."""
    fit_mb = _fit_to_deliver(inside, time_s)
    if not np.all(np.isfinite(fit_mb)):
        return time_s
    above = fit_mb - capacity_mb
    at = np.flatnonzero(above[:-1] * above[1:] < 0.0)
    crossing = time_s[at] + (time_s[at + 1] - time_s[at]) * above[at] / (above[at] - above[at + 1])
    return np.unique(np.concatenate([time_s, crossing]))


def _fit_to_deliver(inside: Sequence[Stream], time_s: Floats) -> Floats:
    """The most that can be aboard of some classes together, for want of data within its deadline."""
    if not any(math.isfinite(one.deadline_s) for one in inside):
        return np.full(len(time_s), np.inf)
    return np.asarray(np.sum([one.fit_to_deliver(time_s) for one in inside], axis=0))
