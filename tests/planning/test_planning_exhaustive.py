"""The planner against exhaustive enumeration, with everything on."""

from __future__ import annotations

import pytest
from planning_cases import Judge, random_problem

from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits


@pytest.mark.parametrize("block", range(10))
def test_200_random_cases_equal_the_best_of_all_plans(block: int) -> None:
    for seed in range(20 * block, 20 * block + 20):
        problem = random_problem(seed)
        judge = Judge(problem)
        points, value = judge.best()
        result = find_plan(problem, Limits(gap=0.0))
        chosen = frozenset(result.chosen)
        assert all(judge.compatible(a, b) for a in chosen for b in chosen if a < b), f"seed {seed}"
        assert judge.points(chosen) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert sum(s.points for s in result.shortfalls) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert judge.value(chosen) == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        assert result.value == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        assert result.bound >= result.value
        assert result.status in ("optimal", "empty"), f"seed {seed}"
