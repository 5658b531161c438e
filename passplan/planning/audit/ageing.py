"""Data that ages, is dropped at a deadline, or keeps its room until it is acknowledged: followed by the audit itself.

Each class is a ledger: a line of MB taken in against the instant of their acquisition, and a mark on it up to which
they are gone. What is aboard lies between the mark and the end of the line; the age of the oldest is read off where
the mark stands. Sending and dropping the oldest move the mark, losing the newest cuts the end. Between two events
all rates are steady. Own derivation.
"""

from __future__ import annotations

import math
from bisect import bisect_right
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise

from passplan.inputs.data import DataClass
from passplan.inputs.run import Run
from passplan.planning.audit.making import Rates, rates_of
from passplan.planning.audit.rows import Contact, Piece
from passplan.planning.audit.stretches import apportioned, stretches_of

_DUST_MB = 1e-9
_CLOSE_S = 1e-7


@dataclass(frozen=True)
class Aged:
    """Where one class went [MB]: ``lost_mb`` with what was ``missed_mb``; volume and worth of each piece."""

    delivered_mb: float
    lost_mb: float
    missed_mb: float
    left_mb: float
    sent_mb: tuple[float, ...]
    worth: tuple[float, ...]


def ages(run: Run, name: str) -> bool:
    """Whether age, or the moment of acknowledgement, matters to the data of a spacecraft."""
    aged = any(item.deadline_h is not None or item.freshness for item in run.data_of(name))
    return aged or run.spacecraft[name].acknowledged_by is not None


def follow_aged(
    run: Run, name: str, sending: Sequence[tuple[Contact, Piece]], contacts: Sequence[Contact]
) -> list[Aged]:
    """The classes of a spacecraft, best first, through its pieces in the order of their starts."""
    craft = run.spacecraft[name]
    kinds = [_Kind(item, rates_of(run, name, item), run.horizon_s) for item in run.data_of(name)]
    tank = _Tank(kinds, craft.storage_mb, craft.overflow == "newest")
    freed_s: list[float] = []
    for contact, _ in sending if craft.acknowledged_by is not None else ():
        commands = (c.end_s for c in contacts if c.spacecraft == name and c.start_s >= contact.end_s
                    and c.service != "downlink")
        freed_s.append(contact.end_s if craft.acknowledged_by == "contact" else min(commands, default=math.inf))
    pieces = [piece for _, piece in sending]
    stretches = list(stretches_of(pieces))
    for start_s, end_s, active in stretches:
        tank.go(start_s, 0.0, None)
        for kind in kinds:
            kind.sent.append(0.0)
            kind.worth.append(0.0)
        rate = math.fsum(pieces[k].rate_mbps for k in active) / 8.0
        # Several links at once: the last of their contacts to be acknowledged frees what they sent.
        tank.go(end_s, rate, max(freed_s[k] for k in active) if freed_s else None)
    tank.go(run.horizon_s, 0.0, None)
    return [
        Aged(math.fsum(kind.sent), kind.lost + kind.missed, kind.missed, kind.aboard,
             apportioned(kind.sent, pieces, stretches), apportioned(kind.worth, pieces, stretches))
        for kind in kinds
    ]


