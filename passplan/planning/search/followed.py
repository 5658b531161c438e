"""Classes of data through a schedule in compiled code: what ``classes.py`` defines, in worth.

The same events in the same order: the class that is worth most is sent first, oldest data first; data at its deadline
is dropped; a full storage loses what is worth least; what is sent keeps its room until it is acknowledged. Tests
compare the two.
"""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Floats, Integers
from passplan.planning.search.compiled import compiled, inlined, inner, move_to
from passplan.planning.search.fleetarrays import FleetArrays
from passplan.planning.search.layerarrays import ClassArrays

# As in classes.py: less than a byte is nothing; nearer to the deadline than this is at it; ages that differ by less
# are one.
_NOTHING_MB = 1e-9
_AT_ONCE_S = 1e-7
_ONE_AGE_S = 1e-6
# A schedule with more events than this counts as worth nothing; none comes near it.
_MOST_EVENTS = 2_000_000
_FIRST_CHUNKS = 64
# Where the state keeps its clock [s], MB sent and not acknowledged, worth sent, MB lost, and events.
_CLOCK, _HELD, _WORTH, _LOST, _EVENTS = range(5)


@compiled
def followed_worth(a: FleetArrays, i: int, taken: Integers, size: int) -> float:
    """What spacecraft ``i`` sends and keeps, less what it loses, in worth."""
    c, capacity, acknowledged = a.classes, a.craft[i, 2], a.classes.acknowledged[i]
    first, count = c.first[i], c.first[i + 1] - c.first[i]
    # Data aboard of each class as chunks acquired evenly, oldest first: from, until, MB, MB per second.
    chunk = np.empty((count, _FIRST_CHUNKS, 4))
    queue = np.zeros((count, 2), dtype=np.int64)
    aboard, state = np.zeros(count), np.zeros(5)
    for k in range(count):
        start_mb, age_s = c.one[first + k, 1], max(c.one[first + k, 2], 1.0)
        if start_mb > 0.0:
            chunk[k, 0, 0], chunk[k, 0, 1], chunk[k, 0, 2], chunk[k, 0, 3] = -age_s, 0.0, start_mb, start_mb / age_s
            queue[k, 1], aboard[k] = 1, start_mb
    pieces = 0
    for k in range(size):
        pieces += c.piece_first[taken[k] + 1] - c.piece_first[taken[k]]
    due, dues = np.empty((pieces, 2)), 0
    for k in range(size):
        freed_s = _freed_s(c, a.span, acknowledged, taken, size, k)
        for p in range(c.piece_first[taken[k]], c.piece_first[taken[k] + 1]):
            chunk = _advance(c, first, count, capacity, i, c.piece[p, 0], 0.0, False, due[:dues], chunk, queue, aboard,
                             state)
            held = state[_HELD]
            chunk = _advance(c, first, count, capacity, i, c.piece[p, 1], c.piece[p, 2], acknowledged > 0, due[:dues],
                             chunk, queue, aboard, state)
            if acknowledged > 0:
                # Nothing is freed while a contact lasts.
                due[dues, 0], due[dues, 1] = freed_s, state[_HELD] - held
                dues += 1
    _advance(c, first, count, capacity, i, float(a.horizon_s), 0.0, False, due[:dues], chunk, queue, aboard, state)
    worth = state[_WORTH] - a.spill * state[_LOST]
    for k in range(count):
        worth += c.one[first + k, 4] * aboard[k]
    return float(worth) if state[_EVENTS] < _MOST_EVENTS else -np.inf


@inlined
def _freed_s(c: ClassArrays, span: Integers, acknowledged: int, taken: Integers, size: int, k: int) -> float:
    """When the storage of what contact ``k`` sends is freed, where that is not at once."""
    if acknowledged == 1:
        return float(span[taken[k], 1])
    for later in range(k + 1, size):
        if c.command[taken[later]]:
            return float(span[taken[later], 1])
    return np.inf


