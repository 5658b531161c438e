"""Labels of the schedule program: room for them, and which of them make others useless.

One label makes another useless if it has met at least as much and is covered at least as long, and

- holds less, but is ahead by the weight for every MB that it lacks (a MB more is never worth more), or
- holds more, and is ahead by the spill cost for every MB too many (a MB more never costs more).

With these two rules few labels survive. (Own derivation.) A label that comes straight from an option with
which a start now would clash (time to set up the antenna it has just left) beats no other until that is over.

Labels at one instant are kept in the order of what is aboard. A contact, like idle time, is a monotonic map of what
is aboard, so that the labels it makes are in that order too: a run. Runs are merged, never sorted.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from passplan.planning.problem import Floats, Integers
from passplan.planning.search.compiled import inlined

_MOST_LABELS = 400_000


class Work(NamedTuple):
    """Room for labels, one set for each thread.

    Labels at the instant that is looked at, on two sides (2, .) of which one is filled from the other: MB aboard,
    worth, until when the recurrence is covered, bits met, and the last record (an option taken, with the record
    before it). The ``wait`` arrays hold labels that stand further on, each with its record at the same index, as
    runs ``run_low : run_high`` in linked lists. ``spent[0]`` counts labels made: how much work has been done, whatever
    the machine.
    """

    aboard: Floats
    worth: Floats
    cover: Floats
    bits: Integers
    via: Integers
    wait_aboard: Floats
    wait_worth: Floats
    wait_cover: Floats
    wait_bits: Integers
    record_option: Integers
    record_before: Integers
    run_low: Integers
    run_high: Integers
    run_next: Integers
    spent: Integers


def make_work(labels: int = _MOST_LABELS) -> Work:
    """Room for ``labels`` labels; memory is used as it is touched."""
    floats = [np.empty((2, labels)) for _ in range(3)]
    numbers = [np.empty((2, labels), dtype=np.int64) for _ in range(2)]
    wait, records = [np.empty(labels) for _ in range(3)], [np.empty(labels, dtype=np.int64) for _ in range(6)]
    return Work(
        floats[0], floats[1], floats[2], numbers[0], numbers[1], wait[0], wait[1], wait[2], records[0], records[1],
        records[2], records[3], records[4], records[5], np.zeros(1, dtype=np.int64))


@inlined
def merge(
    clash: Integers, spill: float, weight: float, simple: bool, now: int, aboard: Floats, worth: Floats, cover: Floats,
    bits: Integers, via: Integers, side: int, count: int, wait_aboard: Floats, wait_worth: Floats, wait_cover: Floats,
    wait_bits: Integers, record_option: Integers, low: int, high: int,
) -> int:
    """Merge the ``count`` labels on ``side`` with the run ``low : high``, onto the other side, without the useless.

    ``simple`` says that bits and cover are all alike; two sweeps then do what otherwise needs all pairs. Returns how
    many are left, or -1 if there is no room. (Arrays are handed over one by one, because taking them out of a tuple
    costs more than all the rest.)
    """
    to = 1 - side
    if count + high - low > aboard.shape[1]:
        return -1
    best = -np.inf
    x = left = 0
    y = low
    while x < count or y < high:
        if y >= high or (x < count and aboard[side, x] <= wait_aboard[y]):
            mb, ahead, record = aboard[side, x], worth[side, x], via[side, x]
            until, met = cover[side, x], bits[side, x]
            x += 1
        else:
            mb, ahead, record = wait_aboard[y], wait_worth[y], y
            until, met = wait_cover[y], wait_bits[y]
            y += 1
        if simple:
            # Upward: drop what holds more than another but is not ahead.
            if ahead + weight * mb <= best:
                continue
            if record < 0 or clash[record_option[record]] < now:
                best = ahead + weight * mb
        aboard[to, left], worth[to, left], via[to, left] = mb, ahead, record
        cover[to, left], bits[to, left] = until, met
        left += 1
    if simple:
        return _prune_down(clash, spill, now, aboard, worth, cover, bits, via, to, left, record_option)
    return _prune_pairs(clash, spill, weight, now, aboard, worth, cover, bits, via, to, left, record_option)


@inlined
def _prune_down(
    clash: Integers, spill: float, now: int, aboard: Floats, worth: Floats, cover: Floats, bits: Integers,
    via: Integers, side: int, count: int, record_option: Integers,
) -> int:
    """Downward: drop what holds less than another and is not ahead."""
    best = -np.inf
    low = count
    for k in range(count - 1, -1, -1):
        ahead = worth[side, k] - spill * aboard[side, k]
        if ahead > best:
            record = via[side, k]
            if record < 0 or clash[record_option[record]] < now:
                best = ahead
            low -= 1
            _move(aboard, worth, cover, bits, via, side, k, low)
    if low > 0:
        for k in range(low, count):
            _move(aboard, worth, cover, bits, via, side, k, k - low)
    return count - low


@inlined
def _prune_pairs(
    clash: Integers, spill: float, weight: float, now: int, aboard: Floats, worth: Floats, cover: Floats,
    bits: Integers, via: Integers, side: int, count: int, record_option: Integers,
) -> int:
    left = 0
    for k in range(count):
        useless = False
        free = via[side, k] < 0 or clash[record_option[via[side, k]]] < now
        for x in range(left):
            unbound = via[side, x] < 0 or clash[record_option[via[side, x]]] < now
            if unbound and _beats(spill, weight, aboard, worth, cover, bits, side, x, k):
                useless = True
                break
        if useless:
            continue
        kept = 0
        for x in range(left):
            if not (free and _beats(spill, weight, aboard, worth, cover, bits, side, k, x)):
                _move(aboard, worth, cover, bits, via, side, x, kept)
                kept += 1
        _move(aboard, worth, cover, bits, via, side, k, kept)
        left = kept + 1
    return left


@inlined
def _beats(
    spill: float, weight: float, aboard: Floats, worth: Floats, cover: Floats, bits: Integers, side: int, x: int,
    y: int,
) -> bool:
    """Whether label ``x``, if it may take any option, makes label ``y`` useless."""
    if bits[side, x] & bits[side, y] != bits[side, y] or cover[side, x] < cover[side, y]:
        return False
    more = aboard[side, y] - aboard[side, x]
    return bool(worth[side, x] >= worth[side, y] + (weight * more if more > 0.0 else -spill * more))


@inlined
def _move(
    aboard: Floats, worth: Floats, cover: Floats, bits: Integers, via: Integers, side: int, source: int, target: int,
) -> None:
    aboard[side, target], worth[side, target], cover[side, target] = (
        aboard[side, source], worth[side, source], cover[side, source])
    bits[side, target], via[side, target] = bits[side, source], via[side, source]
