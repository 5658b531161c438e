"""The best schedule of one spacecraft at given prices: a dynamic program over options and storage.

Labels stand at the distinct starts of the spacecraft's options. A label is what is aboard, the worth so
far, which wanted terms are met, and until when the recurrence is covered. From a start it goes idle to the
next one, or takes an option and stands at the first start at or after that option's end.

One label makes another useless if it has met at least as much and is covered at least as long, and

- holds less, but is ahead by the weight for every MB that it lacks (a MB more is never worth more), or
- holds more, and is ahead by the spill cost for every MB too many (a MB more never costs more).

With these two rules few labels survive and the program is exact. (Own derivation.)
"""

from __future__ import annotations

import numpy as np

from passplan.planning.problem import Floats, Integers
from passplan.planning.search.compiled import compiled

# Rows of the label store: aboard, worth, covered until, bits met (as numbers), last taken record.
MOST_LABELS = 400_000


@compiled
def prune(count: int, rows: Floats, bits: Integers, via: Integers, weight: float, spill: float, simple: bool) -> int:
    """Sort ``count`` labels by what is aboard, drop the useless ones, return how many are left.

    ``rows`` (., 3) are aboard, worth, covered until. ``simple`` says that bits and cover are all alike.
    """
    if count <= 1:
        return count
    order = np.argsort(rows[:count, 0], kind="mergesort")
    sorted_rows, sorted_bits, sorted_via = rows[:count][order], bits[:count][order], via[:count][order]
    keep = np.ones(count, dtype=np.bool_)
    if simple:
        best = -np.inf
        for k in range(count):
            ahead = sorted_rows[k, 1] + weight * sorted_rows[k, 0]
            if ahead <= best:
                keep[k] = False
            else:
                best = ahead
        best = -np.inf
        for k in range(count - 1, -1, -1):
            if keep[k]:
                ahead = sorted_rows[k, 1] - spill * sorted_rows[k, 0]
                if ahead <= best:
                    keep[k] = False
                else:
                    best = ahead
    else:
        for a in range(count):
            if not keep[a]:
                continue
            for b in range(count):
                if a == b or not keep[b]:
                    continue
                if sorted_bits[a] & sorted_bits[b] != sorted_bits[b] or sorted_rows[a, 2] < sorted_rows[b, 2]:
                    continue
                more = sorted_rows[b, 0] - sorted_rows[a, 0]
                price = weight * more if more > 0.0 else -spill * more
                if sorted_rows[a, 1] >= sorted_rows[b, 1] + price:
                    keep[b] = False
    left = 0
    for k in range(count):
        if keep[k]:
            rows[left], bits[left], via[left] = sorted_rows[k], sorted_bits[k], sorted_via[k]
            left += 1
    return left


@compiled
def best_schedule(
    first: int, last: int, craft: Floats, starts: Integers, node: Integers, arrival: Integers, span: Integers,
    maps: Floats, price: Floats, bits: Integers, renews: Integers, wants: Floats, recur: Floats, horizon_s: int,
    spill: float, point_worth: float, taken: Integers,
) -> tuple[float, int]:
    """The schedule of one spacecraft that is worth most after prices.

    Options ``first : last`` are the spacecraft's, in order of start; ``price`` (m) is what taking one costs,
    infinite where it cannot be taken. ``point_worth`` is what a point of shortfall costs. Fills ``taken``
    with the options taken, in time order, and returns the worth and how many there are; -1 of them if there
    were too many labels, and the worth is then plus infinity.
    """
    weight, generation, capacity, fill = craft[0], craft[1], craft[2], craft[3]
    nodes = len(starts)
    simple = recur[1] <= 0.0
    for k in range(len(wants)):
        if wants[k] > 0.0:
            simple = False
    # Waiting labels: linked lists by the node at which they stand.
    wait_rows = np.empty((MOST_LABELS, 3))
    wait_bits = np.empty(MOST_LABELS, dtype=np.int64)
    wait_via = np.empty(MOST_LABELS, dtype=np.int64)
    wait_next = np.empty(MOST_LABELS, dtype=np.int64)
    head = np.full(nodes + 1, -1, dtype=np.int64)
    record_option = np.empty(MOST_LABELS, dtype=np.int64)
    record_before = np.empty(MOST_LABELS, dtype=np.int64)
    waiting = records = 0
    rows = np.empty((MOST_LABELS, 3))
    here_bits = np.empty(MOST_LABELS, dtype=np.int64)
    via = np.empty(MOST_LABELS, dtype=np.int64)
    rows[0, 0], rows[0, 1], rows[0, 2] = fill, 0.0, recur[0]
    here_bits[0], via[0] = 0, -1
    here = 1
    clock = 0
    option = first
    for at in range(nodes + 1):
        now = starts[at] if at < nodes else horizon_s
        # Idle until now.
        made = generation * (now - clock)
        for k in range(here):
            over = rows[k, 0] + made - capacity
            if over > 0.0:
                rows[k, 0] = capacity
                rows[k, 1] -= spill * over
            else:
                rows[k, 0] += made
        clock = now
        arrived = head[at]
        while arrived >= 0:
            if here >= MOST_LABELS:
                return np.inf, -1
            rows[here], here_bits[here], via[here] = wait_rows[arrived], wait_bits[arrived], wait_via[arrived]
            here += 1
            arrived = wait_next[arrived]
        here = prune(here, rows, here_bits, via, weight, spill, simple)
        if at == nodes:
            break
        while option < last and node[option] == at:
            cost = price[option]
            if cost < np.inf:
                end_s, target = span[option, 1], arrival[option]
                until = starts[target] if target < nodes else horizon_s
                idle = generation * (until - end_s)
                for k in range(here):
                    if waiting >= MOST_LABELS:
                        return np.inf, -1
                    aboard = rows[k, 0]
                    after = min(max(aboard + maps[option, 0], maps[option, 1]), maps[option, 2])
                    lost = maps[option, 3] + max(0.0, aboard - maps[option, 4])
                    sent = aboard + maps[option, 5] - after - lost
                    worth = rows[k, 1] + weight * sent - spill * lost - cost
                    covered = rows[k, 2]
                    if renews[option] >= 0 and recur[1] > 0.0:
                        gap_end = min(float(span[option, 0]), recur[1])
                        if gap_end > covered:
                            worth -= point_worth * recur[2] * (gap_end - covered)
                        covered = max(covered, float(renews[option]))
                    over = after + idle - capacity
                    if over > 0.0:
                        after, worth = capacity, worth - spill * over
                    else:
                        after += idle
                    wait_rows[waiting, 0], wait_rows[waiting, 1], wait_rows[waiting, 2] = after, worth, covered
                    wait_bits[waiting] = here_bits[k] | bits[option]
                    record_option[records], record_before[records] = option, via[k]
                    wait_via[waiting] = records
                    records += 1
                    wait_next[waiting] = head[target]
                    head[target] = waiting
                    waiting += 1
            option += 1
    best, chosen = -np.inf, -1
    for k in range(here):
        worth = rows[k, 1]
        if recur[1] > rows[k, 2]:
            worth -= point_worth * recur[2] * (recur[1] - rows[k, 2])
        for b in range(len(wants)):
            if wants[b] > 0.0 and not (here_bits[k] >> b) & 1:
                worth -= point_worth * wants[b]
        if worth > best:
            best, chosen = worth, via[k]
    size = 0
    while chosen >= 0:
        taken[size] = record_option[chosen]
        size += 1
        chosen = record_before[chosen]
    taken[:size] = taken[:size][::-1].copy()
    return best, size
