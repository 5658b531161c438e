"""Classes of data aboard one spacecraft, followed exactly in continuous time.

This is what the classes of :mod:`passplan.planning.streams` mean. At any instant the link takes the class that is
worth most, then the next one, each from its oldest data; a class with nothing aboard sends what it generates.
When the storage is full, what comes in too much is lost from the class that is worth least. Between two events
(a rate changes, a class runs empty, the storage fills) all amounts move in straight lines, so that nothing is
rounded to a step. (Own derivation.)
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from passplan.planning.streams import Floats, Stream

# MB: less than a byte is nothing.
_NOTHING_MB = 1e-9
_MOST_EVENTS = 2_000_000


@dataclass(frozen=True, eq=False)
class Aboard:
    """Where the data of each class went, shape (k,) in MB, and the fill through time.

    ``sent_mb`` (pieces, k) is what each piece of sending brought down. ``path_s`` and ``path_mb`` are the joint fill
    as straight lines, ``losing_s`` (., 2) the spans in which data is lost.
    """

    delivered_mb: Floats
    lost_mb: Floats
    left_mb: Floats
    sent_mb: Floats
    path_s: Floats
    path_mb: Floats
    losing_s: Floats


def follow(
    streams: Sequence[Stream], capacity_mb: float, horizon_s: float, pieces: Sequence[tuple[float, float, float]],
) -> Aboard:
    """Follow ``streams`` (by falling weight) through pieces (start_s, end_s, rate_mb_per_s) in time order.

    Raises ``ValueError`` where pieces overlap.
    """
    store = _Store(streams, capacity_mb)
    changes = np.unique(np.concatenate([one.time_s for one in streams]))
    sent = np.zeros((len(pieces), len(streams)))
    for k, (start_s, end_s, rate) in enumerate(pieces):
        if start_s < store.clock - 1e-9:
            raise ValueError(f"sending from {start_s} s overlaps the piece before it, which ends at {store.clock} s")
        store.run(start_s, 0.0, changes)
        before = store.sent.copy()
        store.run(end_s, rate, changes)
        sent[k] = store.sent - before
    store.run(horizon_s, 0.0, changes)
    path = np.array(store.path)
    return Aboard(store.sent, store.lost, store.fill, sent, path[:, 0], path[:, 1],
                  np.array(store.losing, dtype=float).reshape(-1, 2))


class _Store:
    def __init__(self, streams: Sequence[Stream], capacity_mb: float) -> None:
        self.streams, self.capacity = streams, capacity_mb
        self.full = capacity_mb - 1e-12 * (1.0 + capacity_mb)
        self.clock = 0.0
        self.fill = np.array([one.start_mb for one in streams], dtype=float)
        self.sent, self.lost = np.zeros(len(streams)), np.zeros(len(streams))
        self.path = [(0.0, float(self.fill.sum()))]
        self.losing: list[list[float]] = []

    def run(self, until_s: float, link: float, changes: Floats) -> None:
        """Go on to ``until_s`` with a link of ``link`` MB/s; generation changes its rates at ``changes``."""
        inside = changes[(changes > self.clock) & (changes < until_s)]
        for stop in (*inside.tolist(), until_s):
            if stop > self.clock:
                made = np.array([float(one.made(stop) - one.made(self.clock)) for one in self.streams])
                self._even(stop, link, made / (stop - self.clock))

    def _even(self, until_s: float, link: float, made: Floats) -> None:
        """Constant rates from outside; events come from within."""
        for _ in range(_MOST_EVENTS):
            if self.clock >= until_s:
                return
            send, lose = self._rates(link, made)
            growth = made - send - lose
            step = until_s - self.clock
            for k in np.flatnonzero((growth < 0.0) & (self.fill > _NOTHING_MB)):
                step = min(step, self.fill[k] / -growth[k])
            total = float(self.fill.sum())
            if total < self.full and growth.sum() > 0.0:
                step = min(step, (self.capacity - total) / float(growth.sum()))
            self.sent += send * step
            self.lost += lose * step
            self.fill = np.maximum(self.fill + growth * step, 0.0)
            if lose.sum() > 0.0:
                self._note_loss(step)
            # The clock must move, whatever the rounding.
            later_s = max(self.clock + step, float(np.nextafter(self.clock, np.inf)))
            self.clock = until_s if step >= until_s - self.clock else later_s
            self.path.append((self.clock, float(self.fill.sum())))
        raise RuntimeError("the storage has too many events; this is a fault of the program")

    def _rates(self, link: float, made: Floats) -> tuple[Floats, Floats]:
        send, lose = np.zeros(len(made)), np.zeros(len(made))
        for k in range(len(made)):
            send[k] = link if self.fill[k] > _NOTHING_MB else min(link, made[k])
            link -= send[k]
        over = float(made.sum() - send.sum())
        if self.fill.sum() < self.full or over <= 0.0:
            return send, lose
        for k in reversed(range(len(made))):
            lose[k] = over if self.fill[k] > _NOTHING_MB else min(over, made[k] - send[k])
            over -= lose[k]
        return send, lose

    def _note_loss(self, step: float) -> None:
        if self.losing and self.losing[-1][1] >= self.clock - 1e-6:
            self.losing[-1][1] = self.clock + step
        else:
            self.losing.append([self.clock, self.clock + step])
