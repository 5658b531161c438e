"""Classes of data aboard one spacecraft, followed exactly in continuous time.

This is what the classes of :mod:`passplan.planning.streams` mean. At any instant the link takes the class that is
worth most, then the next one, each from its oldest data; a class with nothing aboard sends what it generates.
What has reached the deadline of its class is dropped. When the storage is full, what comes in too much is lost from
the class that is worth least: its oldest data, or by policy its newest. What is sent frees storage at once, or, by
policy, when it is acknowledged; until then it takes room and cannot be lost, and if it takes all the room, data that
could only be sent as it is generated is lost. Between two events (a rate changes, a class runs empty, the storage
fills, data reaches its deadline) all amounts move in straight lines, so that nothing is rounded to a step, and the
age of what is sent moves in a straight line too, so that its worth is an integral known in closed form.
(Own derivation.)
"""

from __future__ import annotations

import math
from collections import deque
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from passplan.planning.arrays import Floats
from passplan.planning.streams import Keeping, Stream

# MB: less than a byte is nothing. Seconds: nearer to the deadline than this is at it.
_NOTHING_MB = 1e-9
_AT_ONCE_S = 1e-7
_MOST_EVENTS = 2_000_000


@dataclass(frozen=True, eq=False)
class Aboard:
    """Where the data of each class went, shape (k,) in MB, and the fill through time.

    ``lost_mb`` counts what ``missed_mb`` is of: data dropped at its deadline. ``sent_mb`` and ``sent_worth``
    (pieces, k) are what each piece of sending brought down and its worth. ``path_s`` and ``path_mb`` are the storage in
    use as straight lines, ``losing_s`` (., 2) the spans in which data is lost.
    """

    delivered_mb: Floats
    lost_mb: Floats
    missed_mb: Floats
    left_mb: Floats
    sent_mb: Floats
    sent_worth: Floats
    path_s: Floats
    path_mb: Floats
    losing_s: Floats


def follow(
    streams: Sequence[Stream], capacity_mb: float, horizon_s: float, pieces: Sequence[tuple[float, float, float]],
    keeping: Keeping | None = None, freed_s: Sequence[float] = (),
) -> Aboard:
    """Follow ``streams`` (by falling weight) through pieces (start_s, end_s, rate_mb_per_s) in time order.

    ``freed_s`` says for each piece when the storage of what it sent is freed (at its end or later; infinite for
    never); without it storage is freed as data is sent. Raises ``ValueError`` where pieces overlap.
    """
    store = _Store(streams, capacity_mb, (keeping or Keeping()).newest)
    sent, worth = (np.zeros((len(pieces), len(streams))) for _ in range(2))
    for k, (start_s, end_s, rate) in enumerate(pieces):
        if start_s < store.clock - 1e-9:
            raise ValueError(f"sending from {start_s} s overlaps the piece before it, which ends at {store.clock} s")
        store.run(start_s, 0.0, False)
        before = store.sent.copy(), store.worth.copy()
        store.run(end_s, rate, len(freed_s) > 0)
        sent[k], worth[k] = store.sent - before[0], store.worth - before[1]
        if len(freed_s):
            store.releases.append((float(freed_s[k]), float(sent[k].sum())))
    store.run(horizon_s, 0.0, False)
    path = np.array(store.path)
    left = np.array([queue.mb for queue in store.queues])
    return Aboard(store.sent, store.lost + store.missed, store.missed, left, sent, worth, path[:, 0], path[:, 1],
                  np.array(store.losing, dtype=float).reshape(-1, 2))


@dataclass
class _Chunk:
    """Data acquired evenly from ``from_s`` to ``to_s``."""

    from_s: float
    to_s: float
    mb: float
    density: float