@inner
def _advance(
    c: ClassArrays, first: int, count: int, capacity: float, i: int, until: float, link: float, hold: bool, due: Floats,
    chunk: Floats, queue: Integers, aboard: Floats, state: Floats,
) -> Floats:
    """Go on to ``until`` with a link of ``link`` MB/s; with ``hold`` what is sent keeps its room.

    ``due`` (., 2) says when how much room is freed. Returns the chunks, which may have moved to a larger room.
    """
    one, made_first, made_s, made_mb, newest = c.one, c.made_first, c.made_s, c.made_mb, c.newest[i]
    made, flow = np.zeros(count), np.zeros((7, count))
    while state[_CLOCK] < until and state[_EVENTS] < _MOST_EVENTS:
        stop = until
        for d in range(len(due)):
            if due[d, 0] <= state[_CLOCK]:
                state[_HELD] = max(0.0, state[_HELD] - due[d, 1])
                due[d, 0] = np.inf
            stop = min(stop, due[d, 0])
        for k in range(count):
            low, high = made_first[first + k], made_first[first + k + 1]
            at = low + np.searchsorted(made_s[low:high], state[_CLOCK], side="right")
            made[k] = (made_mb[at] - made_mb[at - 1]) / (made_s[at] - made_s[at - 1]) if at < high else 0.0
            stop = min(stop, made_s[at]) if at < high else stop
        while state[_CLOCK] < stop and state[_EVENTS] < _MOST_EVENTS:
            state[_EVENTS] += 1
            for k in range(count):
                if queue[k, 1] >= chunk.shape[1]:
                    chunk = _with_room(chunk, queue, k)
            left_s = stop - state[_CLOCK]
            _set_flows(one, first, capacity, newest, hold, link, made, chunk, queue, aboard, state, flow)
            step = min(left_s, _until_event(one, first, capacity, hold, chunk, queue, aboard, state, flow))
            # The clock must move, whatever the rounding.
            later_s = max(state[_CLOCK] + step, np.nextafter(state[_CLOCK], np.inf))
            for k in range(count):
                state[_LOST] += (flow[1, k] + flow[2, k] + flow[3, k] + flow[4, k]) * step
                if flow[0, k] > 0.0:
                    low, high = c.fresh_first[first + k], c.fresh_first[first + k + 1]
                    share = _mean_share(c.fresh[low:high], chunk, queue, aboard, state[_CLOCK], step, k, flow)
                    state[_WORTH] += one[first + k, 0] * flow[0, k] * step * share
                    state[_HELD] += flow[0, k] * step if hold else 0.0
                _move(chunk, queue, aboard, k, state[_CLOCK], step, flow)
            state[_CLOCK] = stop if step >= left_s else later_s
    return chunk


@inner
def _with_room(chunk: Floats, queue: Integers, k: int) -> Floats:
    """The chunks with room for one more of class ``k``: in the place of those that are gone, else in twice the room."""
    head, tail = queue[k, 0], queue[k, 1]
    if head >= tail - head:
        for place in range(tail - head):
            move_to(chunk[k, place], 0, chunk[k, head + place], 0, 4)
        queue[k, 0], queue[k, 1] = 0, tail - head
        return chunk
    larger = np.empty((chunk.shape[0], 2 * chunk.shape[1], 4))
    for row in range(chunk.shape[0]):
        for place in range(chunk.shape[1]):
            move_to(larger[row, place], 0, chunk[row, place], 0, 4)
    return larger


# Rows of the flows [MB/s] of each class.
_SEND, _REFUSED, _TAIL, _OLD, _MISSED, _INTAKE, _HEAD = range(7)


@inlined
def _set_flows(
    one: Floats, first: int, capacity: float, newest: bool, hold: bool, link: float, made: Floats, chunk: Floats,
    queue: Integers, aboard: Floats, state: Floats, flow: Floats,
) -> None:
    """What is sent, refused as it comes, lost from the tail and from the head, and dropped, until the next event."""
    count = len(made)
    flow.fill(0.0)
    total, freed, over = state[_HELD], 0.0, 0.0
    for k in range(count):
        empty = aboard[k] <= _NOTHING_MB
        flow[_SEND, k] = min(link, made[k]) if empty else link
        link -= flow[_SEND, k]
        if not empty:
            at = queue[k, 0]
            if state[_CLOCK] - chunk[k, at, 0] >= one[first + k, 3] - _AT_ONCE_S:
                flow[_MISSED, k] = max(0.0, chunk[k, at, 3] - flow[_SEND, k])
        total += aboard[k]
        freed += flow[_MISSED, k] + (0.0 if hold else flow[_SEND, k])
        over += made[k]
    over -= freed
    if total >= capacity - 1e-12 * (1.0 + capacity):
        for k in range(count - 1, -1, -1):
            if over <= 0.0:
                break
            if aboard[k] <= _NOTHING_MB:
                flow[_REFUSED, k] = min(over, made[k] - flow[_SEND, k])
                over -= flow[_REFUSED, k]
            elif newest:
                flow[_REFUSED, k] = min(over, made[k])
                flow[_TAIL, k] = over - flow[_REFUSED, k]
                over = 0.0
            else:
                # The oldest goes, so that nothing is left to reach the deadline.
                flow[_OLD, k], flow[_MISSED, k] = over + flow[_MISSED, k], 0.0
                over = 0.0
        for k in range(count - 1, -1, -1):
            if over > 0.0 and aboard[k] <= _NOTHING_MB:
                less = min(over, flow[_SEND, k])
                flow[_SEND, k] -= less
                flow[_REFUSED, k] += less
                over -= less
    for k in range(count):
        empty = aboard[k] <= _NOTHING_MB
        flow[_INTAKE, k] = made[k] - flow[_REFUSED, k] - (flow[_SEND, k] if empty else 0.0)
        flow[_HEAD, k] = (0.0 if empty else flow[_SEND, k]) + flow[_OLD, k] + flow[_MISSED, k]


@inlined
def _joins(chunk: Floats, k: int, at: int, clock: float, intake: float) -> bool:
    """Whether what comes in now goes on with a chunk."""
    return bool(chunk[k, at, 1] == clock and abs(chunk[k, at, 3] - intake) <= 1e-12 * intake)


