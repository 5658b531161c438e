"""One door to all the ways of finding a plan; what it returns is judged by ``value.account`` alone."""

from __future__ import annotations

from collections.abc import Callable, Iterable

from passplan.planning.clock import Clock
from passplan.planning.greedy import plan_greedily
from passplan.planning.maps import storage_maps
from passplan.planning.occupancy import first_conflict
from passplan.planning.problem import Limits, Problem
from passplan.planning.result import OPTIMAL_GAP, PlanResult, Tier, relative_gap, status_of
from passplan.planning.rules import RULES, all_terms
from passplan.planning.rules.terms import Rule, Terms
from passplan.planning.search.engine import search_plan
from passplan.planning.search.fleetarrays import fleet_arrays
from passplan.planning.search.ready import compiled_in_time
from passplan.planning.shortfalls import find_shortfalls, least_points, total_points
from passplan.planning.solve import least_shortfall, most_value
from passplan.planning.tidy import tidy
from passplan.planning.value import account

Progress = Callable[[float, float, float], None]
# Points are sums of whole requests and seconds over hours; closer than this they are the same.
_SAME_POINTS = 1e-6


def find_plan(
    problem: Problem, limits: Limits | None = None, *, rules: tuple[Rule, ...] = RULES, clock: Clock | None = None,
    progress: Progress | None = None,
) -> PlanResult:
    """A plan for ``problem``, its value and a bound, within the time limit.

    ``progress(value, bound, gap)`` is called as they move. Never fails for want of time: the greedy plan
    stands in. Raises ``RuntimeError`` if a way of planning breaks a rule, which is a fault of the program.
    """
    limits = limits or Limits()
    clock = clock or Clock(limits.time_limit_s)
    terms = all_terms(problem, rules)
    with clock.stage("greedy"):
        maps = storage_maps(problem)
        arrays = None
        if len(problem.options) > limits.exact_options and compiled_in_time(clock):
            arrays = fleet_arrays(problem, terms, maps)
        best = _Candidate(problem, terms, plan_greedily(problem, terms, clock, maps=maps, arrays=arrays), "greedy")
    bound = _ceiling(problem) if len(problem.options) else best.account.value

    def tell(value: float, bound: float) -> None:
        if progress is not None:
            progress(value, bound, relative_gap(value, bound))

    def open_still() -> bool:
        wide = relative_gap(best.account.value, bound) > max(limits.gap, OPTIMAL_GAP)
        return wide and len(problem.options) > 0 and not clock.expired()

    tell(best.account.value, bound)
    points_bound = least_points(terms)
    if best.points > points_bound + _SAME_POINTS and not clock.expired():
        with clock.stage("requirements"):
            served = least_shortfall(problem, terms, limits, 0.25 * clock.left_s())
            points_bound = max(points_bound, served.bound)
            filled = plan_greedily(problem, terms, clock, maps=maps, begin=served.chosen or (), arrays=arrays)
            best = max(best, _Candidate(problem, terms, filled, "greedy"), key=_Candidate.rank)
    if open_still() and len(problem.options) <= limits.exact_options:
        # Half of the time: the search takes the other half where the model is too hard after all.
        solved = most_value(problem, terms, limits, clock, best.points, 0.5 * clock.left_s())
        bound = min(bound, solved.bound)
        best = max(best, _Candidate(problem, terms, solved.chosen or (), "exact"), key=_Candidate.rank)
        tell(best.account.value, bound)
    if open_still() and compiled_in_time(clock):
        with clock.stage("search"):
            if arrays is None:
                arrays = fleet_arrays(problem, terms, maps)
            found = search_plan(arrays, limits, clock, best.chosen, best.points, tell)
        candidate = _Candidate(problem, terms, found.chosen, "search")
        bound = found.bound if candidate.points < best.points - _SAME_POINTS else min(bound, found.bound)
        best = max(best, candidate, key=_Candidate.rank)
    with clock.stage("tidy"):
        tidied = _Candidate(problem, terms, tidy(problem, terms, maps, best.chosen, arrays), best.path)
        best = max(best, tidied, key=lambda c: (*c.rank(), -len(c.chosen)))
    return _conclude(best, terms, points_bound, bound, limits, clock)


class _Candidate:
    """A plan with its accounts, checked against the rules."""

    def __init__(self, problem: Problem, terms: Terms, chosen: Iterable[int], path: str) -> None:
        self.chosen, self.path = tuple(sorted(chosen)), path
        fault = first_conflict(terms, len(problem.options), self.chosen)
        if fault is not None:
            raise RuntimeError(f"the {path} plan is wrong: {fault}")
        self.account = account(problem, self.chosen)
        self.shortfalls = find_shortfalls(terms, self.chosen)
        self.points = total_points(self.shortfalls)

    def rank(self) -> tuple[float, float]:
        """Fewer points first, then more value, both to within rounding."""
        value = self.account.value
        return -round(self.points, 6), float(f"{value:.9e}")


def _conclude(
    best: _Candidate, terms: Terms, points_bound: float, bound: float, limits: Limits, clock: Clock,
) -> PlanResult:
    value = best.account.value
    bound = max(bound, value)
    gap = relative_gap(value, bound)
    tiers = [Tier("value", "most", value, bound, gap)]
    if terms.wanted or terms.recurrences:
        floor = min(points_bound, best.points)
        tiers.insert(0, Tier("shortfalls", "least", best.points, floor, relative_gap(-best.points, -floor)))
    return PlanResult(
        best.chosen, status_of(gap, limits.gap, best.path, len(best.chosen)), value, bound, gap, tuple(tiers),
        best.shortfalls, best.account, best.path, dict(clock.seconds))


def _ceiling(problem: Problem) -> float:
    """A bound that needs no search: all data aboard and generated is delivered, none lost, nothing paid."""
    fleet = problem.fleet
    return float((fleet.weight * (fleet.start_fill_mb + fleet.generation_mb_per_s * problem.horizon_s)).sum())
