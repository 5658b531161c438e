"""Which options still fit beside those already chosen: busy intervals of every lane, and loads of every row."""

from __future__ import annotations

from bisect import bisect_left, insort
from collections.abc import Iterable, Iterator
from typing import Any, NamedTuple

import numpy as np

from passplan.planning.arrays import Floats, Integers, offsets_of
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
        none = np.zeros(0, dtype=np.int64)
        self._hold = _ByOption(
            options, [lane.options for lane in terms.lanes],
            np.repeat(np.arange(len(terms.lanes)), [len(lane.options) for lane in terms.lanes]),
            np.concatenate([none, *(lane.start_s for lane in terms.lanes)]),
            np.concatenate([none, *(lane.end_s for lane in terms.lanes)]))
        self._busy: list[list[tuple[int, int, int]]] = [[] for _ in terms.lanes]
        self._use = _ByOption(
            options, [rows.options for rows in terms.rows],
            np.repeat(np.arange(len(terms.rows)), [len(rows.options) for rows in terms.rows]),
            np.concatenate([none, *(np.repeat(np.arange(len(rows)), np.diff(rows.offset)) for rows in terms.rows)]),
            np.concatenate([np.zeros(0), *(rows.amounts for rows in terms.rows)]))
        self._load = [np.zeros(len(rows)) for rows in terms.rows]
        self._most = [rows.limit + _ROUNDING * (1.0 + rows.limit) for rows in terms.rows]
        self._chosen: set[int] = set()
        self._removed = {int(o) for removal in terms.removals for o in removal.options}

    def fits(self, option: int) -> bool:
        """Whether the option can join those chosen."""
        if option in self._removed or any(True for _ in self._in_lanes(option)):
            return False
        return not any(self._load[k][r] + amount > self._most[k][r] for k, r, amount in self._use.of(option))

    def blockers(self, option: int) -> Iterable[Blocker]:
        """What stands in the way of an option, lanes first. A row that none but the option uses names itself."""
        yield from self._in_lanes(option)
        for k, r, amount in self._use.of(option):
            if self._load[k][r] + amount > self._most[k][r]:
                rows = self.rows[k]
                members = rows.options[rows.offset[r]:rows.offset[r + 1]].tolist()
                users = [o for o in members if o in self._chosen] or [option]
                yield from (Blocker(rows.kind, rows.names[r], o) for o in users)

    def _in_lanes(self, option: int) -> Iterable[Blocker]:
        for k, a, b in self._hold.of(option):
            busy, lane = self._busy[k], self.lanes[k]
            at = bisect_left(busy, (a, -1, -1))
            if at > 0 and busy[at - 1][1] > a:
                yield Blocker(lane.kind, lane.name, busy[at - 1][2])
            while at < len(busy) and busy[at][0] < b:
                yield Blocker(lane.kind, lane.name, busy[at][2])
                at += 1

    def add(self, option: int) -> None:
        """Choose an option that fits."""
        for k, a, b in self._hold.of(option):
            insort(self._busy[k], (a, b, option))
        for k, r, amount in self._use.of(option):
            self._load[k][r] += amount
        self._chosen.add(option)

    def remove(self, option: int) -> None:
        """Give an option up again."""
        for k, a, b in self._hold.of(option):
            self._busy[k].remove((a, b, option))
        for k, r, amount in self._use.of(option):
            self._load[k][r] -= amount
        self._chosen.remove(option)


class _ByOption:
    """Entries (lane, start, end) or (rows, row, amount), found by option. Lists of lists would take seconds to fill."""

    def __init__(self, options: int, option: list[Integers], *columns: Integers | Floats) -> None:
        owner = np.concatenate([np.zeros(0, dtype=np.int64), *option])
        order = np.argsort(owner, kind="stable")
        self._first = offsets_of(np.bincount(owner, minlength=options))
        self._columns = [column[order] for column in columns]

    def of(self, option: int) -> Iterator[tuple[int, int, Any]]:
        """The entries of one option."""
        mine = slice(self._first[option], self._first[option + 1])
        first, second, third = (column[mine].tolist() for column in self._columns)
        return zip(first, second, third, strict=True)


def first_conflict(terms: Terms, options: int, chosen: Iterable[int]) -> str | None:
    """A sentence on the first rule that the chosen options break, or None. ``options`` is how many there are."""
    used = np.zeros(options, dtype=bool)
    used[list(chosen)] = True
    for removal in terms.removals:
        if np.any(used[removal.options]):
            return f"option {int(removal.options[used[removal.options]][0])} breaks a removal"
    for lane in terms.lanes:
        mine = np.flatnonzero(used[lane.options])
        mine = mine[np.argsort(lane.start_s[mine], kind="stable")]
        # Of intervals in the order of their starts, two overlap only if some neighbours do.
        late = np.flatnonzero(lane.start_s[mine][1:] < lane.end_s[mine][:-1])
        if len(late):
            return f"option {int(lane.options[mine[late[0] + 1]])} breaks {lane.name}"
    for rows in terms.rows:
        row = np.repeat(np.arange(len(rows)), np.diff(rows.offset))
        total = np.bincount(row, weights=rows.amounts * used[rows.options], minlength=len(rows))
        over = np.flatnonzero(total > rows.limit + _ROUNDING * (1.0 + rows.limit))
        if len(over):
            mine = np.flatnonzero(used[rows.options] & (row == over[0]))
            return f"option {int(rows.options[mine[-1]])} breaks {rows.names[over[0]]}"
    return None
