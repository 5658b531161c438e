"""The best schedule of one spacecraft at given prices: a dynamic program over options and storage.

Labels stand at the distinct starts of the spacecraft's options. A label is what is aboard, the worth so
far, which wanted terms are met, and until when the recurrence is covered. From a start it goes idle to the
next one, or takes an option and stands at the first start at which another contact may follow that option.

Which labels make others useless is in ``labels.py``. Spacecraft with classes of data have labels of their own, see
``layered.py``.

The program is exact but for two things. It does not see a clash between contacts with another one between
them: its worth is then a ceiling, and the caller must look (:func:`clashes`). And where rows are to be kept
(``room``) it refuses an option that overfills one, but a label that was dropped may have had room for it.
"""

from __future__ import annotations

import math

import numpy as np

from passplan.planning.arrays import Flags, Floats, Integers
from passplan.planning.search.clash import share_clique
from passplan.planning.search.compiled import compiled, inlined, inner
from passplan.planning.search.fleetarrays import FleetArrays
from passplan.planning.search.followed import followed_worth
from passplan.planning.search.labels import Work, merge, missing
from passplan.planning.search.layered import best_layered, layered_worth
from passplan.planning.search.walk import overfills, past_wants, those_at, trace


@compiled
def best_schedule(
    a: FleetArrays, i: int, price: Floats, point_worth: float, room: Floats, work: Work, taken: Integers,
) -> tuple[float, int]:
    """The schedule of spacecraft ``i`` that is worth most after prices.

    ``price`` (m) is what taking an option costs, infinite where it cannot be taken; ``point_worth`` is what a
    point of shortfall costs; ``room`` is what is left of each row's limit, or empty where rows are not kept (a
    relaxation). Fills ``taken`` with the options taken, in time order, and returns the worth and their number. If
    there is no room for all labels, the worth is plus infinity and the number -1.
    """
    if a.layers.first[i + 1] > a.layers.first[i]:
        return best_layered(a, i, price, point_worth, room, work, taken)
    weight, generation, capacity = a.craft[i, 0], a.craft[i, 1], a.craft[i, 2]
    # Out of the tuples once: every look into one costs more than the step that it is for.
    end_of, node, arrival, span, clash, spill = a.first[i + 1], a.node, a.arrival, a.span, a.clash, a.spill
    (aboard, worth, cover, bits, via, wait_aboard, wait_worth, wait_cover, wait_bits, record_option, record_before,
     run_low, run_high, run_next, champion, spent, slacks) = work
    slack = slacks[0]
    maps, use_at, use_first, use_last, renews, own_bits = a.maps, a.use_at, a.use_first, a.use_last, a.renews, a.bits
    load_at, load_row, load_amount, load_own = a.load_at, a.load_row, a.load_amount, a.load_own
    base, nodes, start_s = a.start_first[i], a.start_first[i + 1] - a.start_first[i], a.start_s
    recur_until, per_second = a.recur[i, 1], point_worth * a.recur[i, 2]
    wants, wants_until = a.wants[i], a.wants_until[i]
    simple = recur_until <= 0.0 and wants.max() <= 0.0
    used = np.zeros(len(room))
    head = np.full(nodes + 1, -1, dtype=np.int64)
    waiting = runs = side = clock = 0
    aboard[0, 0], worth[0, 0], cover[0, 0], bits[0, 0], via[0, 0] = a.craft[i, 3], 0.0, a.recur[i, 0], 0, -1
    here = 1
    option = a.first[i]
    for at in range(nodes + 1):
        follower, usable = those_at(node, price, option, end_of, at)
        if at < nodes and head[at] < 0 and not usable:
            # Nothing arrives and nothing can be taken.
            option = follower
            continue
        now = start_s[base + at] if at < nodes else a.horizon_s
        made = generation * (now - clock)
        for k in range(here):
            aboard[side, k], worth[side, k] = _idle(aboard[side, k], worth[side, k], made, capacity, spill)
        clock = now
        past = past_wants(wants_until, now)
        run = head[at]
        while run >= 0:
            here = merge(clash, spill, weight, simple, now, aboard, worth, cover, bits, via, side, here, wait_aboard,
                         wait_worth, wait_cover, wait_bits, record_option, run_low[run], run_high[run],
                         min(float(now), recur_until), per_second, point_worth, wants, past, champion, spent, slack)
            if here < 0:
                return np.inf, -1
            side, run = 1 - side, run_next[run]
        for o in range(option, follower):
            if price[o] == np.inf:
                continue
            if waiting + here > len(wait_worth) or runs >= len(run_low):
                return np.inf, -1
            target = arrival[o]
            until = start_s[base + target] if target < nodes else a.horizon_s
            end = _take(
                o, price[o], now, generation * (until - span[o, 1]), capacity, weight, spill, simple, per_second,
                recur_until, maps, use_at, use_first, use_last, clash, load_at, load_row, load_amount, load_own, room,
                used, renews[o], own_bits[o], aboard, worth, cover, bits, via, side, here, wait_aboard, wait_worth,
                wait_cover, wait_bits, record_option, record_before, waiting)
            if end > waiting:
                run_low[runs], run_high[runs], run_next[runs] = waiting, end, head[target]
                head[target] = runs
                runs += 1
            waiting = end
        option = follower
    spent[0] += waiting + nodes
    best, chosen = -np.inf, -1
    for k in range(here):
        ahead = worth[side, k] + a.craft[i, 4] * aboard[side, k] - point_worth * missing(wants, bits[side, k])
        ahead -= per_second * max(0.0, recur_until - cover[side, k])
        if ahead > best:
            best, chosen = ahead, via[side, k]
    return best, trace(record_option, record_before, chosen, taken)


