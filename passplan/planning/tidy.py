"""The last touch on a plan: what earns nothing goes, what still fits and earns something comes in.

A solver that stops within its gap may keep contacts that bring nothing down and leave out small ones that
would; both look wrong to the people who fly the plan.
"""

from __future__ import annotations

from collections.abc import Iterable

from passplan.planning.clock import Clock
from passplan.planning.greedy import plan_greedily
from passplan.planning.maps import StorageMaps, worth_of
from passplan.planning.problem import Problem
from passplan.planning.rules.terms import Terms
from passplan.planning.search.fleetarrays import FleetArrays
from passplan.planning.shortfalls import find_shortfalls, total_points

# Seconds that the touch may take; the search's own time limit is over by then.
_LIMIT_S = 2.0


def tidy(
    problem: Problem, terms: Terms, maps: StorageMaps, chosen: Iterable[int], arrays: FleetArrays | None = None,
) -> list[int]:
    """The plan without contacts that add nothing, and with those that fit and do. Never worth less.

    In a large plan time may be up before every contact has been looked at.
    """
    clock = Clock(_LIMIT_S)
    kept = plan_greedily(problem, terms, clock, maps=maps, begin=chosen, arrays=arrays)
    points = total_points(find_shortfalls(terms, kept))
    options = problem.options
    of_craft: dict[int, list[int]] = {}
    for o in sorted(kept, key=lambda o: int(options.start_s[o])):
        of_craft.setdefault(int(options.spacecraft[o]), []).append(o)
    worth: dict[int, float] = {}
    # Shortest first: of two contacts of which either could go, the longer one is the better to keep.
    for o in sorted(kept, key=lambda o: (int(options.end_s[o] - options.start_s[o]), o)):
        if clock.expired():
            break
        craft = int(options.spacecraft[o])
        if craft not in worth:
            worth[craft] = worth_of(problem, maps, craft, of_craft[craft])
        others = [x for x in of_craft[craft] if x != o]
        without_it = worth_of(problem, maps, craft, others)
        if worth[craft] > without_it:
            continue
        without = [x for x in kept if x != o]
        if total_points(find_shortfalls(terms, without)) <= points:
            kept, of_craft[craft], worth[craft] = without, others, without_it
    return kept
