"""Random problems with more kinds of requirements, and a judge of them that shares no code with the package."""

from __future__ import annotations

import random
from dataclasses import replace

from planning_cases import STEP_S, Judge, random_problem

from passplan.planning.problem import Problem, RequestNeed


def needy_problem(seed: int) -> Problem:
    """A random problem, with weighed and fixed requests among its needs."""
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
    return replace(problem, requests=tuple(requests))


class NeedJudge(Judge):
    """Adds what weighs more or less than a plain request."""

    def points(self, chosen: frozenset[int]) -> float:
        """Points of the plain needs, with each request missed at its own weight."""
        total = super().points(chosen)
        for need in self.problem.requests:
            total += 0.0 if self._served(chosen, need) else need.points
            total -= 0.0 if any(self._meets(k, need) for k in chosen) else 1.0
        return total

    def _served(self, chosen: frozenset[int], need: RequestNeed) -> bool:
        o = self.options
        return any(
            self._meets(k, need)
            and (not need.fixed or (int(o.start_s[k]), int(o.end_s[k])) == (need.earliest_s, need.latest_s))
            for k in chosen)
