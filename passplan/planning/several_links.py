"""The search beside spacecraft with several links, whose contacts it cannot put in an order.

Such a spacecraft keeps the contacts that it has. The others are searched around them: what does not fit goes, limits
are lower by what is taken, and guarantees count what is given. The bound does without those spacecraft: they take
nothing, and are worth the most that they could ever be. (Own derivation; dropping contacts that only take up lanes and
limits can but raise the bound of what is left.)
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from passplan.planning.arrays import Flags, Floats
from passplan.planning.clock import Clock
from passplan.planning.maps import StorageMaps, storage_maps, worth_of
from passplan.planning.occupancy import Occupancy
from passplan.planning.parts import Part, part_of
from passplan.planning.problem import Limits, Problem
from passplan.planning.rules.terms import AtLeast, Rows, Terms, Wanted
from passplan.planning.search.engine import Found, Staying, search_plan
from passplan.planning.search.fleetarrays import FleetArrays, fleet_arrays


def arrays_of(problem: Problem, terms: Terms, maps: StorageMaps) -> FleetArrays | None:
    """What the search wants of a problem; None where a spacecraft has several links."""
    return None if np.any(problem.fleet.links > 1) else fleet_arrays(problem, terms, maps)


def search_all(
    problem: Problem, terms: Terms, arrays: FleetArrays | None, limits: Limits, clock: Clock, chosen: Sequence[int],
    points: float, tell: Callable[[float, float], None],
) -> Found:
    """Improve the plan ``chosen`` of ``points`` of shortfall and bound it, both without the problem's ``base_worth``.

    ``arrays`` are those of :func:`arrays_of`. Without a proof where they are None.
    """
    if arrays is None:
        return _search_around(problem, terms, limits, clock, chosen, points, tell)
    if not len(arrays.option):
        return Found(tuple(chosen), np.inf, None, 0, 0)
    return search_plan(arrays, terms, limits, clock, chosen, points, tell)


def _search_around(
    problem: Problem, terms: Terms, limits: Limits, clock: Clock, chosen: Sequence[int], points: float,
    tell: Callable[[float, float], None],
) -> Found:
    view, others = around(problem, terms, chosen), most_of_others(problem)
    arrays = view.arrays(problem)
    if not len(arrays.option):
        return Found(tuple(chosen), view.part.problem.ceiling - problem.base_worth + others, None, 0, 0)
    maps, starts = storage_maps(problem), problem.options.start_s
    in_order = sorted(view.fixed, key=lambda o: int(starts[o]))
    kept_worth = sum(worth_of(problem, maps, k, [o for o in in_order if problem.options.spacecraft[o] == k])
                     for k in np.flatnonzero(problem.fleet.links > 1).tolist())
    found = search_plan(
        arrays, view.part.terms, replace(limits, gap=0.0), clock, view.within(chosen), points,
        lambda value, above: tell(value + kept_worth, above + others), staying=view.staying(arrays))
    return Found(view.whole(found.chosen), found.bound + others, None, found.rounds, found.left_alone)


@dataclass(frozen=True, eq=False)
class Around:
    """The spacecraft with one link, around the contacts ``fixed`` of the others, by their numbers in the whole.

    These use ``used`` (r,) of the rows of the part's terms and give the parts ``given`` (g,) of what is due to its
    guarantees; ``shared`` (g,) says which of them such spacecraft could serve.
    """

    part: Part
    fixed: tuple[int, ...]
    used: Floats
    given: Floats
    shared: Flags

    def arrays(self, problem: Problem) -> FleetArrays:
        """What the search wants of an objective over the part."""
        mine = part_of(problem, Terms(), problem.fleet.links == 1, first=True).problem
        return fleet_arrays(mine, self.part.terms, self.maps)

    @cached_property
    def maps(self) -> StorageMaps:
        """The storage maps of the part's options."""
        return storage_maps(self.part.problem)

    def staying(self, arrays: FleetArrays) -> Staying:
        """What the search must know of the contacts that stay."""
        given, shared = np.zeros(len(arrays.dues.points)), np.zeros(len(arrays.dues.points), dtype=bool)
        given[: len(self.given)], shared[: len(self.shared)] = self.given, self.shared
        return Staying(self.used, given, shared)

    def within(self, chosen: Iterable[int]) -> list[int]:
        """The chosen options that the part has, by its own numbers."""
        return np.flatnonzero(np.isin(self.part.options, list(chosen))).tolist()

    def whole(self, chosen: Iterable[int]) -> tuple[int, ...]:
        """A plan of the part together with what stays."""
        return tuple(sorted([*self.fixed, *self.part.options[list(chosen)].tolist()]))


def around(problem: Problem, terms: Terms, chosen: Iterable[int]) -> Around:
    """The spacecraft with one link around those contacts of the plan ``chosen`` that are of others.

    Contacts that these stand in the way of are in a row of which they use all. Requested contacts that others could
    meet are left out.
    """
    single = problem.fleet.links[problem.options.spacecraft] == 1
    fixed = tuple(int(o) for o in chosen if not single[o])
    occupancy = Occupancy(terms, len(problem.options))
    for o in fixed:
        occupancy.add(o)
    stuck = [o for o in np.flatnonzero(single).tolist() if not occupancy.fits(o)]
    in_the_way = Rows(
        "spacecraft_busy", ("beside what stays",), np.array([0, len(stuck)]), np.array(stuck, dtype=np.int64),
        np.ones(len(stuck)), np.array([float(len(stuck))]))
    held = np.zeros(len(single), dtype=bool)
    held[list(fixed)] = True
    extra = (in_the_way,) if stuck else ()
    kept = replace(_of_single(problem, terms), rows=(*terms.rows, *extra), guarantees=terms.guarantees)
    part = part_of(problem, kept, problem.fleet.links == 1, first=True)
    promises = [p for p in terms.guarantees if np.any(single[p.options]) or not len(p.options)]
    return Around(
        part, fixed,
        np.concatenate([np.zeros(0), *(_used(one, held, single) for one in terms.rows), *(one.limit for one in extra)]),
        np.array([float(p.amounts @ held[p.options]) / p.need for p in promises], dtype=float),
        np.array([not np.all(single[p.options]) for p in promises], dtype=bool))


def _used(rows: Rows, held: Flags, single: Flags) -> Floats:
    """What is used of each row in which a part with the options ``single`` has a place."""
    row = np.repeat(np.arange(len(rows)), np.diff(rows.offset))
    load = np.bincount(row, weights=rows.amounts * held[rows.options], minlength=len(rows))
    return np.asarray(np.minimum(load, rows.limit)[np.unique(row[single[rows.options]])])


def most_of_others(problem: Problem) -> float:
    """The most that spacecraft with several links can come to."""
    return part_of(problem, Terms(), problem.fleet.links > 1, first=False).problem.ceiling


def without(problem: Problem, terms: Terms) -> Part:
    """The spacecraft with one link, as if the others took nothing; requirements that those could meet are dropped."""
    return part_of(problem, _of_single(problem, terms), problem.fleet.links == 1, first=True)


def _of_single(problem: Problem, terms: Terms) -> Terms:
    """Terms without requirements that spacecraft with several links could meet."""
    several = problem.fleet.links > 1

    def own(demand: Wanted | AtLeast) -> bool:
        return not np.any(several[problem.options.spacecraft[demand.options]])

    return replace(
        terms, wanted=tuple(filter(own, terms.wanted)), guarantees=tuple(filter(own, terms.guarantees)),
        recurrences=tuple(r for r in terms.recurrences if not several[problem.fleet.names.index(r.name)]))
