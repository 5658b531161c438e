"""Rules of every kind at once, switched on at random: plans that equal the best of all plans, tier by tier."""

from __future__ import annotations

import pytest
from mixed_cases import MOST_OPTIONS, MixedJudge, kinds_of, mixed_problem
from planning_cases import some_of

from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits


@pytest.mark.parametrize("block", some_of(range(30), 1))
def test_300_cases_of_all_rules_equal_the_best_of_all_plans(block: int) -> None:
    for seed in range(10 * block, 10 * block + 10):
        problem = mixed_problem(seed)
        judge = MixedJudge(problem)
        best = judge.best_of_all()
        result = find_plan(problem, Limits(gap=0.0))
        chosen = frozenset(result.chosen)
        assert judge.kept(chosen) and all(judge.compatible(a, b) for a in chosen for b in chosen if a < b), seed
        assert judge.reached_by(chosen) == pytest.approx(best, rel=1e-5, abs=1e-5), f"seed {seed}"
        assert sum(s.points for s in result.shortfalls) == pytest.approx(-best[0], abs=1e-9), f"seed {seed}"
        value = best[2] if problem.in_order else best[1]
        assert result.value == pytest.approx(value, rel=1e-6, abs=1e-5), f"seed {seed}"


def test_each_rule_is_on_in_many_of_those_cases() -> None:
    counts: dict[str, int] = {}
    for seed in range(300):
        problem = mixed_problem(seed)
        assert len(problem.options) <= MOST_OPTIONS
        for kind in kinds_of(problem):
            counts[kind] = counts.get(kind, 0) + 1
    assert min(counts.values()) >= 20, counts
    assert len(counts) >= 18, counts
