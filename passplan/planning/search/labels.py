"""Labels of the schedule program: room for them, and which of them make others useless.

One label makes another useless if it is ahead at least

- by the weight for every MB that it lacks (a MB more is never worth more), or by the spill cost for every MB that it
  holds too many (a MB more never costs more);
- by the points of wanted terms that only the other has met: it may never meet them;
- by the points of the time for which only the other is covered.

What was overdue up to now is paid at once, and so is a wanted term that nothing can meet any more. With these rules
few labels survive. (Own derivation.) A label that comes straight from an option with
which a start now would clash (time to set up the antenna it has just left) beats no other until that is over.

Labels at one instant are kept in the order of what is aboard. A contact, like idle time, is a monotonic map of what
is aboard, so that the labels it makes are in that order too: a run. Runs are merged, never sorted.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from passplan.planning.arrays import Floats, Integers
from passplan.planning.search.compiled import inlined

_MOST_LABELS = 400_000
# Labels that wait have room for so many fills each, where a spacecraft has several layers of storage.
_MOST_LAYERS = 8
# Comparing so many pairs of labels is as much work as making one.
_PAIRS_TO_A_LABEL = 16


class Work(NamedTuple):
    """Room for labels, one set for each thread.

    Labels at the instant that is looked at, on two sides (2, .) of which one is filled from the other: MB aboard,
    worth, until when the recurrence is covered, bits met, and the last record (an option taken, with the record
    before it). The ``wait`` arrays hold labels that stand further on, each with its record at the same index, as
    runs ``run_low : run_high`` in linked lists. ``champion`` is scratch.
    ``spent[0]`` counts labels made: how much work has been done, whatever
    the machine. ``slack[0]`` is how far a label may be ahead of one that makes it useless all the same; that one is
    then raised by as much, so that worths are ceilings.
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
    champion: Integers
    spent: Integers
    slack: Floats


def make_work(labels: int = _MOST_LABELS) -> Work:
    """Room for ``labels`` labels; memory is used as it is touched."""
    floats = [np.empty((2, labels)) for _ in range(3)]
    numbers = [np.empty((2, labels), dtype=np.int64) for _ in range(2)]
    wait, records = [np.empty(labels) for _ in range(2)], [np.empty(labels, dtype=np.int64) for _ in range(7)]
    several = np.empty(_MOST_LAYERS * labels)
    return Work(
        floats[0], floats[1], floats[2], numbers[0], numbers[1], several, wait[0], wait[1], records[0], records[1],
        records[2], records[3], records[4], records[5], records[6], np.zeros(1, dtype=np.int64), np.zeros(1))


@inlined
def merge(
    clash: Integers, spill: float, weight: float, simple: bool, now: int, aboard: Floats, worth: Floats, cover: Floats,
    bits: Integers, via: Integers, side: int, count: int, wait_aboard: Floats, wait_worth: Floats, wait_cover: Floats,
    wait_bits: Integers, record_option: Integers, low: int, high: int, due: float, per_second: float,
    point_worth: float, wants: Floats, past: np.int64, champion: Integers, spent: Integers,
    slack: float,
) -> int:
    """Merge the ``count`` labels on ``side`` with the run ``low : high``, onto the other side, without the useless.

    ``simple`` says that bits and cover are all alike; two plain sweeps then do. Otherwise what is overdue up to ``due``
    is paid ``per_second``, and the wanted terms that are ``past`` are paid for and count as met. Returns how many are
    left, or -1 if there is no room. (Arrays are handed over one by one, because taking them out of a tuple
    costs more than all the rest.)
    """
    to = 1 - side
    if count + high - low > aboard.shape[1]:
        return -1
    best, holder = -np.inf, 0
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
            if ahead + weight * mb <= best + slack:
                if ahead + weight * mb > best:
                    worth[to, holder] += ahead + weight * mb - best
                    best = ahead + weight * mb
                continue
            if record < 0 or clash[record_option[record]] < now:
                best, holder = ahead + weight * mb, left
        else:
            if until < due:
                ahead, until = ahead - per_second * (due - until), due
            if met & past != past:
                ahead -= point_worth * missing(wants, ~past | met)
                met |= past
        aboard[to, left], worth[to, left], via[to, left] = mb, ahead, record
        cover[to, left], bits[to, left] = until, met
        left += 1
    if simple:
        return _prune_down(clash, spill, now, aboard, worth, cover, bits, via, to, left, record_option, slack)
    left = _prune(clash, weight, True, now, aboard, worth, cover, bits, via, to, left, record_option, per_second,
                  point_worth, wants, champion, spent, slack)
    return _prune(clash, -spill, False, now, aboard, worth, cover, bits, via, to, left, record_option, per_second,
                  point_worth, wants, champion, spent, slack)


