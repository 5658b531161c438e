"""One door to all the ways of finding a plan; what it returns is judged by ``value.account`` alone.

Independent parts of the network are planned apart. In each, a greedy plan comes first; then the exact model where
there are few options, and the search where there are many or the model was too hard.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass

from passplan.planning.certificate import Certificate
from passplan.planning.clock import Clock
from passplan.planning.greedy import plan_greedily
from passplan.planning.interrupt import stops_by_hand
from passplan.planning.maps import storage_maps
from passplan.planning.occupancy import first_conflict
from passplan.planning.overrated import Overrated, find_overrated
from passplan.planning.parts import Part, independent_parts
from passplan.planning.problem import Limits, Problem
from passplan.planning.result import OPTIMAL_GAP, PlanResult, Proof, Tier, relative_gap, status_of
from passplan.planning.rules import RULES, all_terms
from passplan.planning.rules.terms import Rule, Terms
from passplan.planning.search.ready import compiled_in_time
from passplan.planning.several_links import arrays_of, search_all
from passplan.planning.shortfalls import find_shortfalls, least_points, total_points
from passplan.planning.solve import least_shortfall, most_value
from passplan.planning.staged import plan_in_order
from passplan.planning.tidy import tidy
from passplan.planning.value import account

Progress = Callable[[float, float, float], None]
# Points are sums of whole requests and seconds over hours; closer than this they are the same.
_SAME_POINTS = 1e-6
# The part of the time that a first plan waits for the compiler; without it, it takes long itself.
_FOR_COMPILER = 0.5


def find_plan(
    problem: Problem, limits: Limits | None = None, *, rules: tuple[Rule, ...] = RULES, clock: Clock | None = None,
    progress: Progress | None = None,
) -> PlanResult:
    """A plan for ``problem``, its value and a bound, within the time limit.

    ``progress(value, bound, gap)`` is called as they move. Never fails for want of time: the greedy plan
    stands in; so it does after an interrupt (see ``interrupt.py``). Raises ``RuntimeError`` if a way of planning
    breaks a rule, which is a fault of the program.
    """
    limits = limits or Limits()
    clock = clock or Clock(limits.time_limit_s)
    with stops_by_hand(clock):
        terms = all_terms(problem, rules)
        if problem.in_order:
            return plan_in_order(problem, terms, limits, clock, progress)
        parts = independent_parts(problem, terms)
        ceilings = [part.problem.ceiling for part in parts]
        value = bound = 0.0
        found: list[_Outcome] = []
        for k, part in enumerate(parts):
            rest = sum(ceilings[k + 1:])

            def tell(now: float, ceiling: float, value: float = value, bound: float = bound + rest) -> None:
                if progress is not None:
                    progress(value + now, bound + ceiling, relative_gap(value + now, bound + ceiling))

            share = len(part.options) / max(1, sum(len(other.options) for other in parts[k:]))
            own = clock if len(parts) == 1 else clock.part(share * clock.left_s())
            found.append(_plan_part(part, limits, own, ceilings[k], tell))
            value, bound = value + found[-1].best.account.value, bound + found[-1].bound
        if len(parts) == 1:
            best = found[0].best
        else:
            chosen = [int(o) for part, outcome in zip(parts, found, strict=True)
                      for o in part.options[list(outcome.best.chosen)]]
            best = _Candidate(problem, terms, chosen, "+".join(sorted({outcome.best.path for outcome in found})))
        proofs = tuple(Proof(part, outcome.certificate) for part, outcome in zip(parts, found, strict=True)
                       if outcome.certificate is not None)
        return _conclude(
            best, terms, sum(o.points_bound for o in found), bound, proofs if len(proofs) == len(parts) else (), limits,
            clock)


@dataclass(frozen=True, eq=False)
class _Outcome:
    """What came of a part. ``certificate`` is None where the bound is the ceiling that needs no proof."""

    best: _Candidate
    points_bound: float
    bound: float
    certificate: Certificate | None


def _plan_part(
    part: Part, limits: Limits, clock: Clock, bound: float, tell: Callable[[float, float], None],
) -> _Outcome:
    problem, terms = part.problem, part.terms
    certificate: Certificate | None = None
    with clock.stage("greedy"):
        maps = storage_maps(problem)
        arrays = None
        if len(problem.options) > limits.exact_options and compiled_in_time(clock.part(_FOR_COMPILER * clock.left_s())):
            arrays = arrays_of(problem, terms, maps)
        began_s = clock.elapsed_s()
        best = _Candidate(problem, terms, plan_greedily(problem, terms, clock, maps=maps, arrays=arrays), "greedy")
        first_s = clock.elapsed_s() - began_s
    if len(problem.options) == 0:
        bound = best.account.value

    def open_still() -> bool:
        wide = relative_gap(best.account.value, bound) > max(limits.gap, OPTIMAL_GAP)
        return wide and len(problem.options) > 0 and not clock.expired()

    tell(best.account.value, bound)
    points_bound = least_points(terms)
    if best.points > points_bound + _SAME_POINTS and not clock.expired():
        with clock.stage("requirements"):
            served = least_shortfall(problem, terms, limits, clock.part(0.25 * clock.left_s()))
            points_bound = max(points_bound, served.bound)
            filled = plan_greedily(problem, terms, clock, maps=maps, begin=served.chosen or (), arrays=arrays)
            best = max(best, _Candidate(problem, terms, filled, "greedy"), key=_Candidate.rank)
    if open_still() and len(problem.options) <= limits.exact_options:
        # Half of the time: the search takes the other half where the model is too hard after all.
        half, overrated = clock.part(0.5 * clock.left_s()), list[Overrated]()
        while open_still() and not half.expired():
            solved = most_value(problem, terms, limits, half, best.points, overrated=overrated)
            if solved.bound < bound:
                bound, certificate = solved.bound, solved.certificate
            best = max(best, _Candidate(problem, terms, solved.chosen or (), "exact"), key=_Candidate.rank)
            tell(best.account.value, bound)
            news = find_overrated(problem, maps, solved.chosen or (), overrated)
            if solved.chosen is None or not news:
                break
            overrated += news
    if open_still() and compiled_in_time(clock):
        with clock.stage("search"):
            base = problem.base_worth
            # A plan of this size has to be checked and tidied too: as long as the first one took, about.
            reserve_s = min(first_s, 0.1 * clock.left_s())
            arrays = arrays or arrays_of(problem, terms, maps)
            found = search_all(
                problem, terms, arrays, limits, clock.part(clock.left_s() - reserve_s), best.chosen, best.points,
                lambda v, b: tell(v + base, b + base))
        candidate = _Candidate(problem, terms, found.chosen, "search")
        # With fewer points, more plans compete than the bound so far is for.
        if candidate.points < best.points - _SAME_POINTS or found.bound + base < bound:
            bound, certificate = found.bound + base, found.certificate
        best = max(best, candidate, key=_Candidate.rank)
    with clock.stage("tidy"):
        touched = tidy(problem, terms, maps, best.chosen, arrays)
        if touched != list(best.chosen):
            tidied = _Candidate(problem, terms, touched, best.path)
            best = max(best, tidied, key=lambda c: (*c.rank(), -len(c.chosen)))
    return _Outcome(best, points_bound, bound, certificate)


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
    best: _Candidate, terms: Terms, points_bound: float, bound: float, proofs: tuple[Proof, ...], limits: Limits,
    clock: Clock,
) -> PlanResult:
    value = best.account.value
    bound = max(bound, value)
    gap = relative_gap(value, bound)
    tiers = [Tier("value", "most", value, bound, gap)]
    if terms.wanted or terms.recurrences or terms.guarantees:
        floor = min(points_bound, best.points)
        tiers.insert(0, Tier("shortfalls", "least", best.points, floor, relative_gap(-best.points, -floor)))
    status = status_of(gap, limits.gap, best.path, len(best.chosen))
    return PlanResult(
        best.chosen, "stopped_by_limit" if clock.stopped and status == "greedy" else status, value, bound, gap,
        tuple(tiers), best.shortfalls, best.account, best.path, dict(clock.seconds), proofs, clock.stopped)
