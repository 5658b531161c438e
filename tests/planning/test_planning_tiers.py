"""Objectives taken in order, each as good as it can be beside the earlier ones."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from need_cases import OrderJudge, ordered_problem
from planning_cases import Judge, random_problem, some_of
from planning_runs import DOWN, SteadyDownlink, at, make_run, make_windows

from passplan.inputs.decisions import Published
from passplan.link.choice import WindowLink
from passplan.planning.plan import make_plan
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits


@pytest.mark.parametrize("block", some_of(range(10), 2))
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


@pytest.mark.parametrize("seed", range(206, 212))
def test_the_search_states_bounds_that_hold(seed: int) -> None:
    problem = ordered_problem(seed)
    judge = OrderJudge(problem)
    result = find_plan(problem, Limits(gap=0.0, exact_options=0, time_limit_s=6.0))
    reached = judge.reached(frozenset(result.chosen))
    plans = [judge.reached(chosen) for chosen in judge.plans()]
    names = ["shortfalls", "lost data", "value", "cost", "changes"]
    for tier in result.tiers:
        k = names.index(tier.name)
        as_good = [p[k] for p in plans if all(
            p[n] >= reached[n] - 1e-6 * max(1.0, abs(reached[n])) for n in range(k))]
        sign = 1.0 if tier.sense == "most" else -1.0
        assert sign * tier.bound >= max(as_good) - 1e-5 * max(1.0, abs(max(as_good))), tier.name


def test_what_is_near_is_left_alone_and_what_is_far_is_changed() -> None:
    rows = [("Teasel-1", "Isvarde-A", 600, 1_800), ("Teasel-1", "Isvarde-B", 600, 1_800),
            ("Teasel-2", "Isvarde-A", 5_000, 6_200), ("Teasel-2", "Isvarde-B", 5_000, 6_200)]
    links = [DOWN if antenna == "Isvarde-A" else WindowLink(SteadyDownlink(rate_mbps=59.2), None)
             for _, antenna, _, _ in rows]
    there = tuple(Published(spacecraft=craft, antenna="Isvarde-B", start_utc=at(a), end_utc=at(b))
                  for craft, antenna, a, b in rows if antenna == "Isvarde-B")
    # Isvarde-A brings down 168 MB more, worth 336 in the first pass and as much in the second.
    policy = {"change_cost": 400.0, "change_half_h": 1.0, "cut_grid_s": 0, "worth_per_money": 0.0}
    craft = {"start_fill_mb": 8_900.0, "weight": 2.0, "generation_mb_per_s": 0.0}
    for tiers in ("one_value", "in_order"):
        run = make_run({**policy, "tiers": tiers}, craft=craft, published=there)
        plan = make_plan(run, make_windows(rows), links)
        assert plan.contacts["antenna"].tolist() == ["Isvarde-B", "Isvarde-A"], tiers
        gone = 400.0 * 0.5 ** (5_000 / 3_600)
        assert plan.result.value == pytest.approx(2.0 * float(plan.contacts["volume_mb"].sum()) - gone)
    assert [tier.name for tier in plan.result.tiers] == ["lost data", "value", "cost", "changes"]
    assert plan.result.tiers[-1].value == 2.0


def test_no_money_is_spent_where_value_is_the_same_and_no_value_is_given_up_for_money() -> None:
    rows = [("Teasel-1", "Isvarde-A", 600, 1_800), ("Teasel-1", "Isvarde-B", 600, 1_800),
            ("Teasel-2", "Isvarde-B", 3_000, 4_200)]
    run = make_run({"tiers": "in_order", "worth_per_money": 1e6, "options_per_window": 1})
    plan = make_plan(run, make_windows(rows), [DOWN] * 3)
    assert plan.contacts["antenna"].tolist() == ["Isvarde-A", "Isvarde-B"]
    cost = next(tier for tier in plan.result.tiers if tier.name == "cost")
    assert (cost.value, cost.bound) == (pytest.approx(60.0), pytest.approx(60.0))


@pytest.mark.parametrize("seed", range(5))
def test_the_search_counts_the_price_of_options_too(seed: int) -> None:
    problem = random_problem(seed, needs=False)
    price = np.random.default_rng(seed).choice([-300.0, 0.0, 40.0], len(problem.options))
    problem = replace(problem, extra_price=price, base_worth=-70.0)
    exact = find_plan(problem, Limits(gap=0.0))
    found = find_plan(problem, Limits(gap=0.0, exact_options=0, time_limit_s=20.0))
    assert exact.value == pytest.approx(Judge(replace(problem, extra_price=np.zeros(0), base_worth=0.0)).value(
        frozenset(exact.chosen)) - float(price[list(exact.chosen)].sum()) - 70.0)
    assert found.value == pytest.approx(exact.value, rel=1e-3, abs=1e-3)
    assert found.bound >= exact.value - 1e-3
