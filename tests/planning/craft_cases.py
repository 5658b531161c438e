"""Random limits of spacecraft on small planning problems, and a judge of them by stepping through time."""

from __future__ import annotations

import random
from collections.abc import Iterable
from dataclasses import replace

from planning_cases import STEP_S, Judge, random_problem

from passplan.planning.problem import Problem
from passplan.planning.rules.contact_gaps import GapNeed


def random_craft_problem(seed: int) -> Problem:
    """A random problem in which each spacecraft has each limit by a coin's toss."""
    rng = random.Random(10_000 + seed)
    problem = random_problem(seed)
    needs: list[object] = []
    for craft in range(len(problem.fleet)):
        if rng.random() < 0.5:
            needs.append(GapNeed(craft, rng.choice([0, 2, 5]) * STEP_S, rng.choice([0, 4, 12]) * STEP_S))
    return replace(problem, needs=tuple(needs))


class CraftJudge(Judge):
    """Also knows the limits of spacecraft, each in its own plain way."""

    def kept(self, chosen: Iterable[int]) -> bool:
        """Whether a set of options that do not collide keeps every limit."""
        chosen = list(chosen)
        return all(self._rested(need, chosen) for need in self.problem.needs_of(GapNeed))

    def _rested(self, need: GapNeed, chosen: list[int]) -> bool:
        o = self.options
        for after in chosen:
            for before in chosen:
                own = o.spacecraft[after] == o.spacecraft[before] == need.spacecraft
                if own and o.end_s[before] <= o.start_s[after]:
                    rest_s = o.start_s[after] - o.end_s[before]
                    both_send = o.downlink[before] and o.downlink[after]
                    if rest_s < need.gap_s or (both_send and rest_s < need.cool_down_s):
                        return False
        return True
