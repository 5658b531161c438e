"""A problem and its terms laid out for compiled code: options grouped by spacecraft, lanes as cliques.

Options are sorted by (spacecraft, start); all arrays here are in that order, and ``option`` maps back.
Lanes for which spacecraft compete become one row of cliques, all lanes end to end. Two options of a lane
overlap exactly if they share a clique, so "free" is "all my cliques are free", and a price of an option is
a difference of a running sum over the prices of cliques.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from passplan.planning.cliques import clique_spans
from passplan.planning.maps import StorageMaps
from passplan.planning.problem import Floats, Integers, Problem, offsets_of
from passplan.planning.rules.terms import Terms
from passplan.planning.search.compiled import compiled

# Wanted terms of one spacecraft are bits of one integer.
_MOST_WANTED = 60


class NotForSearchError(Exception):
    """The terms ask for something that the search cannot keep; the exact model can."""


class FleetArrays(NamedTuple):
    """Arrays for compiled code, which may not change them.

    A named tuple, because compiled code can take one apart.

    Per spacecraft (n): ``first`` (n + 1) into the options, ``start_first`` (n + 1) into ``start_s``, and the
    rows of ``craft``: weight, generation, capacity, start fill. Per option (m): ``node`` and ``arrival``, the
    index within the spacecraft's distinct starts at which it starts, and of the first start at or after its
    end; ``span``: start and end in s; ``maps``: the storage maps as rows; ``cost`` in worth; ``bits`` of
    wanted terms it meets; ``renews``: until when it covers the recurrence, or -1. ``use_first`` and ``use_last``
    (m, k) are ranges of cliques, k lanes at most each. ``clash`` (m) is the last start of a later option of the
    same spacecraft that shares a clique with this one (time to set up between two contacts on one antenna), or -1.
    ``wants`` (n, 60) are the points of each bit, ``recur``
    (n, 3) from, until and points per second of the recurrence (until 0 where there is none).
    """

    option: Integers
    first: Integers
    craft: Floats
    start_first: Integers
    start_s: Integers
    node: Integers
    arrival: Integers
    span: Integers
    maps: Floats
    cost: Floats
    bits: Integers
    renews: Integers
    use_first: Integers
    use_last: Integers
    clash: Integers
    wants: Floats
    recur: Floats
    horizon_s: int
    spill: float
    cliques: int


def fleet_arrays(problem: Problem, terms: Terms, maps: StorageMaps) -> FleetArrays:
    """Lay a problem out. Raises :class:`NotForSearchError` where a term does not fit this layout."""
    options, fleet = problem.options, problem.fleet
    if any(len(rows) for rows in terms.rows):
        raise NotForSearchError("the search does not keep linear limits yet")
    if fleet.streams:
        raise NotForSearchError("the search does not keep classes of data and changing rates yet")
    if terms.guarantees:
        raise NotForSearchError("the search does not keep guarantees yet")
    order = np.lexsort((options.end_s, options.start_s, options.spacecraft))
    removed = np.zeros(len(options), dtype=bool)
    for removal in terms.removals:
        removed[removal.options] = True
    order = order[~removed[order]]
    place = np.full(len(options), -1, dtype=np.int64)
    place[order] = np.arange(len(order))
    craft_of = options.spacecraft[order]
    first = np.searchsorted(craft_of, np.arange(len(fleet) + 1)).astype(np.int64)
    starts, node, arrival = [], np.zeros(len(order), dtype=np.int64), np.zeros(len(order), dtype=np.int64)
    for k in range(len(fleet)):
        mine = slice(first[k], first[k + 1])
        distinct = np.unique(options.start_s[order[mine]])
        node[mine] = np.searchsorted(distinct, options.start_s[order[mine]])
        arrival[mine] = np.searchsorted(distinct, options.end_s[order[mine]])
        starts.append(distinct)
    use_first, use_last, cliques = _uses(problem, terms, place, len(order))
    bits, wants = _wanted(problem, terms, place, len(order))
    renews, recur = _recurrences(problem, terms, place, len(order))
    return FleetArrays(
        option=order, first=first,
        craft=np.column_stack([fleet.weight, fleet.generation_mb_per_s, fleet.capacity_mb, fleet.start_fill_mb]),
        start_first=offsets_of(np.array([len(s) for s in starts], dtype=np.int64)),
        start_s=np.concatenate([*starts, np.zeros(0, dtype=np.int64)]), node=node, arrival=arrival,
        span=np.column_stack([options.start_s[order], options.end_s[order]]),
        maps=np.column_stack([maps.shift_mb, maps.low_mb, maps.high_mb, maps.lost_at_empty_mb, maps.brim_mb,
                              maps.generated_mb])[order],
        cost=problem.price[order], bits=bits, renews=renews, use_first=use_first,
        use_last=use_last, clash=_clashes(problem, terms, order, first, use_first, use_last), wants=wants, recur=recur,
        horizon_s=problem.horizon_s, spill=problem.spill_cost_per_mb, cliques=cliques)


def _uses(problem: Problem, terms: Terms, place: Integers, count: int) -> tuple[Integers, Integers, int]:
    options = problem.options
    entries: list[tuple[Integers, Integers, Integers]] = []
    base = 0
    for lane in terms.lanes:
        kept = place[lane.options] >= 0
        mine, start_s, end_s = lane.options[kept], lane.start_s[kept], lane.end_s[kept]
        if lane.owner >= 0:
            if np.any(start_s != options.start_s[mine]) or np.any(end_s != options.end_s[mine]):
                raise NotForSearchError(f"the lane {lane.name} holds more than the contacts themselves")
            continue
        lows, highs, cliques = clique_spans(start_s, end_s)
        entries.append((place[mine], lows + base, highs + base))
        base += cliques
    where = np.concatenate([np.zeros(0, dtype=np.int64), *(e[0] for e in entries)])
    rank = np.zeros(len(where), dtype=np.int64)
    seen = np.zeros(count, dtype=np.int64)
    for k, o in enumerate(where.tolist()):
        rank[k] = seen[o]
        seen[o] += 1
    width = int(seen.max()) if count else 0
    use_first = np.zeros((count, max(1, width)), dtype=np.int64)
    use_last = np.zeros((count, max(1, width)), dtype=np.int64)
    if entries:
        use_first[where, rank] = np.concatenate([e[1] for e in entries])
        use_last[where, rank] = np.concatenate([e[2] for e in entries])
    return use_first, use_last, base


def _clashes(
    problem: Problem, terms: Terms, order: Integers, first: Integers, use_first: Integers, use_last: Integers,
) -> Integers:
    """The column ``clash``. Only starts within the longest hold after an option's end need a look."""
    options = problem.options
    before_s = after_s = 0
    for lane in terms.lanes:
        if lane.owner < 0 and len(lane.options):
            before_s = max(before_s, int((options.start_s[lane.options] - lane.start_s).max()))
            after_s = max(after_s, int((lane.end_s - options.end_s[lane.options]).max()))
    clash = np.full(len(order), -1, dtype=np.int64)
    find_clashes(first, options.start_s[order], options.end_s[order], use_first, use_last, before_s + after_s, clash)
    return clash


