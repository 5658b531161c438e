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
from passplan.planning.search.changed import change
from passplan.planning.search.compiled import compiled, inlined, inner, move_to
from passplan.planning.search.dues import given_by, missed
from passplan.planning.search.fleetarrays import ROUNDING, FleetArrays
from passplan.planning.search.holding import claim, enter, fits, is_free, release
from passplan.planning.search.labels import Work
from passplan.planning.search.schedule import best_schedule, clashes, worth_of, worths_of

# Prices of the bound are paid up to a little more than in full.
_MOST_SHARE = 1.2
# Those of a spacecraft's own rows up to so many times.
_MOST_THRIFT = 1.5
# What gives to a due that is not met is paid for up to so many times as the bound would pay; now and then far more.
_MOST_EAGER, _FAR_MORE, _NOW_AND_THEN = 4.0, 100.0, 0.1
# What a call costs beside its labels, in labels; and what it costs to follow classes of data through some changes.
_OVERHEAD = 100
# Following takes most of the time, so that only some schedules are changed.
_CHANGED, _CHANGES = 0.3, 6_000
_LOADS_TO_A_LABEL = 8


class Ground(NamedTuple):
    """What one rebuild may touch: spacecraft (n,), and the cliques (c,) and rows (r,) of which it may use more.

    Of ``dues`` (d,) it may give less, where more than enough is given, or be glad to give more.
    """

    crafts: Flags
    cliques: Flags
    rows: Flags
    dues: Flags


@compiled
def rebuild(
    a: FleetArrays, seed: int, effort: int, warmth: float, most: int, span_s: int, option_price: Floats,
    own_price: Floats, due_price: Floats, before: Floats, point_worth: float, ground: Ground, work: Work,
    taken: Integers, size: Integers,
) -> float:
    """Run ruin and recreate on a plan, for ``effort`` labels and options looked at; returns the gain.

    ``option_price`` (m,) is what the bound has options pay for what others could use, ``own_price`` (m,) for rows of
    their spacecraft alone, ``due_price`` (d,) what it pays for meeting each due, to which others give ``before`` (d,).
    ``taken`` (n, k) are the options of each spacecraft in time order, ``size`` (n) how many: the plan at the start, and
    the best one found at the end. ``warmth`` is the loss that is accepted with probability 1/e at first; it falls to
    nothing. At most ``most`` spacecraft are taken out at a time, and only what starts within ``span_s`` of some instant
    is rebuilt: the rest of their contacts stay, or go, but no others come.
    """
    np.random.seed(seed)
    count, movable = len(size), np.flatnonzero(ground.crafts)
    # Whoever holds a clique; ``count`` stands for one that is free and must stay so.
    holder = np.where(ground.cliques, -1, count)
    room = np.where(ground.rows, a.limit, 0.0) + ROUNDING * (1.0 + a.limit)
    now_taken, now_size = taken.copy(), size.copy()
    enter(a, taken, size, ground.rows, holder, room)
    worth, points = worths_of(a, taken, size)
    worth -= point_worth * points
    due_points = point_worth * a.dues.points
    # Others may count on what is given beyond their dues; whatever is given less is missed.
    given = np.where(ground.dues, before + given_by(a.dues, taken, size), 1.0)
    gain = best_gain = 0.0
    old_taken, old_size = np.empty((most, taken.shape[1]), dtype=np.int64), np.empty(most, dtype=np.int64)
    old_worth, price = np.empty(most), np.full(len(option_price), np.inf)
    out, fresh = np.empty(most, dtype=np.int64), np.empty(a.most_contacts, dtype=np.int64)
    is_changed = np.zeros(count, dtype=np.bool_)
    begun = work.spent[0]
    while work.spent[0] - begun < effort and len(movable) > 0:
        wanted = min(len(movable), 2 + int(np.random.random() ** 2 * (most - 1)))
        # Any instant is as likely to be within, also those at the ends.
        from_s = int(np.random.random() * (a.horizon_s + span_s)) - span_s if span_s < a.horizon_s else 0
        until_s = from_s + span_s if span_s < a.horizon_s else a.horizon_s
        some = _pick(a, holder, ground.crafts, movable, out, wanted, from_s, until_s)
        more = missed(due_points, given)
        for k in range(some):
            old_worth[k] = worth[out[k]]
            _copy(now_taken, now_size, out[k], old_taken, old_size, k)
            _take_out(a, out[k], from_s, until_s, now_taken, now_size, holder, room, given)
        share = np.random.random() * _MOST_SHARE
        thrift = np.random.random() * _MOST_THRIFT
        eager = np.random.random() * _MOST_EAGER * (_FAR_MORE if np.random.random() < _NOW_AND_THEN else 1.0)
        for turn in range(2 * some - 1):
            # First each pays for what others need, the last one has nobody left to leave room for; then all but the
            # last once more, for nothing.
            part = share if turn < some - 1 else 0.0
            _replan(a, out[turn % some], from_s, until_s, part, option_price, thrift, own_price, price, eager,
                    due_price, point_worth, work, holder, room, given, now_taken, now_size, fresh)
        more -= missed(due_points, given)
        for k in range(some):
            if not _same(now_taken, now_size, out[k], old_taken, old_size, k):
                net, points_missed = worth_of(a, out[k], now_taken[out[k]], now_size[out[k]])
                worth[out[k]] = net - point_worth * points_missed
            more += worth[out[k]] - old_worth[k]
        heat = warmth * max(0.0, 1.0 - (work.spent[0] - begun) / effort)
        if more < 0.0 and not (heat > 0.0 and np.random.random() < np.exp(more / heat)):
            for k in range(some):
                release(a, now_taken[out[k]], now_size[out[k]], holder, room, given)
            for k in range(some):
                worth[out[k]] = old_worth[k]
                _copy(old_taken, old_size, k, now_taken, now_size, out[k])
                claim(a, now_taken[out[k]], now_size[out[k]], holder, room, given, out[k])
            continue
        gain += more
        is_changed[out[:some]] = True
        if gain > best_gain:
            best_gain = gain
            for i in range(count):
                if is_changed[i]:
                    _copy(now_taken, now_size, i, taken, size, i)
            is_changed.fill(False)
    return best_gain