class _Kind:
    """The ledger of one class."""

    def __init__(self, item: DataClass, rates: Rates, horizon_s: float) -> None:
        self.item, self.rates = item, rates
        self.deadline_s = math.inf if item.deadline_h is None else item.deadline_h * 3600.0
        made_mb = math.fsum((b - a) * rate for a, b, rate in rates)
        age_s = 0.0 if item.start_age_h is None else item.start_age_h * 3600.0
        if item.start_age_h is None and made_mb > 0.0:
            age_s = min(item.start_fill_mb * horizon_s / made_mb, self.deadline_s)
        self.acquired_s, self.total_mb = [-max(age_s, 1.0), 0.0], [0.0, item.start_fill_mb]
        self.gone = self.lost = self.missed = 0.0
        self.slope = -1.0
        self.sent: list[float] = []
        self.worth: list[float] = []

    @property
    def aboard(self) -> float:
        return max(0.0, self.total_mb[-1] - self.gone)

    def note(self, acquired_s: float, total_mb: float, slope: float) -> None:
        """Draw the line on, at ``slope`` MB/s."""
        if abs(self.slope - slope) <= 1e-12 * slope and len(self.total_mb) > 2:
            self.acquired_s[-1], self.total_mb[-1] = acquired_s, total_mb
        else:
            self.acquired_s.append(acquired_s)
            self.total_mb.append(total_mb)
        self.slope = slope

    def trim(self) -> None:
        """Take off the level end of the line, in which nothing was taken in."""
        while len(self.total_mb) > 2 and self.total_mb[-1] <= self.total_mb[-2]:
            self.acquired_s.pop()
            self.total_mb.pop()
            self.slope = -1.0

    def stretches(self, from_mb: float) -> Iterator[tuple[float, float, float, float]]:
        """The line from a mark on, as (MB from, MB to, acquired from, acquired to) where it rises."""
        for k in range(max(bisect_right(self.total_mb, from_mb), 1), len(self.total_mb)):
            m, n, t, u = self.total_mb[k - 1], self.total_mb[k], self.acquired_s[k - 1], self.acquired_s[k]
            if n > m and n > from_mb:
                low = max(m, from_mb)
                yield low, n, t + (u - t) * (low - m) / (n - m), u

    def until_deadline_s(self, clock_s: float, out: float) -> float:
        """Seconds until the oldest aboard reaches the deadline while ``out`` MB/s go; no more than the deadline."""
        gone = 0.0
        for low, high, first_s, last_s in self.stretches(self.gone):
            gap_s = first_s + self.deadline_s - clock_s - (gone / out if out > 0.0 else 0.0)
            if out <= 0.0:
                return max(0.0, gap_s)
            gone += high - low
            later_s = last_s + self.deadline_s - clock_s - gone / out
            if later_s < 0.0 <= gap_s:
                return (gone - (high - low) * (1.0 - gap_s / (gap_s - later_s))) / out
            if gone / out > self.deadline_s:
                break
        return self.deadline_s

    def worth_of(self, clock_s: float, gone_mb: float, mb: float, out: float) -> float:
        """What ``mb`` after the mark ``gone_mb`` are worth a MB on average, going at ``out`` MB/s from now on."""
        points = self.item.freshness
        if not points or mb <= 0.0:
            return self.item.weight
        total = 0.0
        for low, high, first_s, last_s in self.stretches(gone_mb):
            top = min(high, gone_mb + mb)
            if top <= low:
                break
            top_s = first_s + (last_s - first_s) * (top - low) / (high - low)
            ages_s = clock_s + (low - gone_mb) / out - first_s, clock_s + (top - gone_mb) / out - top_s
            total += (top - low) * mean_share(points, ages_s[0] / 3600.0, ages_s[1] / 3600.0)
        return self.item.weight * total / mb


def mean_share(points: Sequence[tuple[float, float]], first_h: float, second_h: float) -> float:
    """The mean of a curve of straight lines and steps between two ages: each part counts as it is in its middle."""
    low, high = max(0.0, min(first_h, second_h)), max(0.0, first_h, second_h)
    if (high - low) * 3600.0 < 1e-6:
        # At a step the lower share counts.
        return _share(points, low + 1e-6 / 3600.0)
    edges = [low, *(age for age, _ in points if low < age < high), high]
    return sum((b - a) * _share(points, 0.5 * (a + b)) for a, b in pairwise(edges)) / (high - low)


def _share(points: Sequence[tuple[float, float]], age_h: float) -> float:
    for (a, share), (b, other) in pairwise(points):
        if age_h < b:
            return share + (other - share) * (age_h - a) / (b - a)
    return points[-1][1]


