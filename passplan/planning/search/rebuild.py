"""Ruin and recreate: take a few spacecraft that compete for antenna time out of the plan, and put each back
by its exact schedule program.

While they are put back they pay, in part, the prices of the bound for the time they use, so that the first
does not take what the others need more; at the end each is put back once more for nothing. A result that is
a little worse is accepted now and then, less and less (simulated annealing). (Ruin and recreate: Schrimpf
and others 2000.)

Several of these may run side by side on one plan, each on spacecraft of its own and on time and rows that are free
now and that no other may touch: what they find fits together.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from passplan.planning.arrays import Flags, Floats, Integers
from passplan.planning.search.changed import change, fits
from passplan.planning.search.compiled import compiled, inlined
from passplan.planning.search.fleetarrays import ROUNDING, FleetArrays
from passplan.planning.search.labels import Work
from passplan.planning.search.schedule import best_schedule, clashes, worth_of

# Prices of the bound are paid up to a little more than in full.
_MOST_SHARE = 1.2
# What a call costs beside its labels, in labels; and what it costs to follow classes of data through some changes.
_OVERHEAD = 100
_CHANGES = 2_000
_LOADS_TO_A_LABEL = 8


class Ground(NamedTuple):
    """What one rebuild may touch: spacecraft (n,), and the cliques (c,) and rows (r,) of which it may use more.

    To guarantees (g,) it may give less than now, as long as what is due is given; to others it may not.
    """

    crafts: Flags
    cliques: Flags
    rows: Flags
    promises: Flags


@compiled
def rebuild(
    a: FleetArrays, seed: int, effort: int, warmth: float, most: int, span_s: int, option_price: Floats,
    gift_worth: Floats,
    point_worth: float, ground: Ground, work: Work, taken: Integers, size: Integers,
) -> float:
    """Run ruin and recreate on a plan, for ``effort`` labels and options looked at; returns the gain.

    ``taken`` (n, k) are the options of each spacecraft in time order, ``size`` (n) how many: the plan at the start, and
    the best one found at the end. ``warmth`` is the loss that is accepted with probability 1/e at first; it falls to
    nothing. At most ``most`` spacecraft are taken out at a time, and only what starts within ``span_s`` of some instant
    is rebuilt: the rest of their contacts stay, or go, but no others come.
    """
    np.random.seed(seed)
    count, movable = len(size), np.flatnonzero(ground.crafts)
    if len(movable) == 0:
        return 0.0
    # Whoever holds a clique; ``count`` stands for one that is free and must stay so.
    holder = np.where(ground.cliques, -1, count)
    room = np.where(ground.rows, a.limit, 0.0) + ROUNDING * (1.0 + a.limit)
    now_taken, now_size = taken.copy(), size.copy()
    worth = _enter(a, taken, size, point_worth, ground.rows, holder, room)
    given = given_to(a, taken, size)
    due = np.where(ground.promises, 1.0, np.minimum(1.0, given))
    gain = best_gain = 0.0
    out = np.empty(most, dtype=np.int64)
    old_taken, old_size = np.empty((most, taken.shape[1]), dtype=np.int64), np.empty(most, dtype=np.int64)
    old_worth, price = np.empty(most), np.full(len(option_price), np.inf)
    fresh, is_changed = np.empty(a.most_contacts, dtype=np.int64), np.zeros(count, dtype=np.bool_)
    begun = work.spent[0]
    while work.spent[0] - begun < effort:
        wanted = min(len(movable), 2 + int(np.random.random() ** 2 * (most - 1)))
        # Any instant is as likely to be within, also those at the ends.
        from_s = int(np.random.random() * (a.horizon_s + span_s)) - span_s if span_s < a.horizon_s else 0
        until_s = from_s + span_s if span_s < a.horizon_s else a.horizon_s
        some = _pick(a, holder, ground.crafts, movable, out, wanted, from_s, until_s)
        for k in range(some):
            old_worth[k] = worth[out[k]]
            _copy(now_taken, now_size, out[k], old_taken, old_size, k)
            _take_out(a, out[k], from_s, until_s, now_taken, now_size, holder, room)
        before = given.copy()
        share = np.random.random() * _MOST_SHARE
        for turn in range(2 * some - 1):
            # First each pays for what others need, the last one has nobody left to leave room for; then all but the
            # last once more, for nothing.
            part = share if turn < some - 1 else 0.0
            _replan(a, out[turn % some], from_s, until_s, part, option_price, gift_worth, price, point_worth, work,
                    holder, room,
                    now_taken, now_size, fresh)
        change = 0.0
        for k in range(some):
            worth[out[k]] = _net_worth(a, out[k], now_taken[out[k]], now_size[out[k]], point_worth)
            change += worth[out[k]] - old_worth[k]
            give(a, old_taken[k], old_size[k], given, -1.0)
            give(a, now_taken[out[k]], now_size[out[k]], given, 1.0)
        change -= point_worth * _more_missed(a.promise, due, before, given)
        heat = warmth * max(0.0, 1.0 - (work.spent[0] - begun) / effort)
        if change < 0.0 and not (heat > 0.0 and np.random.random() < np.exp(change / heat)):
            given[:] = before
            for k in range(some):
                _release(a, now_taken[out[k]], now_size[out[k]], holder, room)
            for k in range(some):
                worth[out[k]] = old_worth[k]
                _copy(old_taken, old_size, k, now_taken, now_size, out[k])
                hold(a, now_taken[out[k]], now_size[out[k]], holder, out[k])
                load(a, now_taken[out[k]], now_size[out[k]], room, -1.0)
            continue
        gain += change
        is_changed[out[:some]] = True
        if gain > best_gain:
            best_gain = gain
            for i in range(count):
                if is_changed[i]:
                    _copy(now_taken, now_size, i, taken, size, i)
            is_changed[:] = False
    return best_gain


@compiled
def _take_out(
    a: FleetArrays, i: int, from_s: int, until_s: int, taken: Integers, size: Integers, holder: Integers, room: Floats,
) -> None:
    """Take the contacts that start within ``from_s : until_s`` out of the schedule of a spacecraft."""
    _release(a, taken[i], size[i], holder, room)
    kept = 0
    for k in range(size[i]):
        if not from_s <= a.span[taken[i, k], 0] < until_s:
            taken[i, kept] = taken[i, k]
            kept += 1
    size[i] = kept
    hold(a, taken[i], kept, holder, i)
    load(a, taken[i], kept, room, -1.0)


@compiled
def _replan(
    a: FleetArrays, i: int, from_s: int, until_s: int, part: float, option_price: Floats, gift_worth: Floats,
    price: Floats, point_worth: float, work: Work, holder: Integers, room: Floats, taken: Integers, size: Integers,
    fresh: Integers,
) -> None:
    """Give a spacecraft its best schedule in the time that is free, paying ``part`` of the prices.

    What it gives to guarantees it is paid for in full. Contacts that start outside ``from_s : until_s`` come from those
    it has. It keeps the schedule it has where the program gives none that can be used. ``price`` is infinite
    throughout, and is so again afterwards.
    """
    use_at, use_first, use_last, cost = a.use_at, a.use_first, a.use_last, a.cost
    load_at, load_row, load_amount = a.load_at, a.load_row, a.load_amount
    low, high = _within(a, i, from_s, until_s)
    _release(a, taken[i], size[i], holder, room)
    for o in range(low, high):
        if is_free(use_at, use_first, use_last, load_at, load_row, load_amount, o, holder, room):
            price[o] = cost[o] + part * option_price[o] - gift_worth[o]
    for k in range(size[i]):
        o = taken[i, k]
        price[o] = cost[o] + part * option_price[o] - gift_worth[o]
    work.spent[0] += _OVERHEAD + (high - low) // 4
    before = work.spent[0]
    _, count = best_schedule(a, i, price, point_worth, room, work, fresh)
    # Rows are looked at label by label.
    work.spent[0] += (work.spent[0] - before) * len(a.load_row) // (_LOADS_TO_A_LABEL * max(1, len(a.option)))
    usable = 0 <= count <= taken.shape[1] and not clashes(a, fresh, count) and fits(a, fresh, count, room)
    if a.classes.loose[i]:
        if not usable:
            count = size[i]
            fresh[:count] = taken[i, :count]
        count, usable = change(a, i, price, point_worth, room, fresh[:taken.shape[1]], count), True
        work.spent[0] += _CHANGES
    price[low:high] = np.inf
    for k in range(size[i]):
        price[taken[i, k]] = np.inf
    if usable:
        size[i] = count
        for c in range(count):
            taken[i, c] = fresh[c]
    hold(a, taken[i], size[i], holder, i)
    load(a, taken[i], size[i], room, -1.0)


@inlined
def _within(a: FleetArrays, i: int, from_s: int, until_s: int) -> tuple[int, int]:
    """The options of a spacecraft that start within ``from_s : until_s``, as a range."""
    low, high = a.first[i], a.first[i + 1]
    if from_s <= 0 and until_s >= a.horizon_s:
        return low, high
    starts = a.span[low:high, 0]
    return low + np.searchsorted(starts, from_s), low + np.searchsorted(starts, until_s)


@compiled
def _net_worth(a: FleetArrays, i: int, taken: Integers, size: int, point_worth: float) -> float:
    worth, points = worth_of(a, i, taken, size)
    return worth - point_worth * points


@compiled
def _release(a: FleetArrays, taken: Integers, size: int, holder: Integers, room: Floats) -> None:
    hold(a, taken, size, holder, -1)
    load(a, taken, size, room, 1.0)


@inlined
def hold(a: FleetArrays, taken: Integers, size: int, holder: Integers, who: int) -> None:
    """Note ``who`` holds the cliques of a schedule (-1: nobody)."""
    use_at, use_first, use_last = a.use_at, a.use_first, a.use_last
    for k in range(size):
        for u in range(use_at[taken[k]], use_at[taken[k] + 1]):
            for c in range(use_first[u], use_last[u]):
                holder[c] = who


@inlined
def load(a: FleetArrays, taken: Integers, size: int, room: Floats, sign: float) -> None:
    """Give the amounts of a schedule back to the rows (1), or take them (-1)."""
    load_at, load_row, load_amount = a.load_at, a.load_row, a.load_amount
    for k in range(size):
        for e in range(load_at[taken[k]], load_at[taken[k] + 1]):
            room[load_row[e]] += sign * load_amount[e]


@compiled
def given_to(a: FleetArrays, taken: Integers, size: Integers) -> Floats:
    """What a plan gives to each guarantee, as a part of what is due."""
    given = np.zeros(len(a.promise))
    for i in range(len(size)):
        give(a, taken[i], size[i], given, 1.0)
    return given


@inlined
def give(a: FleetArrays, taken: Integers, size: int, given: Floats, sign: float) -> None:
    """Add what a schedule gives to guarantees (1), or take it off (-1)."""
    for k in range(size):
        for e in range(a.give_at[taken[k]], a.give_at[taken[k] + 1]):
            given[a.give_to[e]] += sign * a.give_amount[e]


@inlined
def _more_missed(promise: Floats, due: Floats, before: Floats, given: Floats) -> float:
    """Points of guarantees that a change adds (minus: takes off); less than rounding is nothing."""
    points = 0.0
    for g in range(len(promise)):
        more = max(0.0, due[g] - given[g]) - max(0.0, due[g] - before[g])
        points += promise[g] * more if abs(more) > ROUNDING else 0.0
    return points


@inlined
def is_free(
    use_at: Integers, use_first: Integers, use_last: Integers, load_at: Integers, load_row: Integers,
    load_amount: Floats, option: int, holder: Integers, room: Floats,
) -> bool:
    for u in range(use_at[option], use_at[option + 1]):
        for c in range(use_first[u], use_last[u]):
            if holder[c] >= 0:
                return False
    roomy = True
    for e in range(load_at[option], load_at[option + 1]):
        roomy = roomy and load_amount[e] <= room[load_row[e]]
    return roomy


@inlined
def _copy(source: Integers, source_size: Integers, at: int, taken: Integers, size: Integers, to: int) -> None:
    size[to] = source_size[at]
    for c in range(size[to]):
        taken[to, c] = source[at, c]


@compiled
def _enter(
    a: FleetArrays, taken: Integers, size: Integers, point_worth: float, rows: Flags, holder: Integers, room: Floats,
) -> Floats:
    """Enter a plan into ``holder``, and into ``room`` where rows are free to be used; returns worths."""
    worth = np.zeros(len(size))
    for i in range(len(size)):
        worth[i] = _net_worth(a, i, taken[i], size[i], point_worth)
        hold(a, taken[i], size[i], holder, i)
        for k in range(size[i]):
            for e in range(a.load_at[taken[i, k]], a.load_at[taken[i, k] + 1]):
                if rows[a.load_row[e]]:
                    room[a.load_row[e]] -= a.load_amount[e]
    return worth


@compiled
def _pick(
    a: FleetArrays, holder: Integers, crafts: Flags, movable: Integers, out: Integers, wanted: int, from_s: int,
    until_s: int,
) -> int:
    """Choose spacecraft that stand in each other's way: one at random, then holders of time others could use."""
    out[0] = movable[np.random.randint(len(movable))]
    some = 1
    for _ in range(6 * wanted):
        if some >= wanted:
            break
        i = out[np.random.randint(some)]
        low, high = _within(a, i, from_s, until_s)
        if high <= low:
            continue
        o = np.random.randint(low, high)
        if a.use_at[o + 1] == a.use_at[o]:
            continue
        u = np.random.randint(a.use_at[o], a.use_at[o + 1])
        if a.use_last[u] <= a.use_first[u]:
            continue
        j = holder[np.random.randint(a.use_first[u], a.use_last[u])]
        new = 0 <= j < len(crafts) and crafts[j]
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
