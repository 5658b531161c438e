"""Long runs, left out by default: many more random cases against exhaustive enumeration. ``pytest -m slow``."""

from __future__ import annotations

import pytest
from planning_cases import Judge, random_problem

from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits

pytestmark = pytest.mark.slow


@pytest.mark.parametrize("exact_options", [8_000, 0], ids=["exact", "search"])
@pytest.mark.parametrize("block", range(10))
def test_500_more_random_cases_are_never_beaten_by_any_plan(block: int, exact_options: int) -> None:
    for seed in range(10_000 + 50 * block, 10_050 + 50 * block):
        problem = random_problem(seed)
        points, value = Judge(problem).best()
        result = find_plan(problem, Limits(gap=0.0, exact_options=exact_options, time_limit_s=20.0))
        assert sum(s.points for s in result.shortfalls) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert result.value <= value + 1e-6 * max(abs(value), 1.0), f"seed {seed}"
        assert result.bound >= value - 1e-6 * max(abs(value), 1.0), f"seed {seed}"
