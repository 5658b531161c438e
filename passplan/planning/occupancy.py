"""Which options still fit beside those already chosen: busy intervals of every lane, and loads of every row."""

from __future__ import annotations

from bisect import bisect_left, insort
from collections.abc import Iterable
from typing import NamedTuple

import numpy as np

from passplan.planning.rules.terms import Terms

# Amounts are sums of decimals; a limit reached to within this part of it is kept.
_ROUNDING = 1e-9


class Blocker(NamedTuple):
    """What stands in the way of an option: a reason code, what is taken or used up, and a chosen option that does."""

    kind: str
    name: str
    option: int


class Occupancy:
    """Busy intervals per lane, in which options never overlap, and what is used of every row's limit."""

    def __init__(self, terms: Terms, options: int) -> None:
        self.lanes, self.rows = terms.lanes, terms.rows
        self._holds: list[list[tuple[int, int, int]]] = [[] for _ in range(options)]
        for k, lane in enumerate(terms.lanes):
            for o, a, b in zip(lane.options.tolist(), lane.start_s.tolist(), lane.end_s.tolist(), strict=True):
                self._holds[o].append((k, a, b))
        self._busy: list[list[tuple[int, int, int]]] = [[] for _ in terms.lanes]
        self._uses: list[list[tuple[int, int, float]]] = [[] for _ in range(options)]
        for k, rows in enumerate(terms.rows):
            row = np.repeat(np.arange(len(rows)), np.diff(rows.offset))
            for o, r, amount in zip(rows.options.tolist(), row.tolist(), rows.amounts.tolist(), strict=True):
                self._uses[o].append((k, r, amount))
        self._load = [np.zeros(len(rows)) for rows in terms.rows]
        self._most = [rows.limit + _ROUNDING * (1.0 + rows.limit) for rows in terms.rows]
        self._chosen: set[int] = set()
        self._removed = {int(o) for removal in terms.removals for o in removal.options}

    def fits(self, option: int) -> bool:
        """Whether the option can join those chosen."""
        if option in self._removed or any(True for _ in self._in_lanes(option)):
            return False
        return not any(self._load[k][r] + amount > self._most[k][r] for k, r, amount in self._uses[option])

    def blockers(self, option: int) -> Iterable[Blocker]:
        """What stands in the way of an option, lanes first. A row that none but the option uses names itself."""
        yield from self._in_lanes(option)
        for k, r, amount in self._uses[option]:
            if self._load[k][r] + amount > self._most[k][r]:
                rows = self.rows[k]
                members = rows.options[rows.offset[r]:rows.offset[r + 1]].tolist()
                users = [o for o in members if o in self._chosen] or [option]
                yield from (Blocker(rows.kind, rows.names[r], o) for o in users)

    def _in_lanes(self, option: int) -> Iterable[Blocker]:
        for k, a, b in self._holds[option]:
            busy, lane = self._busy[k], self.lanes[k]
            at = bisect_left(busy, (a, -1, -1))
            if at > 0 and busy[at - 1][1] > a:
                yield Blocker(lane.kind, lane.name, busy[at - 1][2])
            while at < len(busy) and busy[at][0] < b:
                yield Blocker(lane.kind, lane.name, busy[at][2])
                at += 1

    def add(self, option: int) -> None:
        """Choose an option that fits."""
        for k, a, b in self._holds[option]:
            insort(self._busy[k], (a, b, option))
        for k, r, amount in self._uses[option]:
            self._load[k][r] += amount
        self._chosen.add(option)

    def remove(self, option: int) -> None:
        """Give an option up again."""
        for k, a, b in self._holds[option]:
            self._busy[k].remove((a, b, option))
        for k, r, amount in self._uses[option]:
            self._load[k][r] -= amount
        self._chosen.remove(option)


def first_conflict(terms: Terms, options: int, chosen: Iterable[int]) -> str | None:
    """A sentence on the first rule that the chosen options break, or None. ``options`` is how many there are."""
    occupancy = Occupancy(terms, options)
    for o in chosen:
        if not occupancy.fits(int(o)):
            name = next((blocker.name for blocker in occupancy.blockers(int(o))), "a removal")
            return f"option {int(o)} breaks {name}"
        occupancy.add(int(o))
    return None
