"""A problem and its terms laid out for compiled code: options grouped by spacecraft, lanes as cliques, rows as loads.

Options are sorted by (spacecraft, start); all arrays here are in that order, and ``option`` maps back.
Lanes for which spacecraft compete become one line of cliques, all lanes end to end. Two options of a lane
overlap exactly if they share a clique, so "free" is "all my cliques are free", and a price of an option is
a difference of a running sum over the prices of cliques.

A lane of a single spacecraft in which every one of its contacts has a place is kept by the order of its contacts
alone (``arrival``); any other lane of one spacecraft is laid out as if it were shared.

What a schedule alone cannot tell (a request that several spacecraft could meet, a guarantee) is a due, see
``dues.py``. A second recurrence of a spacecraft is left out of the bound, which stays valid without it; ``uncounted``
marks the options concerned, so that the search leaves a spacecraft alone that uses one.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from typing import NamedTuple

import numpy as np

from passplan.planning.arrays import Flags, Floats, Integers, offsets_of
from passplan.planning.cliques import clique_spans
from passplan.planning.maps import StorageMaps
from passplan.planning.problem import Problem
from passplan.planning.rules.terms import Lane, Terms
from passplan.planning.search.clash import find_clashes
from passplan.planning.search.dues import Dues, dues_of
from passplan.planning.search.layerarrays import ClassArrays, LayerArrays, class_arrays, layer_arrays
from passplan.planning.search.needarrays import recurrences, wanted
from passplan.planning.search.rowarrays import loads, own_loads

# Columns of ``craft``, ``layers.layer`` and ``classes.one`` that are worths.
_CRAFT_WORTHS, _LAYER_WORTHS, _CLASS_WORTHS = (0, 4), (0, 1, 2), (0, 4)
_NEVER_S = np.iinfo(np.int64).max
# Amounts are sums of decimals; a limit reached to within this part of it is kept (the judge allows ten times more).
ROUNDING = 1e-10


class FleetArrays(NamedTuple):
    """Arrays for compiled code, which may not change them.

    A named tuple, because compiled code can take one apart.

    Per spacecraft (n): ``first`` (n + 1) into the options, ``start_first`` (n + 1) into ``start_s``, and the
    rows of ``craft``: weight, generation, capacity, start fill, worth of a MB left at the end. Per option (m):
    ``node`` and ``arrival``, the index within the spacecraft's distinct starts at which it starts, and of the first
    start at which another contact may follow it; ``span``: start and end in s; ``maps``: the storage maps as rows;
    ``cost`` in worth; ``bits`` of wanted terms it meets; ``renews``: until when it covers the recurrence, or -1;
    ``uncounted``: whether it serves a requirement that is not among those.

    Option o holds the ranges of cliques ``use_first[u] : use_last[u]`` for u in ``use_at[o] : use_at[o + 1]``.
    ``clash`` (m) is the last start of a later option of the same spacecraft that shares a clique with this one (time
    to set up between two contacts on one antenna), or -1. It adds ``load_amount[e]`` to row ``load_row[e]`` for e in
    ``load_at[o] : load_at[o + 1]``, rows rising; ``load_own[e]`` says whether another contact of the same plan of its
    spacecraft may add to that row too. ``limit`` is per row.

    ``wants`` (n, 60) are the points of each bit, ``wants_until`` the last start [s] that meets it; ``recur`` (n, 3)
    from, until and points per second of the recurrence (until 0 where there is none). ``clique_lane`` and ``clique_s``
    say of each clique which of the terms' lanes it is of, and at which instant all its options hold it. No spacecraft
    can have more than ``most_contacts``. ``dues`` are requirements that several contacts meet together, ``layers`` and
    ``classes`` those of spacecraft with classes of data, see ``dues.py`` and ``layerarrays.py``.
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
    uncounted: Flags
    use_at: Integers
    use_first: Integers
    use_last: Integers
    clash: Integers
    load_at: Integers
    load_row: Integers
    load_amount: Floats
    load_own: Flags
    limit: Floats
    wants: Floats
    wants_until: Integers
    recur: Floats
    horizon_s: int
    spill: float
    cliques: int
    clique_lane: Integers
    clique_s: Integers
    most_contacts: int
    dues: Dues
    layers: LayerArrays
    classes: ClassArrays


