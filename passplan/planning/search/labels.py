"""Labels of the schedule program: room for them, and which of them make others useless.

One label makes another useless if it has met at least as much and is covered at least as long, and

- holds less, but is ahead by the weight for every MB that it lacks (a MB more is never worth more), or
- holds more, and is ahead by the spill cost for every MB too many (a MB more never costs more).

With these two rules few labels survive. (Own derivation.) A label that comes straight from an option with
which a start now would clash (time to set up the antenna it has just left) beats no other until that is over.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from passplan.planning.problem import Floats, Integers
from passplan.planning.search.compiled import compiled
from passplan.planning.search.fleetarrays import FleetArrays

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
def prune(a: FleetArrays, count: int, work: Work, now: int, weight: float, simple: bool) -> int:
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
