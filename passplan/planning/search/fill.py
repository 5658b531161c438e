"""The greedy plan at fleet size: add whatever adds most, by exact marginal value, in compiled code.

The same lazy greedy as ``planning/greedy.py``, over the fleet's arrays: keys are refreshed when they come up, and an
option is taken when no other key is above its fresh one.
"""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Flags, Floats, Integers
from passplan.planning.clock import Clock
from passplan.planning.search.compiled import compiled, inlined, inner
from passplan.planning.search.fleetarrays import FleetArrays
from passplan.planning.search.holding import enter, hold, is_free, load
from passplan.planning.search.schedule import worth_of, worths_of

# Options looked at between two looks at the clock: some tenths of a second at most.
_AT_A_TIME = 100_000


def fill_up(arrays: FleetArrays, room: Floats, taken: Integers, size: Integers, clock: Clock) -> None:
    """Add options to a plan (``taken``, ``size`` as in ``rebuild.py``) until none adds anything or time is up.

    ``room`` (r,) is each row's limit, with what rounding it is allowed.
    """
    holder = np.full(arrays.cliques + 1, -1, dtype=np.int64)
    enter(arrays, taken, size, np.ones(len(room), dtype=bool), holder, room)
    worth, _ = worths_of(arrays, taken, size)
    keys = keys_of(arrays)
    heap = np.flatnonzero(free_now(arrays, holder, room) & (keys > 0.0))
    heap = heap[np.argsort(-keys[heap], kind="stable")]
    count = len(heap)
    while count > 0 and not clock.expired():
        count = add(arrays, keys, heap, count, _AT_A_TIME, holder, room, worth, taken, size)


def keys_of(arrays: FleetArrays) -> Floats:
    """What an option can add at most, shape (m,): all that it could send, and as much that is then not lost."""
    craft = np.repeat(np.arange(len(arrays.craft)), np.diff(arrays.first))
    # From full storage, a contact sends all that it can: the map says how much.
    capacity = arrays.craft[craft, 2]
    end = np.clip(capacity + arrays.maps[:, 0], arrays.maps[:, 1], arrays.maps[:, 2])
    lost = arrays.maps[:, 3] + np.maximum(0.0, capacity - arrays.maps[:, 4])
    sent = capacity + arrays.maps[:, 5] - end - lost
    # With classes, of which one may hold less than there is: all that the link carries.
    piece, owner = arrays.classes.piece, np.repeat(np.arange(len(craft)), np.diff(arrays.classes.piece_first))
    carried = np.bincount(owner, weights=(piece[:, 1] - piece[:, 0]) * piece[:, 2], minlength=len(craft))
    sent = np.where(np.diff(arrays.layers.first)[craft] > 0, carried, sent)
    keys: Floats = sent * (arrays.craft[craft, 0] + arrays.spill) - arrays.cost
    return keys


@compiled
def free_now(a: FleetArrays, holder: Integers, room: Floats) -> Flags:
    """Which options hold nothing that is taken, shape (m,)."""
    use_at, use_first, use_last = a.use_at, a.use_first, a.use_last
    load_at, load_row, load_amount = a.load_at, a.load_row, a.load_amount
    free = np.zeros(len(a.option), dtype=np.bool_)
    for o in range(len(free)):
        free[o] = is_free(use_at, use_first, use_last, load_at, load_row, load_amount, o, holder, room)
    return free


@compiled
def add(
    a: FleetArrays, keys: Floats, heap: Integers, count: int, looks: int, holder: Integers, room: Floats, worth: Floats,
    taken: Integers, size: Integers,
) -> int:
    """Look at up to ``looks`` options of the heap (largest key on top); returns how many are left in it."""
    use_at, use_first, use_last = a.use_at, a.use_first, a.use_last
    load_at, load_row, load_amount = a.load_at, a.load_row, a.load_amount
    trial = np.empty(taken.shape[1] + 1, dtype=np.int64)
    one = np.empty(1, dtype=np.int64)
    for _ in range(looks):
        if count == 0:
            break
        o = heap[0]
        gain = -np.inf
        i = np.searchsorted(a.first, o, side="right") - 1
        if is_free(use_at, use_first, use_last, load_at, load_row, load_amount, o, holder, room):
            made = _insert(a, taken[i], size[i], o, trial)
            if made > 0:
                gain = worth_of(a, i, trial, made)[0] - worth[i]
        next_best = max(keys[heap[1]] if count > 1 else 0.0, keys[heap[2]] if count > 2 else 0.0)
        if gain > 0.0 and gain >= next_best:
            worth[i] += gain
            for k in range(made):
                taken[i, k] = trial[k]
            size[i] = made
            one[0] = o
            hold(a, one, 1, holder, i)
            load(a, one, 1, room, -1.0)
            gain = 0.0
        if gain > 0.0:
            keys[o] = gain
        else:
            count -= 1
            heap[0] = heap[count]
        _sink(keys, heap, count)
    return count


@inner
def _insert(a: FleetArrays, taken: Integers, size: int, option: int, trial: Integers) -> int:
    """The schedule with ``option`` at its place in ``trial``; returns its length, 0 if it does not fit in time."""
    if size + 1 > len(trial) - 1:
        return 0
    at = 0
    while at < size and a.span[taken[at], 0] < a.span[option, 0]:
        at += 1
    if at > 0 and a.arrival[taken[at - 1]] > a.node[option]:
        return 0
    if at < size and a.arrival[option] > a.node[taken[at]]:
        return 0
    for k in range(size):
        trial[k if k < at else k + 1] = taken[k]
    trial[at] = option
    return size + 1


@inlined
def _sink(keys: Floats, heap: Integers, count: int) -> None:
    """Let the top of the heap sink to its place. Of equal keys the option of the lower number stays above."""
    at = 0
    while True:
        child = 2 * at + 1
        if child >= count:
            break
        if child + 1 < count and _above(keys, heap[child + 1], heap[child]):
            child += 1
        if not _above(keys, heap[child], heap[at]):
            break
        heap[at], heap[child] = heap[child], heap[at]
        at = child


@inlined
def _above(keys: Floats, one: int, other: int) -> bool:
    return bool(keys[one] > keys[other] or (keys[one] == keys[other] and one < other))
