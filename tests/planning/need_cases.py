"""Random problems with more kinds of requirements, and a judge of them that shares no code with the package."""

from __future__ import annotations

import random
from collections.abc import Iterable, Iterator
from dataclasses import replace

import numpy as np
from planning_cases import STEP_S, Judge, random_problem

from passplan.planning.change_cost import ChangeNeed
from passplan.planning.problem import Problem, RequestNeed
from passplan.planning.rules.decisions import POINTS, DecidedContact, ForbiddenWindow
from passplan.planning.rules.guarantees import GuaranteeNeed


def needy_problem(seed: int) -> Problem:
    """A random problem, with weighed and fixed requests, decided contacts and forbidden windows among its needs."""
    rng = random.Random(50_000 + seed)
    problem = random_problem(seed)
    options, dishes = problem.options, len(problem.antennas)
    requests = list(problem.requests)
    for k in range(rng.randrange(4)):
        o = rng.randrange(len(options))
        fixed = rng.random() < 0.5
        slack = 0 if fixed else rng.randrange(3) * STEP_S
        requests.append(RequestNeed(
            f"more-{k}", "any", int(options.spacecraft[o]),
            frozenset(rng.sample(range(dishes), rng.randint(1, dishes))),
            rng.choice(["downlink", "command", "both"]), int(options.start_s[o]) - slack,
            int(options.end_s[o]) + slack, rng.randint(1, 3) * STEP_S, fixed, rng.choice([0.5, 1.0, 3.0])))
    needs = (*problem.needs, *_decisions(problem, rng), *_guarantees(problem, rng))
    return replace(problem, requests=tuple(requests), needs=needs)


def _decisions(problem: Problem, rng: random.Random) -> Iterator[DecidedContact | ForbiddenWindow]:
    options = problem.options
    for k in range(rng.randrange(3)):
        o = rng.randrange(len(options))
        own = np.flatnonzero(options.spacecraft == options.spacecraft[o])
        some = own[[rng.random() < 0.4 or x == o for x in own.tolist()]] if rng.random() < 0.9 else own[:0]
        kind = rng.choice(["pin", "frozen", "emergency"])
        yield DecidedContact(kind, f"{kind}-{k}", "any", some, "" if len(some) else "nothing fits")
    if rng.random() < 0.3:
        yield ForbiddenWindow(np.flatnonzero(options.window == rng.randrange(len(problem.windows))), "forbidden: x")


