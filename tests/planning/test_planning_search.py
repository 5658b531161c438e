"""The search and its bound, on problems small enough to know the answer of."""

from __future__ import annotations

import numpy as np
import pytest
from planning_cases import Judge, problem_of, random_problem

from passplan.planning.clock import Clock
from passplan.planning.greedy import plan_greedily
from passplan.planning.maps import storage_maps
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits, Problem
from passplan.planning.rules import all_terms
from passplan.planning.rules.terms import Lane, Terms, Wanted
from passplan.planning.search.bound import ceiling
from passplan.planning.search.engine import Found, search_plan
from passplan.planning.search.fleetarrays import NotForSearchError, fleet_arrays

SEARCH_ONLY = Limits(gap=0.0, exact_options=0, threads=1, time_limit_s=300.0)


def searched(problem: Problem, limits: Limits = SEARCH_ONLY) -> Found:
    terms, maps = all_terms(problem), storage_maps(problem)
    start = plan_greedily(problem, terms, Clock(60.0))
    found = search_plan(problem, terms, maps, limits, Clock(60.0), start)
    assert found is not None
    return found


@pytest.mark.parametrize("block", range(6))
def test_finds_the_best_of_all_plans_and_never_bounds_below_it(block: int) -> None:
    for seed in range(500 + 20 * block, 520 + 20 * block):
        problem = random_problem(seed)
        judge = Judge(problem)
        points, value = judge.best()
        result = find_plan(problem, SEARCH_ONLY)
        chosen = frozenset(result.chosen)
        assert all(judge.compatible(a, b) for a in chosen for b in chosen if a < b), f"seed {seed}"
        assert judge.points(chosen) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert judge.value(chosen) == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        assert result.bound >= value - 1e-6 * abs(value) - 1e-6, f"seed {seed}"


@pytest.mark.parametrize("seed", range(700, 720))
def test_the_certificate_proves_the_bound_again(seed: int) -> None:
    problem = random_problem(seed, needs=False)
    if len(problem.options) == 0:
        return
    found = searched(problem)
    arrays = fleet_arrays(problem, all_terms(problem), storage_maps(problem))
    assert ceiling(arrays, found.clique_price, found.point_worth, 0.0) == pytest.approx(found.bound, rel=1e-9)
    # Any prices at all prove some bound.
    prices = np.random.default_rng(seed).uniform(0.0, 30.0, arrays.cliques)
    assert ceiling(arrays, prices, 0.0, 0.0) >= Judge(problem).best()[1] - 1e-6


def test_threads_change_nothing() -> None:
    problem = random_problem(44)
    one, two, three = (searched(problem, Limits(gap=0.0, threads=n)) for n in (1, 2, 3))
    assert one.chosen == two.chosen == three.chosen
    assert one.bound == pytest.approx(two.bound, rel=1e-12) == pytest.approx(three.bound, rel=1e-12)


def test_two_parts_of_one_window_need_setup_between_them() -> None:
    # Apart by less than the 60 s that the antenna needs: only one of them, or the first and the far one.
    rows = [{"window": 0, "start_s": a, "end_s": b, "pieces": [(a, b, 1.0)]}
            for a, b in ((0, 300), (330, 600), (360, 600))]
    problem = problem_of(rows, start=(1e4,), capacity=(1e4,))
    assert searched(problem).chosen == (0, 2)


def test_without_time_there_is_no_plan_but_the_greedy_one() -> None:
    problem = random_problem(3)
    result = find_plan(problem, Limits(gap=0.0, time_limit_s=1e-9, exact_options=0))
    assert result.path == "greedy"
    assert result.bound >= result.value


def test_terms_that_the_search_cannot_keep_are_refused() -> None:
    rows = [{"spacecraft": k, "start_s": 0, "end_s": 60, "pieces": [(0, 60, 1.0)]} for k in (0, 1)]
    problem = problem_of(rows, weight=(1.0, 1.0), generation=(0.0, 0.0), capacity=(9.0, 9.0), start=(9.0, 9.0))
    maps, both = storage_maps(problem), np.array([0, 1])
    with pytest.raises(NotForSearchError, match="several spacecraft"):
        fleet_arrays(problem, Terms(wanted=(Wanted("ask", "any", both),)), maps)
    wide = Lane("own", "spacecraft_busy", both[:1], np.array([-30]), np.array([60]), owner=0)
    with pytest.raises(NotForSearchError, match="holds more"):
        fleet_arrays(problem, Terms(lanes=(wide,)), maps)
