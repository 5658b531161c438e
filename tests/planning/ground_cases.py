"""Random limits of sites and money on the random problems, and a judge of them that steps through time."""

from __future__ import annotations

import random
from collections.abc import Iterable
from dataclasses import replace

import numpy as np
from planning_cases import STEP_S, Judge, random_problem

from passplan.planning.days import Day
from passplan.planning.problem import Problem
from passplan.planning.rules.backhaul import BackhaulNeed
from passplan.planning.rules.budget import BudgetNeed
from passplan.planning.rules.shared_equipment import SharedNeed


def limited_problem(seed: int) -> Problem:
    """A random problem with some of: a pool, a limit of staff, a line by rate and by the day, a budget."""
    problem = random_problem(seed)
    return replace(problem, needs=ground_needs(problem, random.Random(7_000 + seed)))


def ground_needs(problem: Problem, rng: random.Random) -> tuple[object, ...]:
    """The needs of those limits, each more often than not."""
    options, half_s = problem.options, problem.horizon_s // 2 // STEP_S * STEP_S
    days = (Day("first", -5_000, half_s), Day("second", half_s, half_s + 86_400))
    dishes = sorted(rng.sample(range(len(problem.antennas)), rng.randint(1, len(problem.antennas))))
    mine = np.flatnonzero(np.isin(options.antenna, dishes) & (options.downlink if rng.random() < 0.5 else True))
    with_setup = rng.random() < 0.5
    needs: list[object] = [
        SharedNeed(
            "modems", "equipment_busy", mine, (options.start_s - with_setup * options.prepare_s)[mine],
            (options.end_s + with_setup * options.release_s)[mine], rng.choice([0, 1, 1, 2])),
        BackhaulNeed(
            "here", np.array(dishes), tuple((day, rng.choice([0.0, 150.0, 600.0])) for day in days),
            rng.choice([None, 0.5, 3.0, 4.0])),
        BudgetNeed(rng.choice([0.0, 5.0, 42.0, 60.0]), days),
    ]
    return tuple(need for need in needs if rng.random() < 0.6)


class GroundJudge(Judge):
    """Keeps what the needs of a :func:`limited_problem` ask for."""

    def kept(self, chosen: Iterable[int]) -> bool:
        """Whether the chosen options stay within every limit, at every instant of a 30 s grid."""
        picked = list(chosen)
        return super().kept(picked) and all(self._keeps(need, picked) for need in self.problem.needs)

    def _keeps(self, need: object, picked: list[int]) -> bool:
        o = self.options
        if not isinstance(need, SharedNeed | BackhaulNeed | BudgetNeed):
            return True
        if isinstance(need, SharedNeed):
            span = {int(k): (int(a), int(b)) for k, a, b in zip(need.options, need.start_s, need.end_s, strict=True)}
            return all(
                sum(span[k][0] <= t < span[k][1] for k in picked if k in span) <= need.at_once
                for t in range(-600, self.problem.horizon_s + 600, 30))
        if isinstance(need, BudgetNeed):
            return all(
                sum(float(o.cost[k]) for k in picked if day.start_s <= o.start_s[k] < day.end_s) <= need.per_day + 1e-9
                for day in need.days)
        rates = {k: self._rates(k) for k in picked if o.antenna[k] in need.antennas}
        for day, limit_mb in need.day_mb:
            carried = sum(rate * STEP_S for steps in rates.values() for step, rate in steps.items()
                          if day.start_s <= step * STEP_S < day.end_s)
            if carried > limit_mb + 1e-9:
                return False
        if need.rate_mb_per_s is None:
            return True
        return all(
            sum(max(steps.values()) for steps in rates.values() if steps and min(steps) <= step <= max(steps))
            <= need.rate_mb_per_s + 1e-9 for step in range(self.steps))

    def _rates(self, option: int) -> dict[int, float]:
        """The rate of each step in which an option sends."""
        o = self.options
        return {step: float(o.piece_rate_mb_per_s[p]) for p in o.pieces(option)
                for step in range(int(o.piece_start_s[p]) // STEP_S, int(o.piece_end_s[p]) // STEP_S)}
