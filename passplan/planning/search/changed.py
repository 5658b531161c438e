"""Small changes to the schedule of a spacecraft that its layers overrate, each judged by what it is really worth.

The schedule program takes the layers at their word. Where those say too much of a contact (fading worth, storage freed
late) another one may be better that the program never gives; a few contacts put in or left out at random find it.
"""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Floats, Integers
from passplan.planning.search.compiled import inner, move_to
from passplan.planning.search.fleetarrays import FleetArrays
from passplan.planning.search.holding import fits
from passplan.planning.search.schedule import clashes, worth_of

_TRIES = 4
# How often a contact is left out rather than put in.
_LEFT_OUT = 0.3


@inner
def change(
    a: FleetArrays, i: int, price: Floats, point_worth: float, room: Floats, taken: Integers, size: int,
) -> int:
    """Improve the schedule ``taken`` (``size``) of spacecraft ``i`` at ``price`` (m,), in place; returns its size.

    ``price`` is infinite where an option cannot be taken, ``room`` what is left of each row's limit.
    """
    trial = np.empty(len(taken) + 1, dtype=np.int64)
    ahead = -np.inf
    for turn in range(1 + _TRIES):
        # First the schedule as it is.
        count = size
        if turn == 0:
            move_to(trial, 0, taken, 0, size)
        elif np.random.random() < _LEFT_OUT and size > 0:
            out = taken[np.random.randint(size)]
            count = _without(a, taken, size, out, False, trial)
        else:
            o = a.first[i] + np.random.randint(max(1, a.first[i + 1] - a.first[i]))
            if o >= a.first[i + 1] or price[o] == np.inf:
                continue
            count = _without(a, taken, size, o, True, trial)
        if turn > 0 and (count > len(taken) or clashes(a, trial, count) or not fits(a, trial, count, room)):
            continue
        worth, points = worth_of(a, i, trial, count)
        for k in range(count):
            # Prices count what the worth counts as cost too.
            worth -= price[trial[k]] - a.cost[trial[k]]
        worth -= point_worth * points
        if worth > ahead:
            ahead, size = worth, count
            move_to(taken, 0, trial, 0, count)
    return size


@inner
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