def fleet_arrays(problem: Problem, terms: Terms, maps: StorageMaps) -> FleetArrays:
    """Lay a problem out."""
    options, fleet = problem.options, problem.fleet
    order = np.lexsort((options.end_s, options.start_s, options.spacecraft))
    removed = np.zeros(len(options), dtype=bool)
    for removal in terms.removals:
        removed[removal.options] = True
    order = order[~removed[order]]
    place = np.full(len(options), -1, dtype=np.int64)
    place[order] = np.arange(len(order))
    first = np.searchsorted(options.spacecraft[order], np.arange(len(fleet) + 1)).astype(np.int64)
    start_s, end_s = options.start_s[order], options.end_s[order]
    own, shared = _own_and_shared(problem, terms, place, first)
    ready_s = _ready(own, place, start_s, end_s)
    starts, node, arrival = [], np.zeros(len(order), dtype=np.int64), np.zeros(len(order), dtype=np.int64)
    for k in range(len(fleet)):
        mine = slice(first[k], first[k + 1])
        distinct = np.unique(start_s[mine])
        node[mine] = np.searchsorted(distinct, start_s[mine])
        arrival[mine] = np.searchsorted(distinct, ready_s[mine])
        starts.append(distinct)
    use_at, use_first, use_last, clique_lane, clique_s = _uses(shared, place, len(order))
    bits, wants, wants_until, shared_wants = wanted(problem, terms, place, len(order))
    renews, recur, uncounted = recurrences(problem, terms, place, len(order))
    load_at, load_row, load_amount, limit = loads(terms, place, len(order))
    craft_of = np.repeat(np.arange(len(fleet)), np.diff(first))
    clash = np.full(len(order), -1, dtype=np.int64)
    find_clashes(first, start_s, end_s, use_at, use_first, use_last, _longest_hold(problem, shared.values()), clash)
    return FleetArrays(
        option=order, first=first,
        craft=np.column_stack([fleet.weight, fleet.generation_mb_per_s, fleet.capacity_mb, fleet.start_fill_mb,
                               problem.left_worth_share * fleet.weight]),
        start_first=offsets_of(np.array([len(s) for s in starts], dtype=np.int64)),
        start_s=np.concatenate([*starts, np.zeros(0, dtype=np.int64)]), node=node, arrival=arrival,
        span=np.column_stack([start_s, end_s]),
        maps=np.column_stack([maps.shift_mb, maps.low_mb, maps.high_mb, maps.lost_at_empty_mb, maps.brim_mb,
                              maps.generated_mb])[maps.first_row[order]],
        cost=problem.price[order], bits=bits, renews=renews, uncounted=uncounted,
        use_at=use_at, use_first=use_first, use_last=use_last, clash=clash, load_at=load_at, load_row=load_row,
        load_amount=load_amount, load_own=own_loads(craft_of, node, arrival, load_at, load_row), limit=limit,
        wants=wants, wants_until=wants_until, recur=recur, horizon_s=problem.horizon_s,
        spill=problem.spill_cost_per_mb, cliques=len(clique_s), clique_lane=clique_lane, clique_s=clique_s,
        most_contacts=_longest_chain(first, node, arrival),
        dues=dues_of(terms.guarantees, [(k, terms.wanted[k]) for k in shared_wants], place, len(order)),
        layers=layer_arrays(problem, maps, order, first, starts, arrival), classes=class_arrays(problem, order))


def blended(parts: Sequence[tuple[FleetArrays, float]]) -> FleetArrays:
    """The arrays of the weighted sum of objectives over the same options, as ``tiers.staged`` has it.

    All that an objective says of its own is worths: all of them are linear in its weights and its spill cost.
    """
    first = parts[0][0]

    def total(columns: tuple[int, ...], of: Callable[[FleetArrays], Floats]) -> Floats:
        whole = of(first).copy()
        for column in columns:
            whole[:, column] = sum(share * of(part)[:, column] for part, share in parts)
        return whole

    return first._replace(
        craft=total(_CRAFT_WORTHS, lambda a: a.craft), cost=np.asarray(sum(share * part.cost for part, share in parts)),
        spill=float(sum(share * part.spill for part, share in parts)),
        layers=first.layers._replace(layer=total(_LAYER_WORTHS, lambda a: a.layers.layer)),
        classes=first.classes._replace(one=total(_CLASS_WORTHS, lambda a: a.classes.one)))


def at_their_word(arrays: FleetArrays) -> FleetArrays:
    """The arrays with classes of data worth what their layers say, as the schedule program counts them."""
    return arrays._replace(classes=arrays.classes._replace(loose=np.zeros_like(arrays.classes.loose)))


def _own_and_shared(
    problem: Problem, terms: Terms, place: Integers, first: Integers,
) -> tuple[list[Lane], dict[int, Lane]]:
    """Lanes that the order of a spacecraft's contacts keeps, and those laid out as cliques, by number."""
    own, shared = [], {}
    for k, lane in enumerate(terms.lanes):
        mine = lane.options[place[lane.options] >= 0]
        whole = lane.owner >= 0 and len(mine) == first[lane.owner + 1] - first[lane.owner]
        if whole and len(mine) and np.all(problem.options.spacecraft[mine] == lane.owner):
            whole = _in_step(problem.options.start_s[lane.options], lane.start_s)
        if whole:
            own.append(lane)
        else:
            shared[k] = lane
    return own, shared


