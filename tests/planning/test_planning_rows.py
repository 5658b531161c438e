"""Linear limits: made, kept, explained, and optimal as enumeration has it."""

from __future__ import annotations

import random

import numpy as np
import pytest
from planning_cases import Judge, problem_of, random_problem, some_of

from passplan.planning.occupancy import Occupancy, first_conflict
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits, Problem
from passplan.planning.rules import RULES
from passplan.planning.rules.rows import at_the_same_time, rows_of
from passplan.planning.rules.terms import Rows, Terms


def test_rows_that_cannot_bind_are_left_out() -> None:
    rows = rows_of("budget", [("loose", [0, 1], [1.0, 1.0], 2.0), ("tight", [0, 2], [1.0, 3.0], 3.5)])
    assert rows.names == ("tight",)
    assert rows.options.tolist() == [0, 2]
    assert rows.offset.tolist() == [0, 2]


def test_two_at_a_time_is_one_row_where_three_overlap() -> None:
    start_s, end_s = np.array([0, 100, 200, 500]), np.array([300, 400, 600, 700])
    rows = at_the_same_time("beams", "dish", np.arange(4), start_s, end_s, 2.0)
    assert len(rows) == 1
    assert rows.options.tolist() == [0, 1, 2]
    heavy = at_the_same_time("rate", "line", np.arange(4), start_s, end_s, 4.0, np.array([1.0, 1.0, 3.0, 2.0]))
    assert [heavy.options[a:b].tolist() for a, b in zip(heavy.offset[:-1], heavy.offset[1:], strict=True)] == [
        [0, 1, 2], [2, 3]]


def test_occupancy_counts_loads_and_names_who_uses_them() -> None:
    rows = rows_of("budget", [("minutes of the day", [0, 1, 2], [5.0, 4.0, 3.0], 8.0), ("too big", [3], [9.0], 8.0)])
    occupancy = Occupancy(Terms(rows=(rows,)), 4)
    occupancy.add(0)
    assert not occupancy.fits(1)
    assert occupancy.fits(2)
    assert [tuple(b) for b in occupancy.blockers(1)] == [("budget", "minutes of the day", 0)]
    assert [tuple(b) for b in occupancy.blockers(3)] == [("budget", "too big", 3)]
    occupancy.remove(0)
    assert occupancy.fits(1)
    assert "minutes of the day" in str(first_conflict(Terms(rows=(rows,)), 4, [0, 1]))


def test_negative_amounts_are_refused() -> None:
    with pytest.raises(ValueError, match="negative"):
        Rows("budget", ("x",), np.array([0, 1]), np.array([0]), np.array([-1.0]), np.array([1.0]))


def random_limits(problem: Problem, seed: int) -> list[tuple[list[int], list[float], float]]:
    """One to three rows over some of the options, by turns loose and tight."""
    rng = random.Random(seed)
    rows = []
    for _ in range(rng.randint(1, 3)):
        some = sorted(rng.sample(range(len(problem.options)), rng.randint(1, len(problem.options))))
        amounts = [rng.choice([0.5, 1.0, 2.0]) for _ in some]
        rows.append((some, amounts, rng.choice([0.0, 0.3, 0.6]) * sum(amounts)))
    return rows


@pytest.mark.parametrize("block", some_of(range(4), 1))
def test_plans_under_linear_limits_equal_the_best_of_all_plans(block: int) -> None:
    for seed in range(15 * block, 15 * block + 15):
        problem = random_problem(seed)
        limits = random_limits(problem, seed)

        def house(_: Problem, limits: list[tuple[list[int], list[float], float]] = limits) -> Terms:
            return Terms(rows=(rows_of("house", [("limit", *row) for row in limits]),))

        judge = Judge(problem, limits)
        points, value = judge.best()
        result = find_plan(problem, Limits(gap=0.0), rules=(*RULES, house))
        assert judge.kept(frozenset(result.chosen)), f"seed {seed}"
        assert sum(s.points for s in result.shortfalls) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert result.value == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        assert result.bound >= result.value


def test_two_beams_serve_two_of_three() -> None:
    passes = [{"start_s": 0, "end_s": 600, "spacecraft": k, "pieces": [(0, 600, 1.0)]} for k in range(3)]
    problem = problem_of(passes, weight=(1.0, 2.0, 3.0), generation=(0.0,) * 3, capacity=(1e4,) * 3, start=(1e3,) * 3)

    def two_beams(p: Problem) -> Terms:
        o = p.options
        return Terms(rows=(at_the_same_time("antenna_busy", "dish", np.arange(len(o)), o.start_s, o.end_s, 2.0),))

    assert find_plan(problem, Limits(gap=0.0), rules=(two_beams,)).chosen == (1, 2)