class _Tank:
    def __init__(self, kinds: list[_Kind], capacity_mb: float, newest: bool) -> None:
        self.kinds, self.capacity, self.newest = kinds, capacity_mb, newest
        self.clock = self.held = 0.0
        self.frees: list[tuple[float, float]] = []
        self.edges = sorted({t for kind in kinds for a, b, _ in kind.rates for t in (a, b)})
        self.at = [0] * len(kinds)

    def go(self, until_s: float, link: float, freed_s: float | None) -> None:
        """Up to an instant with a steady link; what is sent makes room at ``freed_s``, or at once."""
        before = math.fsum(kind.sent[-1] for kind in self.kinds) if freed_s is not None else 0.0
        while self.clock < until_s:
            self._free()
            stops = [t for t in (until_s, *(t for t, _ in self.frees)) if t > self.clock]
            following = bisect_right(self.edges, self.clock)
            stops += self.edges[following:following + 1]
            for k, kind in enumerate(self.kinds):
                while kind.rates[self.at[k]][1] <= self.clock and self.at[k] < len(kind.rates) - 1:
                    self.at[k] += 1
            self._step(min(stops), link, freed_s is not None)
        self._free()
        if freed_s is not None:
            self.frees.append((freed_s, math.fsum(kind.sent[-1] for kind in self.kinds) - before))
            self._free()

    def _free(self) -> None:
        for entry in [entry for entry in self.frees if entry[0] <= self.clock]:
            self.held = max(0.0, self.held - entry[1])
            self.frees.remove(entry)

    def _step(self, stop_s: float, link: float, hold: bool) -> None:
        """One stretch up to the next event, or to ``stop_s``."""
        kinds, count = self.kinds, range(len(self.kinds))
        made = [kind.rates[self.at[k]][2] for k, kind in enumerate(kinds)]
        empty = [kind.aboard <= _DUST_MB for kind in kinds]
        sent, late = ([0.0] * len(kinds) for _ in range(2))
        span_s = stop_s - self.clock
        for k, kind in enumerate(kinds):
            sent[k] = min(link, made[k]) if empty[k] else link
            link -= sent[k]
            if not empty[k] and math.isfinite(kind.deadline_s):
                low, high, first_s, last_s = next(kind.stretches(kind.gone))
                if self.clock - first_s >= kind.deadline_s - _CLOSE_S:
                    late[k] = max(0.0, (high - low) / (last_s - first_s) - sent[k])
                    going = sent[k] + late[k]
                    span_s = min(span_s, (high - low) / going)
        used = self.held + math.fsum(kind.aboard for kind in kinds)
        full = used >= self.capacity - 1e-12 * (1.0 + self.capacity)
        over = sum(made) - sum(late) - (0.0 if hold else sum(sent)) if full else 0.0
        old, cut, shut = self._give_up(over, made, empty, sent, late)
        taken = [made[k] - shut[k] - (sent[k] if empty[k] else 0.0) for k in count]
        going_out = [(0.0 if empty[k] else sent[k]) + late[k] + old[k] for k in count]
        for k, kind in enumerate(kinds):
            shrinks = going_out[k] + cut[k] - taken[k]
            if not empty[k] and shrinks > 0.0:
                span_s = min(span_s, kind.aboard / shrinks)
            if cut[k] > 0.0:
                kind.trim()
                span_s = min(span_s, (kind.total_mb[-1] - max(kind.gone, kind.total_mb[-2])) / cut[k])
            if math.isfinite(kind.deadline_s):
                limit_s = kind.deadline_s
                if not empty[k] and late[k] <= 0.0:
                    soon_s = kind.until_deadline_s(self.clock, going_out[k])
                    limit_s = soon_s if soon_s > _CLOSE_S else limit_s
                span_s = min(span_s, limit_s)
        fills = sum(taken) - sum(going_out) - sum(cut) + (sum(sent) if hold else 0.0)
        if not full and fills > 0.0:
            span_s = min(span_s, (self.capacity - used) / fills)
        end_s = max(self.clock + span_s, math.nextafter(self.clock, math.inf))
        end_s = stop_s if end_s >= stop_s - 1e-12 else end_s
        for k, kind in enumerate(kinds):
            self._book(kind, span_s, end_s, taken[k], going_out[k], cut[k], sent[k], empty[k])
            kind.lost += (old[k] + cut[k] + shut[k]) * span_s
            kind.missed += late[k] * span_s
        self.held += sum(sent) * span_s if hold else 0.0
        self.clock = end_s

    def _give_up(
        self, over: float, made: list[float], empty: list[bool], sent: list[float], late: list[float],
    ) -> tuple[list[float], list[float], list[float]]:
        """What a full storage loses [MB/s] of its oldest, of its newest, and of what comes in; the least worth first.

        Where the oldest goes nothing is left to be late, and what finds no room to wait in cannot be sent.
        """
        old, cut, shut = ([0.0] * len(made) for _ in range(3))
        for k in reversed(range(len(made))):
            if over <= 0.0:
                break
            if empty[k]:
                shut[k] = min(over, made[k] - sent[k])
                over -= shut[k]
            elif self.newest:
                shut[k] = min(over, made[k])
                cut[k], over = over - shut[k], 0.0
            else:
                old[k], late[k], over = over + late[k], 0.0, 0.0
        for k in reversed(range(len(made))):
            if over > 0.0 and empty[k]:
                less = min(over, sent[k])
                sent[k], shut[k], over = sent[k] - less, shut[k] + less, over - less
        return old, cut, shut

    def _book(
        self, kind: _Kind, span_s: float, end_s: float, taken: float, out: float, cut: float, sent: float, empty: bool,
    ) -> None:
        """Write one stretch into the ledger."""
        if empty:
            kind.gone = kind.total_mb[-1]
        if kind.acquired_s[-1] < self.clock:
            kind.note(self.clock, kind.total_mb[-1], -1.0)
        # One straight line stays one: else the marks of one class would part the lines of the others without end.
        kind.note(end_s, kind.total_mb[-1] + taken * span_s, taken)
        if sent > 0.0:
            share = kind.worth_of(self.clock, kind.gone, out * span_s, out)
            if empty:
                share = kind.item.weight * (_share(kind.item.freshness, 0.0) if kind.item.freshness else 1.0)
            kind.sent[-1] += sent * span_s
            kind.worth[-1] += sent * span_s * share
        kind.gone += out * span_s
        less = cut * span_s
        while less > 0.0 and len(kind.total_mb) > 1:
            part = min(less, kind.total_mb[-1] - kind.total_mb[-2])
            if part < kind.total_mb[-1] - kind.total_mb[-2]:
                share = part / (kind.total_mb[-1] - kind.total_mb[-2])
                kind.acquired_s[-1] -= share * (kind.acquired_s[-1] - kind.acquired_s[-2])
                kind.total_mb[-1] -= part
            else:
                kind.acquired_s.pop()
                kind.total_mb.pop()
            less -= part
            kind.slope = -1.0