@inlined
def missing(wants: Floats, met: int | np.int64) -> float:
    """Points of the wanted terms whose bit is not set."""
    points = 0.0
    for b in range(len(wants)):
        if wants[b] > 0.0 and not (met >> b) & 1:
            points += wants[b]
    return points


@inlined
def _prune_down(
    clash: Integers, spill: float, now: int, aboard: Floats, worth: Floats, cover: Floats, bits: Integers,
    via: Integers, side: int, count: int, record_option: Integers, slack: float,
) -> int:
    """Downward: drop what holds less than another and is not ahead."""
    best, holder = -np.inf, 0
    low = count
    for k in range(count - 1, -1, -1):
        ahead = worth[side, k] - spill * aboard[side, k]
        if ahead > best + slack:
            record = via[side, k]
            low -= 1
            _move(aboard, worth, cover, bits, via, side, k, low)
            if record < 0 or clash[record_option[record]] < now:
                best, holder = ahead, low
        elif ahead > best:
            worth[side, holder] += ahead - best
            best = ahead
    if low > 0:
        for k in range(low, count):
            _move(aboard, worth, cover, bits, via, side, k, k - low)
    return count - low


@inlined
def _prune(
    clash: Integers, slope: float, forward: bool, now: int, aboard: Floats, worth: Floats, cover: Floats,
    bits: Integers, via: Integers, side: int, count: int, record_option: Integers, per_second: float,
    point_worth: float, wants: Floats, champion: Integers, spent: Integers, slack: float,
) -> int:
    """Drop labels that one before them makes useless (``forward``, by the weight), or one behind (minus spill cost).

    A label is compared with the champions so far: those that no later one replaces for all that come after.
    """
    champions = pairs = 0
    low = 0 if forward else count
    for turn in range(count):
        k = turn if forward else count - 1 - turn
        key, useless = worth[side, k] + slope * aboard[side, k], False
        pairs += champions
        for c in range(champions):
            x = champion[c]
            short = (key + _lacks(cover, bits, side, x, k, per_second, point_worth, wants)
                     - worth[side, x] - slope * aboard[side, x])
            if short <= slack:
                worth[side, x] += max(0.0, short)
                useless = True
                break
        if useless:
            continue
        to = low if forward else low - 1
        low = low + 1 if forward else to
        _move(aboard, worth, cover, bits, via, side, k, to)
        if via[side, to] >= 0 and clash[record_option[via[side, to]]] >= now:
            continue
        kept = 0
        for c in range(champions):
            x = champion[c]
            if (key < worth[side, x] + slope * aboard[side, x]
                    + _lacks(cover, bits, side, to, x, per_second, point_worth, wants)):
                champion[kept] = x
                kept += 1
        champion[kept] = to
        champions = kept + 1
    spent[0] += pairs // _PAIRS_TO_A_LABEL
    if forward:
        return low
    if low > 0:
        for k in range(low, count):
            _move(aboard, worth, cover, bits, via, side, k, k - low)
    return count - low


@inlined
def _lacks(
    cover: Floats, bits: Integers, side: int, x: int, y: int, per_second: float, point_worth: float, wants: Floats,
) -> float:
    """What label ``x`` may still have to pay for requirements that ``y`` need not."""
    lacking = bits[side, y] & ~bits[side, x]
    price = point_worth * missing(wants, ~lacking) if lacking != 0 else 0.0
    return float(price + per_second * max(0.0, cover[side, y] - cover[side, x]))


@inlined
def _move(
    aboard: Floats, worth: Floats, cover: Floats, bits: Integers, via: Integers, side: int, source: int, target: int,
) -> None:
    aboard[side, target], worth[side, target], cover[side, target] = (
        aboard[side, source], worth[side, source], cover[side, source])
    bits[side, target], via[side, target] = bits[side, source], via[side, source]