@inlined
def _take(
    option: int, price: float, now: int, made: float, capacity: float, weight: float, spill: float, simple: bool,
    per_second: float, recur_until: float, maps: Floats, use_at: Integers, use_first: Integers, use_last: Integers,
    clash: Integers, load_at: Integers, load_row: Integers, load_amount: Floats, load_own: Flags, room: Floats,
    used: Floats, renews: int, own_bits: int, aboard: Floats, worth: Floats, cover: Floats, bits: Integers,
    via: Integers, side: int, here: int, wait_aboard: Floats, wait_worth: Floats, wait_cover: Floats,
    wait_bits: Integers, record_option: Integers, record_before: Integers, waiting: int,
) -> int:
    """The run of labels that taking an option makes of those here that can; returns where it ends.

    All come from the same option, so that one beats another whatever clashes with it. The upward rule of ``labels.py``
    is applied on the way, and of those that end with as much aboard only the best is kept: most do, where a contact
    can carry more than there is. ``made`` is generated between the option's end and the start at which the labels wait.
    """
    from_s = min(float(now), recur_until)
    end, best = waiting, -np.inf
    for k in range(here):
        record = via[side, k]
        if record >= 0:
            last = record_option[record]
            if clash[last] >= now and share_clique(use_at, use_first, use_last, last, option):
                continue
            if len(room) > 0 and overfills(load_at, load_row, load_amount, load_own, option, room, used,
                                            record_option, record_before, record):
                continue
        after, sent, lost = _through(maps, option, aboard[side, k])
        ahead = worth[side, k] + weight * sent - spill * lost - price
        if simple:
            if ahead + weight * after <= best:
                continue
            best = ahead + weight * after
        covered = cover[side, k]
        if renews >= 0:
            ahead -= per_second * max(0.0, from_s - covered)
            covered = max(covered, float(renews))
        after, ahead = _idle(after, ahead, made, capacity, spill)
        if simple and end > waiting and wait_aboard[end - 1] == after:
            if wait_worth[end - 1] >= ahead:
                continue
            end -= 1
        wait_aboard[end], wait_worth[end], wait_cover[end] = after, ahead, covered
        wait_bits[end] = bits[side, k] | own_bits
        record_option[end], record_before[end] = option, record
        end += 1
    return end


