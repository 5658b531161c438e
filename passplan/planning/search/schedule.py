"""The best schedule of one spacecraft at given prices: a dynamic program over options and storage.

Labels stand at the distinct starts of the spacecraft's options. A label is what is aboard, the worth so
far, which wanted terms are met, and until when the recurrence is covered. From a start it goes idle to the
next one, or takes an option and stands at the first start at or after that option's end.

One label makes another useless if it has met at least as much and is covered at least as long, and

- holds less, but is ahead by the weight for every MB that it lacks (a MB more is never worth more), or
- holds more, and is ahead by the spill cost for every MB too many (a MB more never costs more).

With these two rules few labels survive. (Own derivation.) A label that comes straight from an option with
which a start now would clash (time to set up the antenna it has just left) beats no other until that is over.

The program is exact but for a clash between contacts with another one between them, which it does not see:
its worth is then a ceiling, and the caller must look (:func:`clashes`).
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from passplan.planning.problem import Floats, Integers
from passplan.planning.search.compiled import compiled
from passplan.planning.search.fleetarrays import FleetArrays, share_clique

_MOST_LABELS = 400_000


class Work(NamedTuple):
    """Room for labels, one set for each thread.

    Labels here: ``rows`` (., 3) aboard, worth, covered until; ``bits`` met; ``via`` the last taken record.
    The ``wait`` arrays hold labels that stand further on, in linked lists. Records are options taken.
    """

    rows: Floats
    bits: Integers
    via: Integers
    wait_rows: Floats
    wait_bits: Integers
    wait_via: Integers
    wait_next: Integers
    record_option: Integers
    record_before: Integers


def make_work(labels: int = _MOST_LABELS) -> Work:
    """Room for ``labels`` labels; memory is used as it is touched."""
    floats = [np.empty((labels, 3)) for _ in range(2)]
    integers = [np.empty(labels, dtype=np.int64) for _ in range(7)]
    return Work(floats[0], integers[0], integers[1], floats[1], *integers[2:])


@compiled
def best_schedule(
    a: FleetArrays, i: int, price: Floats, point_worth: float, work: Work, taken: Integers,
) -> tuple[float, int]:
    """The schedule of spacecraft ``i`` that is worth most after prices.

    ``price`` (m) is what taking an option costs, infinite where it cannot be taken; ``point_worth`` is what a
    point of shortfall costs. Fills ``taken`` with the options taken, in time order, and returns the worth and
    their number. If there is no room for all labels, the worth is plus infinity and the number -1.
    """
    rows, bits, via = work.rows, work.bits, work.via
    weight, generation, capacity = a.craft[i, 0], a.craft[i, 1], a.craft[i, 2]
    wants, recur_until = a.wants[i], a.recur[i, 1]
    starts = a.start_s[a.start_first[i]:a.start_first[i + 1]]
    nodes = len(starts)
    simple = recur_until <= 0.0 and wants.max() <= 0.0
    head = np.full(nodes + 1, -1, dtype=np.int64)
    waiting = 0
    rows[0, 0], rows[0, 1], rows[0, 2] = a.craft[i, 3], 0.0, a.recur[i, 0]
    bits[0], via[0] = 0, -1
    here = 1
    clock = 0
    option = a.first[i]
    for at in range(nodes + 1):
        now = starts[at] if at < nodes else a.horizon_s
        _idle(rows, here, generation * (now - clock), capacity, a.spill)
        clock = now
        arrived = head[at]
        while arrived >= 0:
            if here >= len(rows):
                return np.inf, -1
            rows[here, 0], rows[here, 1] = work.wait_rows[arrived, 0], work.wait_rows[arrived, 1]
            rows[here, 2], bits[here] = work.wait_rows[arrived, 2], work.wait_bits[arrived]
            via[here] = work.wait_via[arrived]
            here += 1
            arrived = work.wait_next[arrived]
        here = _prune(a, here, work, now, weight, simple)
        while at < nodes and option < a.first[i + 1] and a.node[option] == at:
            if price[option] < np.inf:
                if waiting + here > len(rows):
                    return np.inf, -1
                target = a.arrival[option]
                until = starts[target] if target < nodes else a.horizon_s
                made = _take(a, i, option, price[option], point_worth, here, work, waiting)
                _idle(work.wait_rows[waiting:], made, generation * (until - a.span[option, 1]), capacity, a.spill)
                for k in range(waiting, waiting + made):
                    work.wait_next[k] = head[target]
                    head[target] = k
                waiting += made
            option += 1
    best, chosen = -np.inf, -1
    for k in range(here):
        worth = rows[k, 1] - point_worth * _missing(wants, bits[k])
        if recur_until > rows[k, 2]:
            worth -= point_worth * a.recur[i, 2] * (recur_until - rows[k, 2])
        if worth > best:
            best, chosen = worth, via[k]
    size = 0
    while chosen >= 0:
        taken[size] = work.record_option[chosen]
        size += 1
        chosen = work.record_before[chosen]
    for k in range(size // 2):
        taken[k], taken[size - 1 - k] = taken[size - 1 - k], taken[k]
    return best, size


@compiled
def worth_of(a: FleetArrays, i: int, taken: Integers, size: int) -> tuple[float, float]:
    """Worth of a schedule of spacecraft ``i`` without prices, and its points of shortfall."""
    weight, generation, capacity, fill = a.craft[i, 0], a.craft[i, 1], a.craft[i, 2], a.craft[i, 3]
    worth, clock, met = 0.0, 0, np.int64(0)
    covered, overdue = a.recur[i, 0], 0.0
    for k in range(size + 1):
        until = a.span[taken[k], 0] if k < size else a.horizon_s
        fill += generation * (until - clock)
        if fill > capacity:
            worth -= a.spill * (fill - capacity)
            fill = capacity
        if k == size:
            break
        o = taken[k]
        fill, sent, lost = _through(a.maps[o], fill)
        worth += weight * sent - a.spill * lost - a.cost[o]
        clock = a.span[o, 1]
        met |= a.bits[o]
        if a.renews[o] >= 0:
            overdue += max(0.0, min(float(a.span[o, 0]), a.recur[i, 1]) - covered)
            covered = max(covered, float(a.renews[o]))
    overdue += max(0.0, a.recur[i, 1] - covered)
    return worth, a.recur[i, 2] * overdue + _missing(a.wants[i], met)


@compiled
def _through(maps: Floats, aboard: float) -> tuple[float, float, float]:
    """Fill after a contact, MB sent and MB lost: the storage map of ``maps.py``."""
    after = min(max(aboard + maps[0], maps[1]), maps[2])
    lost = maps[3] + max(0.0, aboard - maps[4])
    return after, aboard + maps[5] - after - lost, lost


@compiled
def _take(
    a: FleetArrays, i: int, option: int, price: float, point_worth: float, here: int, work: Work, waiting: int,
) -> int:
    """Labels after taking an option, from all labels here that can; record and label share their index."""
    start_s = min(float(a.span[option, 0]), a.recur[i, 1])
    to = waiting
    for k in range(here):
        if work.via[k] >= 0:
            last = work.record_option[work.via[k]]
            if a.clash[last] >= a.span[option, 0] and share_clique(a.use_first, a.use_last, last, option):
                continue
        after, sent, lost = _through(a.maps[option], work.rows[k, 0])
        worth = work.rows[k, 1] + a.craft[i, 0] * sent - a.spill * lost - price
        covered = work.rows[k, 2]
        if a.renews[option] >= 0:
            worth -= point_worth * a.recur[i, 2] * max(0.0, start_s - covered)
            covered = max(covered, float(a.renews[option]))
        work.wait_rows[to, 0], work.wait_rows[to, 1], work.wait_rows[to, 2] = after, worth, covered
        work.wait_bits[to], work.wait_via[to] = work.bits[k] | a.bits[option], to
        work.record_option[to], work.record_before[to] = option, work.via[k]
        to += 1
    return to - waiting


@compiled
def _idle(rows: Floats, count: int, made: float, capacity: float, spill: float) -> None:
    """Add what is generated to the first ``count`` labels; what is above the capacity is lost."""
    for k in range(count):
        over = rows[k, 0] + made - capacity
        if over > 0.0:
            rows[k, 0] = capacity
            rows[k, 1] -= spill * over
        else:
            rows[k, 0] += made


@compiled
def _missing(wants: Floats, met: int | np.int64) -> float:
    """Points of the wanted terms whose bit is not set."""
    points = 0.0
    for b in range(len(wants)):
        if wants[b] > 0.0 and not (met >> b) & 1:
            points += wants[b]
    return points


@compiled
def _prune(a: FleetArrays, count: int, work: Work, now: int, weight: float, simple: bool) -> int:
    """Sort labels by what is aboard, drop the useless ones, return how many are left.

    ``simple`` says that bits and cover are all alike; two sweeps then do what otherwise needs all pairs.
    """
    rows, bits, via = work.rows, work.bits, work.via
    _sort(count, rows, bits, via)
    if simple:
        return _prune_alike(a, count, work, now, weight)
    left = 0
    for k in range(count):
        useless = False
        for x in range(left):
            if _beats(a, work, x, k, now, weight):
                useless = True
                break
        if useless:
            continue
        kept = 0
        for x in range(left):
            if not _beats(a, work, k, x, now, weight):
                _move(rows, bits, via, x, kept)
                kept += 1
        _move(rows, bits, via, k, kept)
        left = kept + 1
    return left


@compiled
def _prune_alike(a: FleetArrays, count: int, work: Work, now: int, weight: float) -> int:
    """Up: drop what holds more than another but is not ahead. Down: what holds less and is not ahead."""
    rows, bits, via = work.rows, work.bits, work.via
    best = -np.inf
    left = 0
    for k in range(count):
        ahead = rows[k, 1] + weight * rows[k, 0]
        if ahead > best:
            if _unbound(a, work, k, now):
                best = ahead
            _move(rows, bits, via, k, left)
            left += 1
    best = -np.inf
    low = left
    for k in range(left - 1, -1, -1):
        ahead = rows[k, 1] - a.spill * rows[k, 0]
        if ahead > best:
            if _unbound(a, work, k, now):
                best = ahead
            low -= 1
            _move(rows, bits, via, k, low)
    for k in range(low, left):
        _move(rows, bits, via, k, k - low)
    return left - low


@compiled
def _beats(a: FleetArrays, work: Work, x: int, y: int, now: int, weight: float) -> bool:
    """Whether label ``x`` makes label ``y`` useless."""
    rows, bits = work.rows, work.bits
    if bits[x] & bits[y] != bits[y] or rows[x, 2] < rows[y, 2] or not _unbound(a, work, x, now):
        return False
    more = rows[y, 0] - rows[x, 0]
    return bool(rows[x, 1] >= rows[y, 1] + (weight * more if more > 0.0 else -a.spill * more))


@compiled
def _unbound(a: FleetArrays, work: Work, k: int, now: int) -> bool:
    """Whether a label may take any option from now on."""
    return bool(work.via[k] < 0 or a.clash[work.record_option[work.via[k]]] < now)


@compiled
def clashes(a: FleetArrays, taken: Integers, size: int) -> bool:
    """Whether two contacts of a schedule share a clique."""
    for x in range(size):
        for y in range(x + 1, size):
            if a.span[taken[y], 0] > a.clash[taken[x]]:
                break
            if share_clique(a.use_first, a.use_last, taken[x], taken[y]):
                return True
    return False


@compiled
def _sort(count: int, rows: Floats, bits: Integers, via: Integers) -> None:
    """Shell sort by what is aboard; most labels are in order already (gaps grow by 2.25; common practice)."""
    gap = 1
    while gap < count:
        gap = int(2.25 * gap) + 1
    while gap > 1:
        gap = int(gap / 2.25)
        for k in range(gap, count):
            aboard, worth, covered, met, record = rows[k, 0], rows[k, 1], rows[k, 2], bits[k], via[k]
            at = k
            while at >= gap and rows[at - gap, 0] > aboard:
                _move(rows, bits, via, at - gap, at)
                at -= gap
            rows[at, 0], rows[at, 1], rows[at, 2], bits[at], via[at] = aboard, worth, covered, met, record


@compiled
def _move(rows: Floats, bits: Integers, via: Integers, source: int, target: int) -> None:
    rows[target, 0], rows[target, 1], rows[target, 2] = rows[source, 0], rows[source, 1], rows[source, 2]
    bits[target], via[target] = bits[source], via[source]