@inlined
def _until_event(
    one: Floats, first: int, capacity: float, hold: bool, chunk: Floats, queue: Integers, aboard: Floats, state: Floats,
    flow: Floats,
) -> float:
    """Seconds until a chunk is gone, data reaches its deadline, or the storage is full."""
    step, growth, total = np.inf, 0.0, state[_HELD]
    for k in range(len(aboard)):
        total += aboard[k]
        growth += flow[_INTAKE, k] - flow[_HEAD, k] - flow[_TAIL, k] + (flow[_SEND, k] if hold else 0.0)
        if aboard[k] <= _NOTHING_MB:
            # What comes in from now on reaches its deadline no sooner than this.
            step = min(step, one[first + k, 3])
            continue
        head, last = queue[k, 0], queue[k, 1] - 1
        out = flow[_HEAD, k]
        if head == last:
            out += flow[_TAIL, k]
            if _joins(chunk, k, last, state[_CLOCK], flow[_INTAKE, k]):
                out -= flow[_INTAKE, k]
        if out > 0.0:
            step = min(step, chunk[k, head, 2] / out)
        if flow[_TAIL, k] > 0.0 and head != last:
            step = min(step, chunk[k, last, 2] / flow[_TAIL, k])
        left_s = chunk[k, head, 0] + one[first + k, 3] - state[_CLOCK]
        pace = flow[_HEAD, k] / chunk[k, head, 3]
        if left_s > _AT_ONCE_S and pace < 1.0 and left_s < np.inf:
            step = min(step, left_s / (1.0 - pace))
    if total < capacity - 1e-12 * (1.0 + capacity) and growth > 0.0:
        step = min(step, (capacity - total) / growth)
    return step


@inlined
def _move(
    chunk: Floats, queue: Integers, aboard: Floats, k: int, clock: float, step: float, flow: Floats,
) -> None:
    """Let ``step`` seconds pass in one class: data comes in, goes from the head and from the tail."""
    intake, out, tail = flow[_INTAKE, k], flow[_HEAD, k], flow[_TAIL, k]
    if intake > 0.0:
        at = queue[k, 1] - 1
        if at >= queue[k, 0] and _joins(chunk, k, at, clock, intake):
            chunk[k, at, 1] = clock + step
            chunk[k, at, 2] += intake * step
        else:
            at += 1
            chunk[k, at, 0], chunk[k, at, 1] = clock, clock + step
            chunk[k, at, 2], chunk[k, at, 3] = intake * step, intake
            queue[k, 1] = at + 1
    if out > 0.0:
        at = queue[k, 0]
        chunk[k, at, 2] -= out * step
        chunk[k, at, 0] += out * step / chunk[k, at, 3]
    if tail > 0.0:
        at = queue[k, 1] - 1
        chunk[k, at, 2] -= tail * step
        chunk[k, at, 1] -= tail * step / chunk[k, at, 3]
    while queue[k, 0] < queue[k, 1] and chunk[k, queue[k, 0], 2] <= _NOTHING_MB:
        queue[k, 0] += 1
    while queue[k, 0] < queue[k, 1] and chunk[k, queue[k, 1] - 1, 2] <= _NOTHING_MB and tail > 0.0:
        queue[k, 1] -= 1
    aboard[k] = max(0.0, aboard[k] + (intake - out - tail) * step) if queue[k, 0] < queue[k, 1] else 0.0


@inlined
def _mean_share(
    fresh: Floats, chunk: Floats, queue: Integers, aboard: Floats, clock: float, step: float, k: int, flow: Floats,
) -> float:
    """The mean share of its weight that what class ``k`` sends meanwhile is worth."""
    age_s = later_s = 0.0
    if aboard[k] > _NOTHING_MB:
        at = queue[k, 0]
        age_s = max(0.0, clock - chunk[k, at, 0])
        later_s = max(0.0, age_s + step * (1.0 - flow[_HEAD, k] / chunk[k, at, 3]))
    if abs(later_s - age_s) < _ONE_AGE_S:
        return _share_at(fresh, age_s + _ONE_AGE_S)
    return float((_shares_up_to(fresh, later_s) - _shares_up_to(fresh, age_s)) / (later_s - age_s))


@inlined
def _share_at(fresh: Floats, age_s: float) -> float:
    """The share at an age, in straight lines."""
    at = np.searchsorted(fresh[:, 0], age_s, side="right")
    if at >= len(fresh):
        return float(fresh[-1, 1])
    part = (age_s - fresh[at - 1, 0]) / (fresh[at, 0] - fresh[at - 1, 0])
    return float(fresh[at - 1, 1] + part * (fresh[at, 1] - fresh[at - 1, 1]))


@inlined
def _shares_up_to(fresh: Floats, age_s: float) -> float:
    """The integral of the share from age 0."""
    total, at = 0.0, 0
    while at + 1 < len(fresh) and fresh[at + 1, 0] <= age_s:
        total += 0.5 * (fresh[at, 1] + fresh[at + 1, 1]) * (fresh[at + 1, 0] - fresh[at, 0])
        at += 1
    return float(total + 0.5 * (fresh[at, 1] + _share_at(fresh, age_s)) * (age_s - fresh[at, 0]))