class _Queue:
    """The data of one class aboard, oldest first."""

    def __init__(self, stream: Stream) -> None:
        self.chunks: deque[_Chunk] = deque()
        self.mb = 0.0
        if stream.start_mb > 0.0:
            # Data that was acquired in an instant would have no density.
            age_s = max(stream.start_age_s, 1.0)
            self.chunks.append(_Chunk(-age_s, 0.0, stream.start_mb, stream.start_mb / age_s))
            self.mb = stream.start_mb

    def grows_at_head(self, clock: float, intake: float) -> bool:
        """Whether the oldest chunk is the one that what comes in now joins."""
        return len(self.chunks) == 1 and self._joins(clock, intake)

    def _joins(self, clock: float, intake: float) -> bool:
        last = self.chunks[-1]
        return last.to_s == clock and abs(last.density - intake) <= 1e-12 * intake

    def move(self, clock: float, step: float, intake: float, head: float, tail: float) -> None:
        """Let ``step`` seconds pass: data comes in, goes from the head and from the tail, at these rates."""
        if intake > 0.0:
            if self.chunks and self._joins(clock, intake):
                self.chunks[-1].to_s, self.chunks[-1].mb = clock + step, self.chunks[-1].mb + intake * step
            else:
                self.chunks.append(_Chunk(clock, clock + step, intake * step, intake))
        if head > 0.0:
            first = self.chunks[0]
            first.mb, first.from_s = first.mb - head * step, first.from_s + head * step / first.density
        if tail > 0.0:
            last = self.chunks[-1]
            last.mb, last.to_s = last.mb - tail * step, last.to_s - tail * step / last.density
        while self.chunks and self.chunks[0].mb <= _NOTHING_MB:
            self.chunks.popleft()
        while self.chunks and self.chunks[-1].mb <= _NOTHING_MB and tail > 0.0:
            self.chunks.pop()
        self.mb = max(0.0, self.mb + (intake - head - tail) * step) if self.chunks else 0.0


class _Store:
    def __init__(self, streams: Sequence[Stream], capacity_mb: float, newest: bool) -> None:
        self.streams, self.capacity, self.newest = streams, capacity_mb, newest
        self.full = capacity_mb - 1e-12 * (1.0 + capacity_mb)
        self.clock = 0.0
        self.queues = [_Queue(one) for one in streams]
        self.held = 0.0
        self.releases: list[tuple[float, float]] = []
        self.sent, self.worth, self.lost, self.missed = (np.zeros(len(streams)) for _ in range(4))
        self.path = [(0.0, self.total())]
        self.losing: list[list[float]] = []
        self.changes = np.unique(np.concatenate([one.time_s for one in streams]))

    def total(self) -> float:
        return math.fsum(queue.mb for queue in self.queues) + self.held

    def run(self, until_s: float, link: float, hold: bool) -> None:
        """Go on to ``until_s`` with a link of ``link`` MB/s; with ``hold`` what is sent keeps its room for now."""
        stops = {t for t in self.changes.tolist() if self.clock < t < until_s} | {until_s}
        stops |= {t for t, _ in self.releases if self.clock < t < until_s}
        for stop in sorted(stops):
            self._release()
            if stop > self.clock:
                made = [float(one.made(stop) - one.made(self.clock)) / (stop - self.clock) for one in self.streams]
                self._even(stop, link, made, hold)
        self._release()

    def _release(self) -> None:
        due = [mb for t, mb in self.releases if t <= self.clock]
        if due:
            self.held = max(0.0, self.held - math.fsum(due))
            self.releases = [(t, mb) for t, mb in self.releases if t > self.clock]
            self.path.append((self.clock, self.total()))

    def _even(self, until_s: float, link: float, made: list[float], hold: bool) -> None:
        """Constant rates from outside; events come from within."""
        for _ in range(_MOST_EVENTS):
            if self.clock >= until_s:
                return
            rates = _Rates(self, link, made, hold)
            step = min(until_s - self.clock, rates.until_event())
            # The clock must move, whatever the rounding.
            later_s = max(self.clock + step, float(np.nextafter(self.clock, np.inf)))
            rates.apply(step)
            self.clock = until_s if step >= until_s - self.clock else later_s
            self.path.append((self.clock, self.total()))
        raise RuntimeError("the storage has too many events; this is a fault of the program")


