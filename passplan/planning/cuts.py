"""Where a window may be cut: at instants that matter to others, and on a grid; few, so that plans are fast."""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

from passplan.planning.problem import Windows

# Cuts closer than this to one another bring nothing that an operator would see.
_APART_S = 20


@dataclass
class Cuts:
    """Instants [s] at which a contact in one window may start or end. The ``must`` are kept in any case."""

    starts: set[int] = field(default_factory=set)
    ends: set[int] = field(default_factory=set)
    must_start: set[int] = field(default_factory=set)
    must_end: set[int] = field(default_factory=set)


def neighbour_cuts(windows: Windows, setup_s: Sequence[tuple[int, int]]) -> list[Cuts]:
    """For each window, the instants at which it makes way for another of its antenna or spacecraft.

    A contact ends in time for the other window to be used whole, or starts once it has been; on an antenna
    with the time to release and to prepare between them. ``setup_s`` are each window's seconds to prepare and
    to release.
    """
    cuts = [Cuts() for _ in range(len(windows))]
    starts, ends = windows.start_s.tolist(), windows.end_s.tolist()
    none = [(0, 0)] * len(windows)
    longest_s = max((a for a, _ in setup_s), default=0) + max((b for _, b in setup_s), default=0)
    for owner, beside_s, most_s in (
            (windows.antenna.tolist(), setup_s, longest_s), (windows.spacecraft.tolist(), none, 0)):
        groups: dict[int, list[int]] = {}
        for w, k in enumerate(owner):
            groups.setdefault(k, []).append(w)
        for members in groups.values():
            members.sort(key=lambda w: (starts[w], ends[w]))
            for n, w in enumerate(members):
                for v in members[n + 1:]:
                    if starts[v] >= ends[w] + most_s:
                        break
                    if starts[v] - beside_s[v][0] >= ends[w] + beside_s[w][1]:
                        continue
                    for a, b in ((w, v), (v, w)):
                        cuts[a].ends.add(starts[b] - beside_s[b][0] - beside_s[a][1])
                        cuts[a].starts.add(ends[b] + beside_s[b][1] + beside_s[a][0])
    return cuts


def add_handovers(cuts: Sequence[Cuts], windows: Windows, craft: int, low: int, high: int, overlap_s: int) -> None:
    """Let windows of a spacecraft hand over to each other within [low, high) with no more than the overlap.

    Of two of which one outlasts the other, the earlier can end, and the later start, that long before the seam is over.
    """
    starts, ends = windows.start_s.tolist(), windows.end_s.tolist()
    mine = [w for w, k in enumerate(windows.spacecraft.tolist()) if k == craft and starts[w] < high and ends[w] > low]
    for w in mine:
        for v in mine:
            if starts[w] < starts[v] and starts[v] + overlap_s <= ends[w] < ends[v]:
                cuts[w].must_end.add(starts[v] + overlap_s)
                cuts[v].must_start.add(ends[w] - overlap_s)


def spread(low: int, high: int, matter: Iterable[int], grid: Iterable[int], most: int) -> list[int]:
    """At most ``most`` instants strictly inside (low, high), spread out, those that matter first.

    Each pick is the instant furthest from those picked already and from both edges; ties go to the earlier.
    """
    picked = [low, high]
    for pool in (sorted(set(matter)), sorted(set(grid))):
        candidates = [t for t in pool if low < t < high]
        while len(picked) < most + 2:
            best = max(((_distance(t, picked), -t) for t in candidates), default=(0, 0))
            if best[0] < _APART_S:
                break
            picked.insert(bisect_left(picked, -best[1]), -best[1])
    return picked[1:-1]


def _distance(instant: int, picked: Sequence[int]) -> int:
    at = bisect_left(picked, instant)
    return min(abs(instant - picked[k]) for k in (at - 1, at) if 0 <= k < len(picked))