def _in_step(start_s: Integers, held_from_s: Integers) -> bool:
    """Whether of two contacts the one that starts later never holds the lane from earlier on."""
    order = np.lexsort((held_from_s, start_s))
    held_s, same = held_from_s[order], np.diff(start_s[order]) == 0
    return bool(np.all(np.diff(held_s) >= 0) and np.all(np.diff(held_s)[same] == 0))


def _ready(own: list[Lane], place: Integers, start_s: Integers, end_s: Integers) -> Integers:
    """From when another contact of the spacecraft may start after each option: the latest of its own lanes."""
    ready_s = end_s.copy()
    for lane in own:
        kept = place[lane.options] >= 0
        mine = place[lane.options[kept]]
        order = np.argsort(start_s[mine], kind="stable")
        # The first start that holds the lane from its end on; after the last one there is none.
        later = np.searchsorted(lane.start_s[kept][order], lane.end_s[kept])
        ready_s[mine] = np.maximum(ready_s[mine], np.append(start_s[mine][order], _NEVER_S)[later])
    return ready_s


def _uses(
    shared: dict[int, Lane], place: Integers, count: int,
) -> tuple[Integers, Integers, Integers, Integers, Integers]:
    """Ranges of cliques by option, and for each clique its lane's index in the terms and its instant."""
    entries = [(np.zeros(0, dtype=np.int64),) * 3]
    of_clique = [(np.zeros(0, dtype=np.int64),) * 2]
    base = 0
    for k, lane in shared.items():
        kept = place[lane.options] >= 0
        lows, highs, cliques = clique_spans(lane.start_s[kept], lane.end_s[kept])
        entries.append((place[lane.options[kept]], lows + base, highs + base))
        # A clique's instant is the last start among those that begin with it.
        instant_s = np.full(cliques, np.iinfo(np.int64).min)
        np.maximum.at(instant_s, lows, lane.start_s[kept])
        of_clique.append((np.full(cliques, k), instant_s))
        base += cliques
    where, lows, highs = (np.concatenate(parts) for parts in zip(*entries, strict=True))
    lanes, instants = (np.concatenate(parts) for parts in zip(*of_clique, strict=True))
    order = np.argsort(where, kind="stable")
    return offsets_of(np.bincount(where, minlength=count)), lows[order], highs[order], lanes, instants


def _longest_hold(problem: Problem, shared: Iterable[Lane]) -> int:
    """The longest time [s] that two contacts of one shared lane can need between them."""
    options = problem.options
    before_s = after_s = 0
    for lane in shared:
        if len(lane.options):
            before_s = max(before_s, int((options.start_s[lane.options] - lane.start_s).max()))
            after_s = max(after_s, int((lane.end_s - options.end_s[lane.options]).max()))
    return before_s + after_s


def _longest_chain(first: Integers, node: Integers, arrival: Integers) -> int:
    """The most contacts that one after the other can follow in any spacecraft's plan; at least 1."""
    longest = 1
    for low, high in zip(first[:-1].tolist(), first[1:].tolist(), strict=True):
        if high == low:
            continue
        # From each start on, the soonest arrival; always taking it makes the longest chain.
        soonest = np.full(int(node[high - 1]) + 2, int(node[high - 1]) + 2, dtype=np.int64)
        np.minimum.at(soonest, node[low:high], arrival[low:high])
        soonest = np.minimum.accumulate(soonest[::-1])[::-1]
        reach, at, length = soonest.tolist(), 0, 0
        while at < len(reach) - 1 and reach[at] <= len(reach) - 1:
            at, length = reach[at], length + 1
        longest = max(longest, length)
    return longest


def load_plan(arrays: FleetArrays, chosen: Sequence[int]) -> tuple[Integers, Integers]:
    """A plan (options by number) as the options of each spacecraft in time order (n, k), and how many (n,)."""
    taken = np.zeros((len(arrays.craft), arrays.most_contacts), dtype=np.int64)
    size = np.zeros(len(arrays.craft), dtype=np.int64)
    place = np.zeros(int(arrays.option.max(initial=-1)) + 1, dtype=np.int64)
    place[arrays.option] = np.arange(len(arrays.option))
    rows = np.sort(place[np.array(chosen, dtype=np.int64)])
    crafts = np.searchsorted(arrays.first, rows, side="right") - 1
    for craft, row in zip(crafts.tolist(), rows.tolist(), strict=True):
        taken[craft, size[craft]] = row
        size[craft] += 1
    return taken, size


def unload_plan(arrays: FleetArrays, taken: Integers, size: Integers) -> list[int]:
    """The numbers of a plan's options, sorted."""
    held = np.arange(taken.shape[1]) < size[:, None]
    numbers: list[int] = np.sort(arrays.option[taken[held]]).tolist()
    return numbers