@inner
def _take_out(
    a: FleetArrays, i: int, from_s: int, until_s: int, taken: Integers, size: Integers, holder: Integers, room: Floats,
    given: Floats,
) -> None:
    """Take the contacts that start within ``from_s : until_s`` out of the schedule of a spacecraft."""
    release(a, taken[i], size[i], holder, room, given)
    kept = 0
    for k in range(size[i]):
        if not from_s <= a.span[taken[i, k], 0] < until_s:
            taken[i, kept] = taken[i, k]
            kept += 1
    size[i] = kept
    claim(a, taken[i], kept, holder, room, given, i)


@inner
def _replan(
    a: FleetArrays, i: int, from_s: int, until_s: int, part: float, option_price: Floats, thrift: float,
    own_price: Floats, price: Floats, eager: float, due_price: Floats, point_worth: float, work: Work, holder: Integers,
    room: Floats, given: Floats, taken: Integers, size: Integers, fresh: Integers,
) -> None:
    """Give a spacecraft its best schedule in the time that is free, paying ``part`` of the prices.

    For its own rows it always pays, ``thrift`` times their price: the schedule program does not see that what it takes
    early may be wanted more later on.

    For dues that are not met without it, it is paid ``eager`` times their price. Contacts that start outside
    ``from_s : until_s`` come from those it has. It keeps the schedule it has where the program gives none that can be
    used. ``price`` is infinite throughout, and is so again afterwards.
    """
    use_at, use_first, use_last, cost = a.use_at, a.use_first, a.use_last, a.cost
    load_at, load_row, load_amount = a.load_at, a.load_row, a.load_amount
    due_at, due_to, due_share = a.dues.at, a.dues.to, a.dues.share
    low, high = _within(a, i, from_s, until_s)
    release(a, taken[i], size[i], holder, room, given)
    for o in range(low, high):
        if is_free(use_at, use_first, use_last, load_at, load_row, load_amount, o, holder, room):
            rewarded = eager * _reward(due_at, due_to, due_share, due_price, given, o)
            price[o] = cost[o] + part * option_price[o] + thrift * own_price[o] - rewarded
    for k in range(size[i]):
        o = taken[i, k]
        rewarded = eager * _reward(due_at, due_to, due_share, due_price, given, o)
        price[o] = cost[o] + part * option_price[o] + thrift * own_price[o] - rewarded
    work.spent[0] += _OVERHEAD + (high - low) // 4
    before = work.spent[0]
    count, usable = -1, False
    for attempt in range(3 if len(room) > 0 else 1):
        # By prices alone, then by higher ones; where that is still too much, by refusing what overfills a row.
        if attempt == 1:
            for o in range(a.first[i], a.first[i + 1]):
                price[o] += own_price[o]
        _, count = best_schedule(a, i, price, point_worth, room if attempt == 2 else room[:0], work, fresh)
        usable = 0 <= count <= taken.shape[1] and not clashes(a, fresh, count) and fits(a, fresh, count, room)
        if usable:
            break
    # Rows are looked at label by label.
    work.spent[0] += (work.spent[0] - before) * len(a.load_row) // (_LOADS_TO_A_LABEL * max(1, len(a.option)))
    if a.classes.loose[i] and np.random.random() < _CHANGED:
        if not usable:
            count = size[i]
            move_to(fresh, 0, taken[i], 0, count)
        count, usable = change(a, i, price, point_worth, room, fresh[:taken.shape[1]], count), True
        work.spent[0] += _CHANGES
    price[low:high].fill(np.inf)
    for k in range(size[i]):
        price[taken[i, k]] = np.inf
    if usable:
        size[i] = count
        for c in range(count):
            taken[i, c] = fresh[c]
    claim(a, taken[i], size[i], holder, room, given, i)


@inlined
def _reward(
    due_at: Integers, due_to: Integers, due_share: Floats, due_price: Floats, given: Floats, option: int,
) -> float:
    """What an option is rewarded with by the dues that are not met yet."""
    total = 0.0
    for e in range(due_at[option], due_at[option + 1]):
        if given[due_to[e]] < 1.0:
            total += due_price[due_to[e]] * due_share[e]
    return total


@inlined
def _within(a: FleetArrays, i: int, from_s: int, until_s: int) -> tuple[int, int]:
    """The options of a spacecraft that start within ``from_s : until_s``, as a range."""
    low, high = a.first[i], a.first[i + 1]
    if from_s <= 0 and until_s >= a.horizon_s:
        return low, high
    starts = a.span[low:high, 0]
    return low + np.searchsorted(starts, from_s), low + np.searchsorted(starts, until_s)


@inlined
def _same(taken: Integers, size: Integers, one: int, others: Integers, others_size: Integers, other: int) -> bool:
    """Whether two schedules are the same."""
    same = size[one] == others_size[other]
    for c in range(size[one] if same else 0):
        same = same and taken[one, c] == others[other, c]
    return bool(same)


@inlined
def _copy(source: Integers, source_size: Integers, at: int, taken: Integers, size: Integers, to: int) -> None:
    size[to] = source_size[at]
    for c in range(size[to]):
        taken[to, c] = source[at, c]


@inner
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