@compiled
def worth_of(a: FleetArrays, i: int, taken: Integers, size: int) -> tuple[float, float]:
    """Worth of a schedule of spacecraft ``i`` without prices, and its points of shortfall."""
    worth = 0.0
    for k in range(size):
        worth -= a.cost[taken[k]]
    points = points_of(a, i, taken, size)
    if a.classes.loose[i]:
        return worth + followed_worth(a, i, taken, size), points
    if a.layers.first[i + 1] > a.layers.first[i]:
        return worth + layered_worth(a, i, taken, size), points
    return worth + _plain_worth(a, i, taken, size), points


@compiled
def points_of(a: FleetArrays, i: int, taken: Integers, size: int) -> float:
    """Points of shortfall of a schedule of spacecraft ``i``."""
    met = np.int64(0)
    covered, overdue = a.recur[i, 0], 0.0
    for k in range(size):
        o = taken[k]
        met |= a.bits[o]
        if a.renews[o] >= 0:
            overdue += max(0.0, min(float(a.span[o, 0]), a.recur[i, 1]) - covered)
            covered = max(covered, float(a.renews[o]))
    overdue += max(0.0, a.recur[i, 1] - covered)
    return float(a.recur[i, 2] * overdue + missing(a.wants[i], met))


@compiled
def worths_of(a: FleetArrays, taken: Integers, size: Integers) -> tuple[Floats, Floats]:
    """Worth without prices and points of shortfall of each spacecraft of a plan, shapes (n,), without those of dues."""
    worth, points = np.zeros(len(size)), np.zeros(len(size))
    for i in range(len(size)):
        worth[i], points[i] = worth_of(a, i, taken[i], size[i])
    return worth, points


def total_worth(arrays: FleetArrays, taken: Integers, size: Integers) -> float:
    """What a whole plan is worth, without prices."""
    return math.fsum(worths_of(arrays, taken, size)[0].tolist())


def total_points(arrays: FleetArrays, taken: Integers, size: Integers) -> float:
    """Points of a whole plan, without those of dues."""
    return math.fsum(worths_of(arrays, taken, size)[1].tolist())


@inner
def _plain_worth(a: FleetArrays, i: int, taken: Integers, size: int) -> float:
    """What a spacecraft with one class at a steady rate sends, less what it loses, in worth."""
    weight, generation, capacity, fill = a.craft[i, 0], a.craft[i, 1], a.craft[i, 2], a.craft[i, 3]
    worth, clock = 0.0, 0
    for k in range(size + 1):
        until = a.span[taken[k], 0] if k < size else a.horizon_s
        fill += generation * (until - clock)
        if fill > capacity:
            worth -= a.spill * (fill - capacity)
            fill = capacity
        if k == size:
            worth += a.craft[i, 4] * fill
            break
        fill, sent, lost = _through(a.maps, taken[k], fill)
        worth += weight * sent - a.spill * lost
        clock = a.span[taken[k], 1]
    return float(worth)


@inlined
def _through(maps: Floats, option: int, aboard: float) -> tuple[float, float, float]:
    """Fill after a contact, MB sent and MB lost: the storage map of ``maps.py``."""
    after = min(max(aboard + maps[option, 0], maps[option, 1]), maps[option, 2])
    lost = maps[option, 3] + max(0.0, aboard - maps[option, 4])
    return after, aboard + maps[option, 5] - after - lost, lost


@inlined
def _idle(aboard: float, worth: float, made: float, capacity: float, spill: float) -> tuple[float, float]:
    """What is aboard after ``made`` MB more; what is above the capacity is lost."""
    over = aboard + made - capacity
    if over > 0.0:
        return capacity, worth - spill * over
    return aboard + made, worth


@inner
def clashes(a: FleetArrays, taken: Integers, size: int) -> bool:
    """Whether two contacts of a schedule share a clique."""
    for x in range(size):
        for y in range(x + 1, size):
            if a.span[taken[y], 0] > a.clash[taken[x]]:
                break
            if share_clique(a.use_at, a.use_first, a.use_last, taken[x], taken[y]):
                return True
    return False
