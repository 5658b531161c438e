"""The search beside spacecraft with several links, whose contacts it cannot put in an order.

Such a spacecraft keeps the contacts that it has. The others are searched beside them: what does not fit goes, limits
are lower by what is taken, and requirements that are met are met. The bound does without those spacecraft: they take
nothing, and are worth the most that they could ever be. (Own derivation; dropping contacts that only take up lanes and
limits can but raise the bound of what is left.)
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import replace

import numpy as np

from passplan.planning.arrays import Flags
from passplan.planning.clock import Clock
from passplan.planning.maps import StorageMaps, storage_maps, worth_of
from passplan.planning.occupancy import Occupancy
from passplan.planning.parts import Part, part_of
from passplan.planning.problem import Limits, Problem
from passplan.planning.rules.terms import AtLeast, Removal, Rows, Terms, Wanted
from passplan.planning.search.bound import Hold, lowest_ceiling
from passplan.planning.search.engine import Found, search_plan
from passplan.planning.search.fleetarrays import FleetArrays, fleet_arrays, load_plan
from passplan.planning.search.schedule import total_worth
from passplan.planning.shortfalls import find_shortfalls, total_points

# The bound's share of the time.
_FOR_BOUND = 0.3


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
        return _search_beside(problem, terms, limits, clock, chosen, points, tell)
    if not len(arrays.option):
        return Found(tuple(chosen), np.inf, None, 0, 0)
    return search_plan(arrays, terms, limits, clock, chosen, points, tell)


def _search_beside(
    problem: Problem, terms: Terms, limits: Limits, clock: Clock, chosen: Sequence[int], points: float,
    tell: Callable[[float, float], None],
) -> Found:
    fixed = _of(problem, chosen, problem.fleet.links > 1)
    maps, options = storage_maps(problem), problem.options
    in_order = sorted(fixed, key=lambda o: int(options.start_s[o]))
    kept_worth = sum(worth_of(problem, maps, k, [o for o in in_order if options.spacecraft[o] == k])
                     for k in np.flatnonzero(problem.fleet.links > 1).tolist())
    bound = ceiling_without(
        problem, terms, limits, clock.part(_FOR_BOUND * clock.left_s()), chosen, points,
        lambda value, above: tell(value + kept_worth, above))
    together = plan_beside(
        problem, terms, limits, clock, chosen, lambda value, _: tell(value + kept_worth, bound))
    return Found(tuple(together), bound, None, 0, 0)


def plan_beside(
    problem: Problem, terms: Terms, limits: Limits, clock: Clock, chosen: Sequence[int],
    tell: Callable[[float, float], None], held: Sequence[tuple[Problem, float]] = (),
) -> list[int]:
    """The plan ``chosen`` improved, but for the contacts of spacecraft with several links.

    ``held`` are other objectives that are not to be worse than now, each with a guess of what it is worth.
    """
    fixed = _of(problem, chosen, problem.fleet.links > 1)
    part = beside(problem, terms, fixed)
    maps = storage_maps(part.problem)
    arrays = fleet_arrays(part.problem, part.terms, maps)
    if not len(arrays.option):
        return list(chosen)
    mine = _within(part, chosen)
    taken, size = load_plan(arrays, mine)
    holds = []
    for other, guess in held:
        theirs = fleet_arrays(_same_part(other), part.terms, maps)
        holds.append((Hold(theirs, total_worth(theirs, taken, size)), guess))
    found = search_plan(
        arrays, part.terms, limits, clock, mine, total_points(find_shortfalls(part.terms, mine)), tell, holds=holds)
    return sorted([*fixed, *part.options[list(found.chosen)].tolist()])


def ceiling_without(
    problem: Problem, terms: Terms, limits: Limits, clock: Clock, chosen: Sequence[int], points: float,
    tell: Callable[[float, float], None], held: Sequence[tuple[Problem, float, float]] = (),
) -> float:
    """A bound of plans with ``points`` of shortfall at most, without the problem's ``base_worth``.

    ``held`` are other objectives, the least that each is to come to with its ``base_worth``, and a guess of what it is
    worth.
    """
    part, others = without(problem, terms), _most_of_others(problem)
    maps = storage_maps(part.problem)
    arrays = fleet_arrays(part.problem, part.terms, maps)
    if not len(arrays.option):
        return part.problem.ceiling - part.problem.base_worth + others
    taken, size = load_plan(arrays, _within(part, chosen))
    holds = [(Hold(fleet_arrays(_same_part(other), part.terms, maps),
                   least - other.base_worth - _most_of_others(other)), guess) for other, least, guess in held]
    return others + lowest_ceiling(
        arrays, taken, size, points, limits.threads, clock, lambda value, above: tell(value, above + others), holds)


def _most_of_others(problem: Problem) -> float:
    """The most that spacecraft with several links can come to."""
    return part_of(problem, Terms(), problem.fleet.links > 1, first=False).problem.ceiling


def _same_part(problem: Problem) -> Problem:
    """An objective over the options of spacecraft with one link."""
    return part_of(problem, Terms(), problem.fleet.links == 1, first=True).problem


def without(problem: Problem, terms: Terms) -> Part:
    """The spacecraft with one link, as if the others took nothing; requirements that those could meet are dropped."""
    several = problem.fleet.links > 1

    def own(demand: Wanted | AtLeast) -> bool:
        return not np.any(several[problem.options.spacecraft[demand.options]])

    kept = replace(
        terms, wanted=tuple(filter(own, terms.wanted)), guarantees=tuple(filter(own, terms.guarantees)),
        recurrences=tuple(r for r in terms.recurrences if not several[problem.fleet.names.index(r.name)]))
    return part_of(problem, kept, ~several, first=True)


def beside(problem: Problem, terms: Terms, fixed: Iterable[int]) -> Part:
    """The spacecraft with one link beside the contacts ``fixed`` of the others."""
    several, taken = problem.fleet.links > 1, list(fixed)
    occupancy = Occupancy(terms, len(problem.options))
    for o in taken:
        occupancy.add(o)
    single = np.flatnonzero(~several[problem.options.spacecraft]).tolist()
    stuck = np.array([o for o in single if not occupancy.fits(o)], dtype=np.int64)
    used = np.zeros(len(problem.options), dtype=bool)
    used[taken] = True
    guarantees = [_less(promise, used) for promise in terms.guarantees]
    kept = replace(
        terms, removals=(*terms.removals, Removal(stuck, "spacecraft_busy", "taken")),
        rows=tuple(_lower(rows, used) for rows in terms.rows),
        wanted=tuple(want for want in terms.wanted if not np.any(used[want.options])),
        recurrences=tuple(r for r in terms.recurrences if not several[problem.fleet.names.index(r.name)]),
        guarantees=tuple(promise for promise in guarantees if promise is not None))
    return part_of(problem, kept, ~several, first=True)


def _lower(rows: Rows, used: Flags) -> Rows:
    row = np.repeat(np.arange(len(rows)), np.diff(rows.offset))
    load = np.bincount(row, weights=rows.amounts * used[rows.options], minlength=len(rows))
    return replace(rows, limit=np.maximum(rows.limit - load, 0.0))


def _less(promise: AtLeast, used: Flags) -> AtLeast | None:
    """What is left of a guarantee, at the same points for the same amount."""
    left = promise.need - float(promise.amounts @ used[promise.options])
    return None if left <= 0.0 else replace(promise, need=left, points=promise.points * left / promise.need)


def _of(problem: Problem, chosen: Iterable[int], crafts: Flags) -> list[int]:
    return [int(o) for o in chosen if crafts[problem.options.spacecraft[o]]]


def _within(part: Part, chosen: Iterable[int]) -> list[int]:
    """The chosen options that a part has, by its own numbers."""
    return np.flatnonzero(np.isin(part.options, list(chosen))).tolist()
