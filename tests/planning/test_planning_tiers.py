"""Objectives taken in order, each as good as it can be beside the earlier ones."""

from __future__ import annotations

import pytest
from need_cases import OrderJudge, ordered_problem

from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits


@pytest.mark.parametrize("block", range(10))
def test_120_cases_in_order_equal_the_best_of_all_plans_in_every_tier(block: int) -> None:
    for seed in range(12 * block, 12 * block + 12):
        problem = ordered_problem(seed)
        judge = OrderJudge(problem)
        best = judge.best_in_order()
        result = find_plan(problem, Limits(gap=0.0))
        reached = judge.reached(frozenset(result.chosen))
        assert judge.kept(result.chosen), f"seed {seed}"
        assert reached == pytest.approx(best, rel=1e-5, abs=1e-5), f"seed {seed}"
        stated = {tier.name: tier for tier in result.tiers}
        names = ["shortfalls", "lost data", "value", "cost", "changes"][: len(best)]
        for name, number in zip(names, reached, strict=True):
            if name in stated:
                tier = stated[name]
                sign = 1.0 if tier.sense == "most" else -1.0
                assert sign * tier.value == pytest.approx(number, rel=1e-6, abs=1e-6), f"seed {seed}, {name}"
                assert sign * tier.bound >= sign * tier.value - 1e-9, f"seed {seed}, {name}"
                assert tier.gap <= 1e-4, f"seed {seed}, {name}"
        assert result.value == pytest.approx(reached[2], rel=1e-6, abs=1e-6)