class _Rates:
    """What flows where [MB/s] until the next event, class by class."""

    def __init__(self, store: _Store, link: float, made: list[float], hold: bool) -> None:
        self.store, self.hold, self.made = store, hold, made
        count = range(len(made))
        self.empty = [queue.mb <= _NOTHING_MB for queue in store.queues]
        self.send, self.refused, self.tail, self.old, self.missed = ([0.0] * len(made) for _ in range(5))
        for k in count:
            self.send[k] = min(link, made[k]) if self.empty[k] else link
            link -= self.send[k]
            if not self.empty[k]:
                first = store.queues[k].chunks[0]
                if store.clock - first.from_s >= store.streams[k].deadline_s - _AT_ONCE_S:
                    self.missed[k] = max(0.0, first.density - self.send[k])
        if store.total() >= store.full:
            self._overflow()
        self.intake = [made[k] - self.refused[k] - (self.send[k] if self.empty[k] else 0.0) for k in count]
        self.head = [(0.0 if self.empty[k] else self.send[k]) + self.old[k] + self.missed[k] for k in count]

    def _overflow(self) -> None:
        freed = sum(self.missed) + (0.0 if self.hold else sum(self.send))
        over = sum(self.made) - freed
        for k in reversed(range(len(self.made))):
            if over <= 0.0:
                return
            if self.empty[k]:
                self.refused[k] = min(over, self.made[k] - self.send[k])
            elif self.store.newest:
                self.refused[k] = min(over, self.made[k])
                self.tail[k] = over - self.refused[k]
            else:
                # The oldest goes, so that nothing is left to reach the deadline.
                self.old[k], self.missed[k] = over + self.missed[k], 0.0
            over -= self.refused[k] + self.tail[k] if self.empty[k] or self.store.newest else over
        for k in reversed(range(len(self.made))):
            if over > 0.0 and self.empty[k]:
                cut = min(over, self.send[k])
                self.send[k], self.refused[k], over = self.send[k] - cut, self.refused[k] + cut, over - cut

    def until_event(self) -> float:
        """Seconds until a chunk is gone, data reaches its deadline, or the storage is full."""
        store, step = self.store, math.inf
        for k, queue in enumerate(store.queues):
            if self.empty[k]:
                # What comes in from now on reaches its deadline no sooner than this.
                step = min(step, store.streams[k].deadline_s)
                continue
            first, last = queue.chunks[0], queue.chunks[-1]
            out = self.head[k] - (self.intake[k] if queue.grows_at_head(store.clock, self.intake[k]) else 0.0)
            if out + (self.tail[k] if first is last else 0.0) > 0.0:
                step = min(step, first.mb / (out + (self.tail[k] if first is last else 0.0)))
            if self.tail[k] > 0.0 and first is not last:
                step = min(step, last.mb / self.tail[k])
            left_s = first.from_s + store.streams[k].deadline_s - store.clock
            pace = self.head[k] / first.density
            if left_s > _AT_ONCE_S and pace < 1.0 and math.isfinite(left_s):
                step = min(step, left_s / (1.0 - pace))
        growth = sum(self.intake) - sum(self.head) - sum(self.tail) + (sum(self.send) if self.hold else 0.0)
        total = store.total()
        if total < store.full and growth > 0.0:
            step = min(step, (store.capacity - total) / growth)
        return step

    def apply(self, step: float) -> None:
        """Let ``step`` seconds pass."""
        store = self.store
        for k, (queue, stream) in enumerate(zip(store.queues, store.streams, strict=True)):
            store.sent[k] += self.send[k] * step
            store.worth[k] += stream.weight * self.send[k] * step * self._share(k, step)
            store.lost[k] += (self.refused[k] + self.tail[k] + self.old[k]) * step
            store.missed[k] += self.missed[k] * step
            queue.move(store.clock, step, self.intake[k], self.head[k], self.tail[k])
        if self.hold:
            store.held += sum(self.send) * step
        if sum(self.refused) + sum(self.tail) + sum(self.old) + sum(self.missed) > 0.0:
            if store.losing and store.losing[-1][1] >= store.clock - 1e-6:
                store.losing[-1][1] = store.clock + step
            else:
                store.losing.append([store.clock, store.clock + step])

    def _share(self, k: int, step: float) -> float:
        """The mean share of the weight that what class k sends meanwhile is worth."""
        if self.send[k] <= 0.0:
            return 0.0
        if self.empty[k]:
            return self.store.streams[k].share(0.0, 0.0)
        first = self.store.queues[k].chunks[0]
        age_s = max(0.0, self.store.clock - first.from_s)
        later_s = max(0.0, age_s + step * (1.0 - self.head[k] / first.density))
        return self.store.streams[k].share(age_s, later_s)
