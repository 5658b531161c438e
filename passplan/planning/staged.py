"""Objectives taken in order: each is planned for among the plans that are as good in all earlier ones.

Small problems are solved exactly, with a row that holds each earlier objective at what was reached. The search
takes a weighted sum instead, in which what is held weighs so much that giving it up hardly pays. Its
bound holds for any weights: a plan that reaches all that is held earns at least the weighted sum of that, so what is
left of the bound of the sum is a bound of the objective in hand (Lagrangian relaxation of the holds). Where
weights are too small or too large the bound is loose, never wrong.

A bound is over plans that are as good in all earlier objectives as the plan found, which itself may be
short of the best by the gap stated there.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from dataclasses import replace

from passplan.planning.clock import Clock
from passplan.planning.greedy import plan_greedily
from passplan.planning.maps import storage_maps
from passplan.planning.occupancy import first_conflict
from passplan.planning.problem import Limits, Problem
from passplan.planning.result import OPTIMAL_GAP, PlanResult, Tier, relative_gap, status_of
from passplan.planning.rules.terms import Terms
from passplan.planning.search.bound import lowest_ceiling
from passplan.planning.search.fleetarrays import load_plan
from passplan.planning.search.ready import compiled_in_time
from passplan.planning.search.schedule import worth_of
from passplan.planning.several_links import arrays_of, ceiling_without, search_all
from passplan.planning.shortfalls import find_shortfalls, least_points, total_points
from passplan.planning.solve import least_shortfall, most_value
from passplan.planning.tidy import tidy
from passplan.planning.tiers import Objective, most_of_a_contact, objectives, staged
from passplan.planning.value import account

Tell = Callable[[float, float, float], None]
# Parts of the time that is left for each objective: lost data, value, cost, changes.
_SHARES = (0.15, 0.8, 0.6, 0.9)
# Of the search's time for an objective, the part in which its bound is sought at gentler weights.
_FOR_BOUND = 0.5
# Solvers keep rows to about a millionth; closer than this two plans are equally good.
_SAME = 2e-6
# In a weighted sum, the most that a contact can do for one objective weighs so many times as much as for the next.
_HOLDS = (50.0, 1e3, 1e3)


def plan_in_order(
    problem: Problem, terms: Terms, limits: Limits, clock: Clock, progress: Tell | None = None,
) -> PlanResult:
    """A plan for a problem whose objectives are taken in order, and a bound for each.

    ``progress(value, bound, gap)`` tells of the objective in hand. Raises ``RuntimeError`` if a way of planning
    breaks a rule, which is a fault of the program.
    """
    return _Staged(problem, terms, limits, clock, progress or _silent).run()


class _Plan:
    """A set of options with its points and what it reaches in every objective (more is better)."""

    def __init__(self, aims: tuple[Objective, ...], terms: Terms, chosen: Iterable[int], path: str) -> None:
        self.chosen, self.path = tuple(sorted(chosen)), path
        fault = first_conflict(terms, len(aims[0].problem.options), self.chosen)
        if fault is not None:
            raise RuntimeError(f"the {path} plan is wrong: {fault}")
        self.shortfalls = find_shortfalls(terms, self.chosen)
        self.points = total_points(self.shortfalls)
        self.reached = tuple(account(aim.problem, self.chosen).value for aim in aims)

    def beats(self, other: _Plan) -> bool:
        """Whether it is better in the first objective in which the two differ."""
        for mine, theirs in zip((-self.points, *self.reached), (-other.points, *other.reached), strict=True):
            if abs(mine - theirs) > _SAME * max(1.0, abs(theirs)):
                return mine > theirs
        return False


class _Staged:
    def __init__(self, problem: Problem, terms: Terms, limits: Limits, clock: Clock, tell: Tell) -> None:
        self.problem, self.terms, self.limits, self.clock, self.tell = problem, terms, limits, clock, tell
        self.aims = objectives(problem)
        self.maps = storage_maps(problem)
        self.best = _Plan(self.aims, terms, (), "greedy")

    def run(self) -> PlanResult:
        all_in_one = self._sum(len(self.aims) - 1)
        with self.clock.stage("greedy"):
            self._offer(plan_greedily(all_in_one, self.terms, self.clock, maps=self.maps), "greedy")
        floor = self._requirements(all_in_one)
        bounds = []
        for k, aim in enumerate(self.aims):
            with self.clock.stage(aim.name.replace(" ", "_")):
                bounds.append(self._aim(k))
        with self.clock.stage("tidy"):
            self._offer(tidy(all_in_one, self.terms, self.maps, self.best.chosen), self.best.path)
        return self._conclude(floor, bounds)

    def _offer(self, chosen: Iterable[int], path: str) -> None:
        plan = _Plan(self.aims, self.terms, chosen, path)
        if plan.beats(self.best) or (plan.path == "greedy" and not self.best.chosen):
            self.best = plan

    def _requirements(self, all_in_one: Problem) -> float:
        """Take the plan to the fewest points; returns a number below which no plan's points are."""
        floor = least_points(self.terms)
        if self.best.points <= floor + _SAME or self.clock.expired():
            return floor
        with self.clock.stage("requirements"):
            served = least_shortfall(self.problem, self.terms, self.limits, self.clock.part(0.25 * self.clock.left_s()))
            filled = plan_greedily(all_in_one, self.terms, self.clock, maps=self.maps, begin=served.chosen or ())
        self._offer(filled, "greedy")
        return max(floor, served.bound)

    def _aim(self, k: int) -> float:
        """Plan for one objective and return its bound, the earlier ones held at what the plan has reached."""
        aim, bound = self.aims[k], self.aims[k].ceiling
        time = self.clock.part(_SHARES[k] * self.clock.left_s())

        def open_still() -> bool:
            wide = relative_gap(self.best.reached[k], bound) > max(self.limits.gap, OPTIMAL_GAP)
            return wide and bool(len(self.problem.options)) and not time.expired()

        if open_still() and len(self.problem.options) <= self.limits.exact_options:
            holds = [(other.problem, reached - 0.5 * _SAME * max(1.0, abs(reached)))
                     for other, reached in zip(self.aims[:k], self.best.reached, strict=False)]
            solved = most_value(
                aim.problem, self.terms, self.limits, time.part(0.5 * time.left_s()), self.best.points, holds,
                known=self.best.chosen)
            bound = min(bound, solved.bound)
            if solved.chosen is not None:
                self._offer(solved.chosen, "exact")
            self._say(k, bound)
        if open_still() and k > 0:
            bound = min(bound, self._ceiling(k, time.part(_FOR_BOUND * time.left_s()), bound))
        if open_still():
            bound = min(bound, self._search(k, time, bound))
        return max(bound, self.best.reached[k])

    def _search(self, k: int, time: Clock, bound: float) -> float:
        """Improve one objective by the search, over the weighted sum; returns the bound that this proves."""
        total = self._sum(k)
        shares = self._weights(k)
        held = sum(share * reached for share, reached in zip(shares, self.best.reached[:k], strict=True))
        # The search stops by a gap of the whole sum, of which the objective in hand may be but a small part.
        whole = abs(held + self.best.reached[k] - total.base_worth)
        gap = self.limits.gap * abs(self.best.reached[k]) / whole if whole > 0.0 else 0.0
        limits = replace(self.limits, gap=min(gap, self.limits.gap))

        def tell(_: float, above: float) -> None:
            self._say(k, min(bound, above + total.base_worth - held))

        if not compiled_in_time(time):
            return bound
        points = self.best.points
        arrays = arrays_of(total, self.terms, self.maps)
        found = search_all(total, self.terms, arrays, limits, time, self.best.chosen, points, tell)
        self._offer(found.chosen, "search")
        # The bound is over plans with as few points as the search's own.
        fewer = self.best.points < points - _SAME
        return self.aims[k].ceiling if fewer else found.bound + total.base_worth - held

    def _ceiling(self, k: int, time: Clock, bound: float) -> float:
        """A bound of one objective, from a sum in which what is held weighs about as much as the objective itself.

        Where it weighs so much that it is hardly ever given up, a small gap of what is held is a wide one of the
        objective in hand.
        """
        total, shares = self._sum(k, gently=True), self._weights(k, gently=True)
        if not compiled_in_time(time):
            return bound
        held = sum(share * reached for share, reached in zip(shares, self.best.reached[:k], strict=True))
        less = held - total.base_worth

        def tell(_: float, above: float) -> None:
            self._say(k, min(bound, above - less))

        arrays = arrays_of(total, self.terms, self.maps)
        if arrays is None:
            found = ceiling_without(total, self.terms, self.limits, time, self.best.chosen, self.best.points, tell)
            return min(bound, found - less)
        if not len(arrays.option):
            return bound
        taken, size = load_plan(arrays, self.best.chosen)
        counted = sum(worth_of(arrays, i, taken[i], size[i])[1] for i in range(len(size)))
        found = lowest_ceiling(
            arrays, taken, size, self.best.points - counted, self.limits.threads, time, tell)
        return min(bound, found - less)

    def _weights(self, k: int, *, gently: bool = False) -> list[float]:
        """How much each objective before number ``k`` weighs beside it."""
        spans = [most_of_a_contact(aim.problem) for aim in self.aims]
        strength = [1.0 if gently else math.prod(_HOLDS[e:k]) for e in range(k)]
        return [strength[e] * spans[k] / spans[e] if spans[e] > 0.0 else 0.0 for e in range(k)]

    def _sum(self, k: int, *, gently: bool = False) -> Problem:
        shares = [*self._weights(k, gently=gently), 1.0]
        return staged([(aim.problem, share) for aim, share in zip(self.aims, shares, strict=False)])

    def _say(self, k: int, bound: float) -> None:
        reached = self.best.reached[k]
        self.tell(reached, bound, relative_gap(reached, bound))

    def _conclude(self, floor: float, bounds: list[float]) -> PlanResult:
        best, tiers = self.best, []
        if self.terms.wanted or self.terms.recurrences or self.terms.guarantees:
            least = min(floor, best.points)
            tiers.append(Tier("shortfalls", "least", best.points, least, relative_gap(-best.points, -least)))
        for aim, reached, bound in zip(self.aims, best.reached, bounds, strict=True):
            sign, above = (1.0 if aim.sense == "most" else -1.0), max(bound, reached)
            # Adding nothing turns a minus nothing into nothing.
            gap = relative_gap(reached, above)
            tiers.append(Tier(aim.name, aim.sense, sign * reached + 0.0, sign * above + 0.0, gap))
        value = next(tier for tier in tiers if tier.name == "value")
        return PlanResult(
            best.chosen, status_of(value.gap, self.limits.gap, best.path, len(best.chosen)), value.value, value.bound,
            value.gap, tuple(tiers), best.shortfalls, account(self.problem, best.chosen), best.path,
            dict(self.clock.seconds), stopped_by_hand=self.clock.stopped)


def _silent(_value: float, _bound: float, _gap: float) -> None:
    """Nobody is watching."""
