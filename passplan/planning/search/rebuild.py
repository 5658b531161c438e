"""Ruin and recreate: take a few spacecraft that compete for antenna time out of the plan, and put each back
by its exact schedule program.

While they are put back they pay, in part, the prices of the bound for the time they use, so that the first
does not take what the others need more; at the end each is put back once more for nothing. A result that is
a little worse is accepted now and then, less and less (simulated annealing). (Ruin and recreate: Schrimpf
and others 2000.)
"""

from __future__ import annotations

import numpy as np

from passplan.planning.problem import Floats, Integers
from passplan.planning.search.compiled import compiled
from passplan.planning.search.fleetarrays import FleetArrays
from passplan.planning.search.schedule import Work, best_schedule, clashes, worth_of

# A spacecraft has at most this many contacts; a schedule of more is refused.
MOST_CONTACTS = 1_024
# Prices of the bound are paid up to a little more than in full.
_MOST_SHARE = 1.2


@compiled
def rebuild(
    a: FleetArrays, seed: int, iterations: int, warmth: float, most: int, option_price: Floats, point_worth: float,
    work: Work, taken: Integers, size: Integers, best_taken: Integers, best_size: Integers,
) -> float:
    """Run ``iterations`` of ruin and recreate from the plan in ``taken`` and ``size``, which move.

    ``taken`` (n, k) are the options of each spacecraft in time order, ``size`` (n) how many. ``warmth`` is
    the loss that is accepted with probability 1/e at first; it falls to nothing. At most ``most`` spacecraft
    are taken out at a time. The best plan goes to ``best_taken`` and ``best_size`` if it beats the plan at
    the start; the gain over that plan is returned.
    """
    np.random.seed(seed)
    count = len(size)
    holder = np.full(a.cliques + 1, -1, dtype=np.int64)
    worth = np.zeros(count)
    for i in range(count):
        worth[i] = _net_worth(a, i, taken[i], size[i], point_worth)
        _hold(a, taken[i], size[i], holder, i)
    gain = best_gain = 0.0
    out = np.empty(most, dtype=np.int64)
    old_taken, old_size = np.empty((most, taken.shape[1]), dtype=np.int64), np.empty(most, dtype=np.int64)
    old_worth, price = np.empty(most), np.empty(len(option_price))
    fresh = np.empty(4 * MOST_CONTACTS, dtype=np.int64)
    for step in range(iterations):
        some = _pick(a, holder, out, min(count, 2 + int(np.random.random() ** 2 * (most - 1))))
        for k in range(some):
            i = out[k]
            old_size[k], old_worth[k] = size[i], worth[i]
            for c in range(size[i]):
                old_taken[k, c] = taken[i, c]
            _hold(a, taken[i], size[i], holder, -1)
            size[i] = 0
        share = np.random.random() * _MOST_SHARE
        for k in range(some):
            # The last one has nobody left to leave room for.
            part = share if k < some - 1 else 0.0
            _replan(a, out[k], part, option_price, price, point_worth, work, holder, taken, size, fresh)
        for k in range(some):
            _replan(a, out[k], 0.0, option_price, price, point_worth, work, holder, taken, size, fresh)
        change = 0.0
        for k in range(some):
            worth[out[k]] = _net_worth(a, out[k], taken[out[k]], size[out[k]], point_worth)
            change += worth[out[k]] - old_worth[k]
        heat = warmth * (1.0 - step / iterations)
        if change >= 0.0 or (heat > 0.0 and np.random.random() < np.exp(change / heat)):
            gain += change
            if gain > best_gain:
                best_gain = gain
                best_taken[:], best_size[:] = taken, size
            continue
        for k in range(some):
            _hold(a, taken[out[k]], size[out[k]], holder, -1)
        for k in range(some):
            i = out[k]
            size[i], worth[i] = old_size[k], old_worth[k]
            for c in range(size[i]):
                taken[i, c] = old_taken[k, c]
            _hold(a, taken[i], size[i], holder, i)
    return best_gain


@compiled
def _replan(
    a: FleetArrays, i: int, part: float, option_price: Floats, price: Floats, point_worth: float, work: Work,
    holder: Integers, taken: Integers, size: Integers, fresh: Integers,
) -> None:
    """Give a spacecraft its best schedule in the time that is free, paying ``part`` of the prices.

    It keeps the schedule it has where the program gives none that can be used.
    """
    _hold(a, taken[i], size[i], holder, -1)
    for o in range(a.first[i], a.first[i + 1]):
        price[o] = a.cost[o] + part * option_price[o] if _free(a, o, holder) else np.inf
    _, count = best_schedule(a, i, price, point_worth, work, fresh)
    if 0 <= count <= taken.shape[1] and not clashes(a, fresh, count):
        size[i] = count
        for c in range(count):
            taken[i, c] = fresh[c]
    _hold(a, taken[i], size[i], holder, i)


@compiled
def _net_worth(a: FleetArrays, i: int, taken: Integers, size: int, point_worth: float) -> float:
    worth, points = worth_of(a, i, taken, size)
    return worth - point_worth * points


@compiled
def _hold(a: FleetArrays, taken: Integers, size: int, holder: Integers, who: int) -> None:
    """Note ``who`` holds the cliques of a schedule (-1: nobody)."""
    for k in range(size):
        for lane in range(a.use_first.shape[1]):
            for c in range(a.use_first[taken[k], lane], a.use_last[taken[k], lane]):
                holder[c] = who


@compiled
def _free(a: FleetArrays, option: int, holder: Integers) -> bool:
    for lane in range(a.use_first.shape[1]):
        for c in range(a.use_first[option, lane], a.use_last[option, lane]):
            if holder[c] >= 0:
                return False
    return True


@compiled
def _pick(a: FleetArrays, holder: Integers, out: Integers, wanted: int) -> int:
    """Choose spacecraft that stand in each other's way: one at random, then holders of time others could use."""
    out[0] = np.random.randint(len(a.craft))
    some = 1
    for _ in range(6 * wanted):
        if some >= wanted:
            break
        i = out[np.random.randint(some)]
        if a.first[i + 1] == a.first[i]:
            continue
        o = np.random.randint(a.first[i], a.first[i + 1])
        lane = np.random.randint(a.use_first.shape[1])
        if a.use_last[o, lane] <= a.use_first[o, lane]:
            continue
        j = holder[np.random.randint(a.use_first[o, lane], a.use_last[o, lane])]
        new = j >= 0
        for k in range(some):
            if out[k] == j:
                new = False
        if new:
            out[some] = j
            some += 1
    for k in range(some - 1, 0, -1):
        other = np.random.randint(k + 1)
        out[k], out[other] = out[other], out[k]
    return some
