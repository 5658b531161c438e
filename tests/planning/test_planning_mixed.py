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


@pytest.mark.parametrize("seed", some_of(range(300, 420), 12))
def test_the_search_states_bounds_that_hold_under_all_rules(seed: int) -> None:
    problem = mixed_problem(seed)
    judge = MixedJudge(problem)
    result = find_plan(problem, Limits(gap=0.0, exact_options=0, time_limit_s=60.0, search_rounds=8))
    reached = judge.reached_by(frozenset(result.chosen))
    plans = [judge.reached_by(chosen) for chosen in judge.plans()]
    names = ["shortfalls", "lost data", "value", "cost", "changes"] if problem.in_order else ["shortfalls", "value"]
    for tier in result.tiers:
        k = names.index(tier.name)
        as_good = max(p[k] for p in plans if all(
            p[n] >= reached[n] - 1e-6 * max(1.0, abs(reached[n])) for n in range(k)))
        sign = 1.0 if tier.sense == "most" else -1.0
        assert sign * tier.bound >= as_good - 1e-5 * max(1.0, abs(as_good)), tier.name
