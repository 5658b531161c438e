"""What several contacts owe together, and what the fewest points force: in the search and in its bound."""

from __future__ import annotations

import pytest
from need_cases import NeedJudge, needy_problem
from planning_cases import some_of

from passplan.planning.certificate import bound_of
from passplan.planning.clock import Clock
from passplan.planning.greedy import plan_greedily
from passplan.planning.maps import storage_maps
from passplan.planning.problem import Limits
from passplan.planning.rules import all_terms
from passplan.planning.search.engine import search_plan
from passplan.planning.search.fleetarrays import fleet_arrays
from passplan.planning.search.forced import ruled_out
from passplan.planning.shortfalls import find_shortfalls, total_points

pytestmark = pytest.mark.usefixtures("compiled")

FEW = Limits(gap=0.0, threads=1, search_rounds=25)


@pytest.mark.parametrize("seed", some_of(range(1_500, 1_560), 12))
def test_the_search_counts_guarantees_and_its_bound_and_proof_hold(seed: int) -> None:
    problem = needy_problem(seed)
    terms, maps, judge = all_terms(problem), storage_maps(problem), NeedJudge(problem)
    start = plan_greedily(problem, terms, Clock(60.0))
    points = total_points(find_shortfalls(terms, start))
    found = search_plan(fleet_arrays(problem, terms, maps), terms, FEW, Clock(60.0), start, points)
    left = total_points(find_shortfalls(terms, found.chosen))
    assert left <= points + 1e-9
    assert left == pytest.approx(judge.points(frozenset(found.chosen)), abs=1e-9)
    best = max(judge.value(chosen) for chosen in judge.plans() if judge.points(chosen) <= left + 1e-9)
    assert found.bound + problem.base_worth >= best - 1e-6 * max(1.0, abs(best))
    if not any(r.request for r in terms.recurrences):
        assert found.certificate is not None
        # A thousand points at a high price cancel out: what is left is as exact as their sums, some ulps of them.
        sums = found.certificate.point_price * found.certificate.points
        assert bound_of(problem, terms, found.certificate) == pytest.approx(
            found.bound + problem.base_worth, rel=1e-9, abs=1e-6 + 1e-15 * sums)


@pytest.mark.parametrize("seed", some_of(range(1_600, 1_660), 12))
def test_what_is_ruled_out_is_in_no_plan_with_as_few_points(seed: int) -> None:
    problem = needy_problem(seed)
    terms, judge = all_terms(problem), NeedJudge(problem)
    plans = [(judge.points(chosen), chosen) for chosen in judge.plans()]
    fewest = min(points for points, _ in plans)
    arrays = fleet_arrays(problem, terms, storage_maps(problem))
    if not len(arrays.option):
        return
    out = set(ruled_out(arrays, fewest).options.tolist())
    for points, chosen in plans:
        if points <= fewest + 1e-9:
            assert not out & chosen


def test_something_is_ruled_out_in_some_of_those_cases() -> None:
    count = 0
    for seed in range(1_600, 1_640):
        problem = needy_problem(seed)
        terms = all_terms(problem)
        arrays = fleet_arrays(problem, terms, storage_maps(problem))
        points = total_points(find_shortfalls(terms, plan_greedily(problem, terms, Clock(60.0))))
        count += len(ruled_out(arrays, points).options) if len(arrays.option) else 0
    assert count > 0