@compiled
def find_clashes(
    first: Integers, start_s: Integers, end_s: Integers, use_first: Integers, use_last: Integers, within_s: int,
    clash: Integers,
) -> None:
    """Fill ``clash``; ``within_s`` is the longest time that two contacts on one lane can need between them."""
    for i in range(len(first) - 1):
        for o in range(first[i], first[i + 1]):
            low = o + np.searchsorted(start_s[o:first[i + 1]], end_s[o])
            for p in range(low, first[i + 1]):
                if start_s[p] >= end_s[o] + within_s:
                    break
                if share_clique(use_first, use_last, o, p):
                    clash[o] = start_s[p]


@compiled
def share_clique(use_first: Integers, use_last: Integers, o: int, p: int) -> bool:
    """Whether two options share a clique, so that not both can be used."""
    for x in range(use_first.shape[1]):
        for y in range(use_first.shape[1]):
            if max(use_first[o, x], use_first[p, y]) < min(use_last[o, x], use_last[p, y]):
                return True
    return False


def _wanted(problem: Problem, terms: Terms, place: Integers, count: int) -> tuple[Integers, Floats]:
    bits, points = np.zeros(count, dtype=np.int64), np.zeros((len(problem.fleet), _MOST_WANTED))
    used = np.zeros(len(problem.fleet), dtype=np.int64)
    for want in terms.wanted:
        rows = place[want.options]
        rows = rows[rows >= 0]
        if len(rows) == 0:
            continue
        craft = np.unique(problem.options.spacecraft[want.options])
        if len(craft) != 1 or used[craft[0]] >= _MOST_WANTED:
            raise NotForSearchError(f"{want.name} is wanted of several spacecraft, or one has too many")
        bits[rows] |= np.int64(1) << used[craft[0]]
        points[craft[0], used[craft[0]]] = want.points
        used[craft[0]] += 1
    return bits, points


def _recurrences(problem: Problem, terms: Terms, place: Integers, count: int) -> tuple[Integers, Floats]:
    renews, recur = np.full(count, -1, dtype=np.int64), np.zeros((len(problem.fleet), 3))
    for need in terms.recurrences:
        craft = problem.fleet.names.index(need.name)
        if recur[craft, 1] > 0.0 or np.any(need.start_s != problem.options.start_s[need.options]):
            raise NotForSearchError(f"{need.name} has more than one recurrence, or one that is not counted from starts")
        kept = place[need.options] >= 0
        renews[place[need.options[kept]]] = need.end_s[kept] + need.every_s
        recur[craft] = need.from_s, need.until_s, 1.0 / need.every_s
    return renews, recur
