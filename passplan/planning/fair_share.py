"""The largest share of its data that every mission can be promised at once, found by raising a common floor.

A mission's share is what its contacts can bring down (as guarantees count it, see ``rules/guarantees.py``) over what
is aboard its spacecraft and generated within the horizon. The floor is halved in on: a floor is within reach if the
requirements, with every mission's floor among them, leave no more points than without it. The greedy plan
shows that for most floors; where it does not, a small exact model decides. What is not decided in time counts
as out of reach, so the floor promises too little rather than too much. The floor then is a guarantee like
any other, and value is sought beside it; the shares above the floor are not evened out any further.
"""

from __future__ import annotations

from dataclasses import replace

from passplan.inputs.run import Run
from passplan.planning.clock import Clock
from passplan.planning.greedy import plan_greedily
from passplan.planning.problem import Limits, Problem
from passplan.planning.rules import all_terms
from passplan.planning.rules.guarantees import GuaranteeNeed
from passplan.planning.shortfalls import find_shortfalls, total_points
from passplan.planning.solve import least_shortfall

# Halvings: the floor is known to a two-hundredth of a mission's data.
_STEPS = 8
_SAME = 1e-6
_STEP_S = 5.0


def with_fair_floor(run: Run, problem: Problem, limits: Limits, seconds: float) -> tuple[Problem, float]:
    """The problem with each mission's floor among its guarantees, and the floor (0 to 1)."""
    clock = Clock(seconds)
    base = _points(problem, limits, clock, 0.0)

    def within_reach(floor: float) -> bool:
        return _points(with_floor(run, problem, floor), limits, clock, base) <= base + _SAME

    low, high = 0.0, 1.0
    if within_reach(high):
        low = high
    for _ in range(_STEPS):
        if low == high or clock.expired():
            break
        middle = (low + high) / 2.0
        low, high = (middle, high) if within_reach(middle) else (low, middle)
    return with_floor(run, problem, low), low


def with_floor(run: Run, problem: Problem, floor: float) -> Problem:
    """The problem with a guarantee of ``floor`` times its data for every mission."""
    fleet, crews = problem.fleet, dict[str, list[int]]()
    for k, name in enumerate(fleet.names):
        crews.setdefault(run.spacecraft[name].mission or name, []).append(k)
    data_mb = fleet.start_fill_mb + fleet.generation_mb_per_s * problem.horizon_s
    needs = [GuaranteeNeed("fair", f"share of {mission}", frozenset(crew), "MB", floor * float(data_mb[crew].sum()), 0,
                           problem.horizon_s) for mission, crew in crews.items()]
    return replace(problem, needs=(*problem.needs, *(need for need in needs if need.need > 0.0)))


def _points(problem: Problem, limits: Limits, clock: Clock, enough: float) -> float:
    """The fewest points of shortfall that can be shown, or as few as are ``enough``."""
    terms = all_terms(problem)
    # Without time the greedy plan holds what is required and nothing more.
    greedy = total_points(find_shortfalls(terms, plan_greedily(problem, terms, Clock(0.0))))
    if greedy <= enough + _SAME or len(problem.options) > limits.exact_options:
        return greedy
    served = least_shortfall(problem, terms, limits, clock.part(_STEP_S))
    if served.chosen is None:
        return greedy
    return min(greedy, total_points(find_shortfalls(terms, served.chosen)))
