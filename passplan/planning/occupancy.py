"""Which options still fit beside those already chosen: the busy intervals of every lane."""

from __future__ import annotations

from bisect import bisect_left, insort
from collections.abc import Iterable

from passplan.planning.rules.terms import Lane, Terms


class Occupancy:
    """Busy intervals per lane. Options of one lane never overlap in it."""

    def __init__(self, terms: Terms, options: int) -> None:
        self.lanes = terms.lanes
        self._holds: list[list[tuple[int, int, int]]] = [[] for _ in range(options)]
        for k, lane in enumerate(terms.lanes):
            for o, a, b in zip(lane.options.tolist(), lane.start_s.tolist(), lane.end_s.tolist(), strict=True):
                self._holds[o].append((k, a, b))
        self._busy: list[list[tuple[int, int, int]]] = [[] for _ in terms.lanes]
        self._removed = {int(o) for removal in terms.removals for o in removal.options}

    def fits(self, option: int) -> bool:
        """Whether the option can join those chosen."""
        return option not in self._removed and not any(True for _ in self.blockers(option))

    def blockers(self, option: int) -> Iterable[tuple[Lane, int]]:
        """The chosen options that stand in the way, with the lane they hold."""
        for k, a, b in self._holds[option]:
            busy = self._busy[k]
            at = bisect_left(busy, (a, -1, -1))
            if at > 0 and busy[at - 1][1] > a:
                yield self.lanes[k], busy[at - 1][2]
            while at < len(busy) and busy[at][0] < b:
                yield self.lanes[k], busy[at][2]
                at += 1

    def add(self, option: int) -> None:
        """Choose an option that fits."""
        for k, a, b in self._holds[option]:
            insort(self._busy[k], (a, b, option))

    def remove(self, option: int) -> None:
        """Give an option up again."""
        for k, a, b in self._holds[option]:
            self._busy[k].remove((a, b, option))


def first_conflict(terms: Terms, options: int, chosen: Iterable[int]) -> str | None:
    """A sentence on the first rule that the chosen options break, or None. ``options`` is how many there are."""
    occupancy = Occupancy(terms, options)
    for o in chosen:
        if not occupancy.fits(int(o)):
            lane = next((lane.name for lane, _ in occupancy.blockers(int(o))), "a removal")
            return f"option {int(o)} breaks {lane}"
        occupancy.add(int(o))
    return None