def _guarantees(problem: Problem, rng: random.Random) -> Iterator[GuaranteeNeed]:
    for k in range(rng.randrange(3)):
        crew = frozenset(rng.sample(range(len(problem.fleet)), rng.randint(1, len(problem.fleet))))
        unit = rng.choice(["contacts", "MB"])
        low = rng.randrange(problem.horizon_s // STEP_S) * STEP_S if rng.random() < 0.3 else 0
        need = float(rng.randint(1, 4)) if unit == "contacts" else rng.choice([50.0, 333.0, 1e4])
        yield GuaranteeNeed("daily", f"{unit} {k}", crew, unit, need, low, problem.horizon_s)


class NeedJudge(Judge):
    """Adds what weighs more or less than a plain request."""

    def points(self, chosen: frozenset[int]) -> float:
        """Points of the plain needs, with each request missed at its own weight."""
        total = super().points(chosen)
        for need in self.problem.requests:
            total += 0.0 if self._served(chosen, need) else need.points
            total -= 0.0 if any(self._meets(k, need) for k in chosen) else 1.0
        for wish in self.problem.needs_of(DecidedContact):
            total += 0.0 if chosen & set(wish.options.tolist()) else POINTS[wish.kind]
        for promise in self.problem.needs_of(GuaranteeNeed):
            mine = [k for k in chosen if int(self.options.spacecraft[k]) in promise.spacecraft
                    and promise.start_s <= int(self.options.start_s[k]) < promise.end_s]
            got = sum(1.0 if promise.unit == "contacts" else self._carried_mb(k) for k in mine)
            total += max(0.0, 1.0 - got / promise.need)
        return total

    def _carried_mb(self, k: int) -> float:
        o, fleet, craft = self.options, self.problem.fleet, int(self.options.spacecraft[k])
        link = sum(float(o.piece_rate_mb_per_s[p]) * int(o.piece_end_s[p] - o.piece_start_s[p]) for p in o.pieces(k))
        made = float(fleet.generation_mb_per_s[craft]) * int(o.end_s[k] - o.start_s[k])
        return min(link, float(fleet.capacity_mb[craft]) + made)

    def kept(self, chosen: Iterable[int]) -> bool:
        """Whether limits are kept and nothing forbidden is used."""
        some = set(chosen)
        forbidden = {int(o) for need in self.problem.needs_of(ForbiddenWindow) for o in need.options}
        return not some & forbidden and super().kept(some)

    def _served(self, chosen: frozenset[int], need: RequestNeed) -> bool:
        o = self.options
        return any(
            self._meets(k, need)
            and (not need.fixed or (int(o.start_s[k]), int(o.end_s[k])) == (need.earliest_s, need.latest_s))
            for k in chosen)


def ordered_problem(seed: int) -> Problem:
    """A needy problem with a published plan, whose objectives are taken in order."""
    return with_published(needy_problem(seed), random.Random(70_000 + seed))


def with_published(problem: Problem, rng: random.Random) -> Problem:
    """The problem with objectives in order, mostly with a published plan."""
    problem = replace(problem, in_order=True, spill_cost_per_mb=0.0, worth_per_money=0.0)
    if rng.random() < 0.3:
        return problem
    count = len(problem.options)
    keeps, some = np.full(count, -1), rng.sample(range(count), min(count, rng.randint(1, 3)))
    keeps[some] = np.arange(len(some))
    need = ChangeNeed(keeps, np.array([rng.choice([0.0, 30.0, 500.0]) for _ in some]))
    saved = np.where(keeps >= 0, need.cost[keeps], 0.0)
    return replace(problem, needs=(*problem.needs, need), extra_price=-saved, base_worth=-float(need.cost.sum()))


class OrderJudge(NeedJudge):
    """Judges every objective in its order; more is better in all of them."""

    def reached(self, chosen: frozenset[int]) -> list[float]:
        """Points, lost MB, value less changes, cost, changes; the last only where a plan was published."""
        problem, o = self.problem, self.options
        plain = replace(problem, worth_per_money=0.0)
        lost = -self._lost(chosen)
        worth = type(self)(replace(plain, extra_price=np.zeros(0), base_worth=0.0)).value(chosen)
        result = [-self.points(chosen), lost, worth, -sum(float(o.cost[k]) for k in chosen)]
        for need in problem.needs_of(ChangeNeed):
            kept = {int(need.keeps[k]) for k in chosen} - {-1}
            gone = [p for p in range(len(need.cost)) if p not in kept]
            result[2] -= sum(float(need.cost[p]) for p in gone)
            result.append(-float(len(gone) + sum(int(need.keeps[k]) < 0 for k in chosen)))
        return result

    def best_in_order(self) -> list[float]:
        """What the best plan reaches, objective by objective."""
        plans = [(self.reached(chosen), chosen) for chosen in self.plans()]
        for tier in range(len(plans[0][0])):
            top = max(reached[tier] for reached, _ in plans)
            plans = [plan for plan in plans if plan[0][tier] >= top - 1e-6 * max(1.0, abs(top))]
        return plans[0][0]

    def _lost(self, chosen: frozenset[int]) -> float:
        weightless = replace(
            self.problem, spill_cost_per_mb=1.0, extra_price=np.zeros(0), base_worth=0.0,
            fleet=self.problem.fleet.weighed([(self.problem.fleet, 0.0)]))
        return -type(self)(weightless).value(chosen)
