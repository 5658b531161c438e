"""Tightening a requirement never raises the first tier that it touches; one that is off changes nothing."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from need_cases import needy_problem, ordered_problem
from planning_cases import random_problem, some_of
from planning_runs import BOTH, make_run, make_windows

from passplan.inputs.policy import Policy
from passplan.planning.plan import make_plan
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits, Problem
from passplan.planning.rules.decisions import ForbiddenWindow
from passplan.planning.rules.guarantees import GuaranteeNeed

EXACT = Limits(gap=0.0)
SEEDS = some_of(range(400, 415), 3)


def points(problem: Problem) -> float:
    return sum(s.points for s in find_plan(problem, EXACT).shortfalls)


@pytest.mark.parametrize("seed", SEEDS)
def test_a_need_less_never_leaves_more_points(seed: int) -> None:
    problem = needy_problem(seed)
    before = points(problem)
    for k in range(len(problem.needs)):
        assert points(replace(problem, needs=problem.needs[:k] + problem.needs[k + 1:])) <= before + 1e-6
    assert points(replace(problem, requests=problem.requests[1:])) <= before + 1e-6


@pytest.mark.parametrize("seed", SEEDS)
def test_a_higher_need_and_a_shorter_interval_never_leave_fewer_missing(seed: int) -> None:
    problem = needy_problem(seed)
    # In parts of the old need what is missing can only grow.
    higher = tuple(replace(n, need=1.5 * n.need) if isinstance(n, GuaranteeNeed) else n for n in problem.needs)
    assert points(replace(problem, needs=higher)) >= points(problem) - 1e-6
    sooner = tuple(replace(c, every_s=max(60, c.every_s // 2)) for c in problem.commands)
    assert points(replace(problem, commands=sooner)) >= points(problem) - 1e-6


@pytest.mark.parametrize("seed", SEEDS)
def test_a_forbidden_window_never_helps_in_the_first_tier_that_changes(seed: int) -> None:
    problem = ordered_problem(seed)
    free = find_plan(problem, EXACT)
    mine = np.flatnonzero(problem.options.window == seed % len(problem.windows))
    held = find_plan(replace(problem, needs=(*problem.needs, ForbiddenWindow(mine, "forbidden"))), EXACT)
    for before, after in zip(free.tiers, held.tiers, strict=True):
        worse = after.value - before.value if before.sense == "least" else before.value - after.value
        if abs(worse) > 1e-5 * max(1.0, abs(before.value)):
            assert worse > 0.0
            break


@pytest.mark.parametrize("seed", SEEDS)
def test_a_change_that_costs_more_never_leaves_more_value(seed: int) -> None:
    problem = random_problem(seed)
    values = [find_plan(replace(problem, extra_price=np.full(len(problem.options), price)), EXACT).value
              for price in (-5.0, 0.0, 5.0)]
    assert values[0] >= values[1] - 1e-6 >= values[2] - 2e-6


def test_what_is_off_changes_nothing() -> None:
    rows = [("Teasel-1", "Isvarde-A", 600, 1_800), ("Teasel-2", "Isvarde-A", 900, 2_100),
            ("Teasel-2", "Isvarde-B", 3_000, 4_200)]
    plain = make_plan(make_run(), make_windows(rows), [BOTH] * 3)
    off = {"tiers": "one_value", "change_cost": 500.0, "freeze_h": 5.0, "guarantee": (), "fairness": "off",
           "when_rules_conflict": "stop"}
    assert set(off) <= set(Policy.model_fields)
    same = make_plan(make_run(off, published=(), decisions=()), make_windows(rows), [BOTH] * 3)
    assert same.contacts.equals(plain.contacts)
    assert same.unused.equals(plain.unused)
    assert [tier.value for tier in same.result.tiers] == [tier.value for tier in plain.result.tiers]
    assert same.problem.needs == plain.problem.needs == ()
