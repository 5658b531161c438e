"""Objectives taken in order: each is planned for among the plans that are as good in all earlier ones.

Small problems are solved exactly, with a row that holds each earlier objective at what was reached. The search
takes a weighted sum instead, whose weights follow what it takes to hold the earlier ones. Its
bound holds for any weights: a plan that reaches all that is held earns at least the weighted sum of that, so what is
left of the bound of the sum is a bound of the objective in hand (Lagrangian relaxation of the holds). The bound
finds weights of its own, as it finds prices, and every objective begins with what the one before it has found.

A bound is over plans that are as good in all earlier objectives as the plan found, which itself may be
short of the best by the gap stated there.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from dataclasses import replace

import numpy as np

from passplan.planning.arrays import Floats
from passplan.planning.clock import Clock
from passplan.planning.greedy import plan_greedily
from passplan.planning.implied import implied
from passplan.planning.maps import storage_maps
from passplan.planning.occupancy import first_conflict
from passplan.planning.problem import Limits, Problem
from passplan.planning.result import OPTIMAL_GAP, PlanResult, Tier, relative_gap, status_of
from passplan.planning.rules.terms import Terms
from passplan.planning.search.bound import Hold
from passplan.planning.search.engine import search_plan
from passplan.planning.search.fleetarrays import FleetArrays, fleet_arrays, load_plan
from passplan.planning.search.forced import ruled_out
from passplan.planning.search.ready import compiled_in_time
from passplan.planning.search.schedule import total_worth
from passplan.planning.several_links import Around, around, most_of_others, without
from passplan.planning.shortfalls import find_shortfalls, least_points, total_points
from passplan.planning.solve import least_shortfall, most_value
from passplan.planning.tidy import tidy
from passplan.planning.tiers import Objective, most_of_a_contact, objectives, reached_by, staged
from passplan.planning.value import account

Tell = Callable[[float, float, float], None]
# Parts of the time that is left for each objective: lost data, value, cost, changes.
_SHARES = (0.15, 0.9, 0.6, 0.9)
# The part of what is left that a first plan waits for the compiler; without it, it takes long itself.
_FOR_COMPILER = 0.5
# Of the time that is left, the part in which the fewest points are sought.
_FOR_POINTS = 0.08
# What is held is taken to be worth this part of what contacts of the objectives compare like, or more.
_LEAST_GUESS = 0.005
# Seconds that the last touch may take beside what the first plan took.
_LAST_S = 2.5
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
        self.reached = reached_by(aims, self.chosen)

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
        self.several = bool(np.any(problem.fleet.links > 1))
        # Kept for the last touch.
        self.reserve_s = 0.0
        # With several links: the others around what those have.
        self.view: Around | None = None
        self.arrays: dict[int, FleetArrays] = {}
        # The objective that the search has last looked at, its prices, and those of what was held.
        self.prices: tuple[int, Floats, tuple[float, ...]] | None = None
        self.best = _Plan(self.aims, terms, (), "greedy")

    def run(self) -> PlanResult:
        all_in_one = self._sum(len(self.aims) - 1)
        with self.clock.stage("greedy"):
            arrays = self._arrays_of(all_in_one) if self._is_large() else None
            self._offer(plan_greedily(all_in_one, self.terms, self.clock, maps=self.maps, arrays=arrays), "greedy")
        if arrays is not None:
            # A plan of this size has to be gone through and judged once more.
            self.reserve_s = min(_LAST_S + self.clock.seconds["greedy"], 0.1 * self.clock.left_s())
        floor = self._requirements(all_in_one, arrays)
        self._sharpen()
        bounds = []
        for k, aim in enumerate(self.aims):
            with self.clock.stage(aim.name.replace(" ", "_")):
                bounds.append(self._aim(k))
        with self.clock.stage("tidy"):
            arrays = self._arrays_of(all_in_one) if self._is_large() else None
            self._offer(tidy(all_in_one, self.terms, self.maps, self.best.chosen, arrays), self.best.path)
        return self._conclude(floor, bounds)

    def _offer(self, chosen: Iterable[int], path: str) -> None:
        plan = _Plan(self.aims, self.terms, chosen, path)
        if plan.beats(self.best) or (plan.path == "greedy" and not self.best.chosen):
            self.best = plan

    def _is_large(self) -> bool:
        """Whether the search is to look through the options, and its compiled code is ready."""
        some = self.clock.part(_FOR_COMPILER * self.clock.left_s())
        return len(self.problem.options) > self.limits.exact_options and compiled_in_time(some)

    def _requirements(self, all_in_one: Problem, arrays: FleetArrays | None) -> float:
        """Take the plan to the fewest points; returns a number below which no plan's points are."""
        floor = least_points(self.terms)
        if self.best.points <= floor + _SAME or self.clock.expired():
            return floor
        with self.clock.stage("requirements"):
            time = self.clock.part(_FOR_POINTS * self.clock.left_s())
            served = least_shortfall(self.problem, self.terms, self.limits, time, self.best.chosen)
            filled = plan_greedily(
                all_in_one, self.terms, self.clock, maps=self.maps, begin=served.chosen or (), arrays=arrays)
        self._offer(filled, "greedy")
        return max(floor, served.bound)

    def _sharpen(self) -> None:
        """Say what the terms imply, where the search is to look through the options: its bound then falls further."""
        if not self._is_large():
            return
        self.terms += implied(self.terms, self.problem.options.spacecraft)
        part = without(self.aims[0].problem, self.terms) if self.several else None
        arrays = self._arrays(0) if part is None else fleet_arrays(part.problem, part.terms, storage_maps(part.problem))
        if len(arrays.option):
            out = ruled_out(arrays, self.best.points)
            self.terms += Terms(removals=(out if part is None else replace(out, options=part.options[out.options]),))
            self.arrays.clear()

    def _aim(self, k: int) -> float:
        """Plan for one objective and return its bound, the earlier ones held at what the plan has reached."""
        aim, bound = self.aims[k], self.aims[k].ceiling
        left_s = max(0.0, self.clock.left_s() - self.reserve_s)
        time = self.clock.part(_SHARES[k] * left_s)

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
        if open_still():
            bound = min(bound, self._search(k, time, bound))
        return max(bound, self.best.reached[k])

    def _search(self, k: int, time: Clock, bound: float) -> float:
        """Improve one objective by the search and return the bound that this proves."""
        if not compiled_in_time(time):
            return bound
        view = self._look_around() if self.several else None
        arrays, mine = self._arrays(k), self.best.chosen if view is None else view.within(self.best.chosen)
        if not len(arrays.option):
            return bound
        base = self.aims[k].problem.base_worth + (0.0 if view is None else most_of_others(self.aims[k].problem))
        # The search stops by a gap of what it counts, which is without the base.
        reached = self.best.reached[k]
        gap = self.limits.gap * abs(reached) / abs(reached - base) if reached != base and view is None else 0.0
        limits = replace(self.limits, gap=min(gap, self.limits.gap))
        guess, price = self._guess(k)
        terms = self.terms if view is None else view.part.terms
        found = search_plan(
            arrays, terms, limits, time, mine, self.best.points,
            lambda _, above: self._say(k, min(bound, above + base)),
            holds=[(self._hold(e, view), share) for e, share in enumerate(guess)], price=price,
            staying=None if view is None else view.staying(arrays))
        self._offer(found.chosen if view is None else view.whole(found.chosen), "search")
        self.prices = k, found.price, found.hold_price
        return found.bound + base

    def _look_around(self) -> Around:
        """The spacecraft with one link around what the others have now; see ``several_links.py``."""
        fixed = tuple(o for o in self.best.chosen if self.problem.fleet.links[self.problem.options.spacecraft[o]] > 1)
        if self.view is None or self.view.fixed != fixed:
            self.view, self.prices = around(self.problem, self.terms, self.best.chosen), None
            self.arrays.clear()
        return self.view

    def _hold(self, e: int, view: Around | None) -> Hold:
        """An earlier objective, as good as it is."""
        arrays, reached = self._arrays(e), self.best.reached[e] - self.aims[e].problem.base_worth
        if view is None:
            return Hold(arrays, reached)
        least = total_worth(arrays, *load_plan(arrays, view.within(self.best.chosen)))
        return Hold(arrays, least, most_of_others(self.aims[e].problem) - (reached - least))

    def _arrays(self, k: int) -> FleetArrays:
        """The search's view of one objective."""
        if k not in self.arrays:
            aim = self.aims[k].problem
            self.arrays[k] = self._arrays_of(aim) if self.view is None else self.view.arrays(aim)
        return self.arrays[k]

    def _arrays_of(self, problem: Problem) -> FleetArrays:
        return fleet_arrays(problem, self.terms, self.maps)

    def _guess(self, k: int) -> tuple[list[float], Floats | None]:
        """What each objective before number ``k`` may be worth beside it, and prices to begin with."""
        spans = [most_of_a_contact(aim.problem) for aim in self.aims]
        guess = [spans[k] / span if span > 0.0 else 0.0 for span in spans[:k]]
        if self.prices is None:
            return guess, None
        last, price, held = self.prices
        share = guess[last]
        priced = [max(share * one, _LEAST_GUESS * span) for one, span in zip(held, guess, strict=False)]
        return [*priced, *guess[last:]], share * price

    def _weights(self, k: int) -> list[float]:
        """How much each objective before number ``k`` weighs beside it in a sum that hardly gives up any of them."""
        spans = [most_of_a_contact(aim.problem) for aim in self.aims]
        return [math.prod(_HOLDS[e:k]) * spans[k] / spans[e] if spans[e] > 0.0 else 0.0 for e in range(k)]

    def _sum(self, k: int) -> Problem:
        return staged([(aim.problem, share) for aim, share in zip(self.aims, [*self._weights(k), 1.0], strict=False)])

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
