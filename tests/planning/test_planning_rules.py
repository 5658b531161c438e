"""Rules speak in terms, and each kind of term is kept by occupancy, shortfalls and the result alike."""

from __future__ import annotations

import numpy as np
import pytest
from planning_cases import problem_of, random_problem

from passplan.planning.occupancy import Occupancy, first_conflict
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits, Problem
from passplan.planning.rules import RULES, all_terms
from passplan.planning.rules.antenna_time import antenna_time
from passplan.planning.rules.terms import Recurrence, Removal, Terms
from passplan.planning.shortfalls import find_shortfalls, least_points, overdue_spans

# The first search on a machine compiles its kernels, which takes a while where much else is running.
SEARCH = Limits(gap=0.0, exact_options=0, time_limit_s=300.0)

PASSES = [{"start_s": a, "end_s": a + 300, "pieces": [(a, a + 300, 1.0)]} for a in (0, 330, 500)]


def test_an_antenna_is_held_from_prepare_to_release() -> None:
    lane = antenna_time(problem_of(PASSES, prepare_s=(60,), release_s=(40,))).lanes[0]
    assert lane.start_s.tolist() == [-60, 270, 440]
    assert lane.end_s.tolist() == [340, 670, 840]


def test_occupancy_names_what_stands_in_the_way() -> None:
    problem = problem_of(PASSES)
    occupancy = Occupancy(all_terms(problem), 3)
    occupancy.add(0)
    assert not occupancy.fits(1)
    assert occupancy.fits(2)
    assert [(blocker.kind, blocker.option) for blocker in occupancy.blockers(1)] == [("antenna_busy", 0)]
    occupancy.remove(0)
    assert occupancy.fits(1)
    assert "breaks" in str(first_conflict(all_terms(problem), 3, [0, 1]))
    assert first_conflict(all_terms(problem), 3, [0, 2]) is None


@pytest.mark.parametrize("limits", [Limits(gap=0.0), SEARCH], ids=["exact", "search"])
def test_a_rule_of_ones_own_needs_no_other_change(limits: Limits) -> None:
    def no_first_pass(problem: Problem) -> Terms:
        return Terms(removals=(Removal(np.flatnonzero(problem.options.start_s == 0), "house_rule", "not at midnight"),))

    problem = problem_of(PASSES, start=(1e4,), capacity=(1e4,))
    assert find_plan(problem, limits).chosen == (0, 2)
    assert find_plan(problem, limits, rules=(*RULES, no_first_pass)).chosen in ((1,), (2,))


def test_overdue_time_is_what_no_chosen_contact_covers() -> None:
    need = Recurrence("craft", np.array([0, 1]), np.array([1_000, 5_000]), np.array([1_200, 5_300]), 2_000, 500, 9_000)
    assert overdue_spans(need, set()) == ((500, 9_000),)
    assert overdue_spans(need, {0}) == ((500, 1_000), (3_200, 9_000))
    assert overdue_spans(need, {0, 1}) == ((500, 1_000), (3_200, 5_000), (7_300, 9_000))
    terms = Terms(recurrences=(need,))
    assert least_points(terms) == pytest.approx((500 + 1_800 + 1_700) / 2_000)
    assert "collide" in find_shortfalls(terms, [0])[0].sentence


@pytest.mark.parametrize("seed", range(20))
def test_no_plan_has_fewer_points_than_the_least(seed: int) -> None:
    problem = random_problem(seed)
    result = find_plan(problem, Limits(gap=0.0))
    assert sum(s.points for s in result.shortfalls) >= least_points(all_terms(problem)) - 1e-9
