"""Small changes to the schedule of a spacecraft that its layers overrate, each judged by what it is really worth.

The schedule program takes the layers at their word. Where those say too much of a contact (fading worth, storage freed
late) another one may be better that the program never gives; a few contacts put in or left out at random find it.
"""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Floats, Integers
from passplan.planning.search.compiled import compiled
from passplan.planning.search.fleetarrays import FleetArrays
from passplan.planning.search.schedule import clashes, worth_of

_TRIES = 4
# How often a contact is left out rather than put in.
_LEFT_OUT = 0.3


@compiled
def change(
    a: FleetArrays, i: int, price: Floats, point_worth: float, room: Floats, taken: Integers, size: int,
) -> int:
    """Improve the schedule ``taken`` (``size``) of spacecraft ``i`` at ``price`` (m,), in place; returns its size.

    ``price`` is infinite where an option cannot be taken, ``room`` what is left of each row's limit.
    """
    trial = np.empty(len(taken) + 1, dtype=np.int64)
    ahead = _ahead(a, i, price, point_worth, taken, size)
    for _ in range(_TRIES):
        if np.random.random() < _LEFT_OUT and size > 0:
            out = taken[np.random.randint(size)]
            count = _without(a, taken, size, out, False, trial)
        else:
            o = a.first[i] + np.random.randint(max(1, a.first[i + 1] - a.first[i]))
            if o >= a.first[i + 1] or price[o] == np.inf:
                continue
            count = _without(a, taken, size, o, True, trial)
        if count > len(taken) or clashes(a, trial, count) or not fits(a, trial, count, room):
            continue
        worth = _ahead(a, i, price, point_worth, trial, count)
        if worth > ahead:
            ahead, size = worth, count
            taken[:count] = trial[:count]
    return size


@compiled
def _ahead(
    a: FleetArrays, i: int, price: Floats, point_worth: float, taken: Integers, size: int,
) -> float:
    """Worth after points and prices; these count what the worth counts as cost too."""
    worth, points = worth_of(a, i, taken, size)
    for k in range(size):
        worth -= price[taken[k]] - a.cost[taken[k]]
    return float(worth - point_worth * points)


@compiled
def _without(a: FleetArrays, taken: Integers, size: int, option: int, put_in: bool, trial: Integers) -> int:
    """A schedule in ``trial`` without what is in the way of an option, and with that if it is to be ``put_in``."""
    count, placed = 0, not put_in
    for k in range(size):
        if not placed and a.span[taken[k], 0] >= a.span[option, 0]:
            trial[count], placed = option, True
            count += 1
        if taken[k] != option and (not put_in or a.arrival[taken[k]] <= a.node[option]
                                   or a.arrival[option] <= a.node[taken[k]]):
            trial[count] = taken[k]
            count += 1
    if not placed:
        trial[count] = option
        count += 1
    return count


@compiled
def fits(a: FleetArrays, taken: Integers, size: int, room: Floats) -> bool:
    """Whether the rows have room for a whole schedule."""
    if len(room) == 0:
        return True
    roomy = True
    for sign in (-1.0, 1.0):
        for k in range(size):
            for e in range(a.load_at[taken[k]], a.load_at[taken[k] + 1]):
                room[a.load_row[e]] += sign * a.load_amount[e]
        if sign < 0.0:
            for k in range(size):
                for e in range(a.load_at[taken[k]], a.load_at[taken[k] + 1]):
                    roomy = roomy and room[a.load_row[e]] >= 0.0
    return roomy
