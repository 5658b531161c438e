"""Several contacts at a time on one antenna: planned, proven against all plans, and re-checked."""

from __future__ import annotations

import random
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from planning_cases import Judge, problem_of, random_problem, some_of

from passplan.inputs.mounts import Mount
from passplan.inputs.run import Run
from passplan.planning.audit import audit_plan
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits, Problem
from passplan.planning.rules.antenna_time import antenna_time
from passplan.planning.rules.beams import beams
from passplan.planning.steps import plan_run

DOME = Mount(name="dome", kind="fixed", cone_deg=85.0)


def _with_beams(seed: int) -> Problem:
    """A random problem with one to three beams on each antenna, and no turns where there are several."""
    problem, rng = random_problem(seed), random.Random(seed)
    count = np.array([rng.choice([1, 2, 2, 3]) for _ in problem.antennas.names])
    moving = count[problem.options.antenna] == 1
    tight = problem.too_tight[moving[problem.too_tight[:, 0]]]
    return replace(problem, antennas=replace(problem.antennas, beams=count), too_tight=tight)


@pytest.mark.parametrize("block", some_of(range(4), 1))
def test_plans_with_beams_equal_the_best_of_all_plans(block: int) -> None:
    crowded = 0
    for seed in range(15 * block, 15 * block + 15):
        problem = _with_beams(seed)
        judge = Judge(problem)
        points, value = judge.best()
        result = find_plan(problem, Limits(gap=0.0))
        assert judge.kept(result.chosen), f"seed {seed}"
        assert sum(s.points for s in result.shortfalls) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert result.value == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        crowded += any(len(rows) for rows in beams(problem).rows)
    assert crowded >= 3


def test_each_beam_prepares_and_releases_for_itself() -> None:
    # Two beams: the third contact has to wait until one of them has been released and prepared again, 90 s.
    def served(third_start_s: int) -> int:
        spans = [(0, 600), (100, 700), (third_start_s, 1_200)]
        rows = [{"start_s": a, "end_s": b, "spacecraft": k, "pieces": [(a, b, 1.0)]} for k, (a, b) in enumerate(spans)]
        problem = problem_of(
            rows, weight=(1.0,) * 3, generation=(0.0,) * 3, capacity=(1e5,) * 3, start=(1e4,) * 3, prepare_s=(60,),
            release_s=(30,))
        two = replace(problem, antennas=replace(problem.antennas, beams=np.array([2])))
        assert antenna_time(two).lanes == ()
        return len(find_plan(two, Limits(gap=0.0)).chosen)

    assert (served(650), served(689), served(690)) == (2, 2, 3)


@given(
    spans=st.lists(st.tuples(st.integers(0, 40), st.integers(1, 12)), min_size=1, max_size=10),
    count=st.integers(2, 4),
)
@settings(max_examples=60, deadline=None)
def test_rows_hold_exactly_where_beams_can_be_dealt_out(spans: list[tuple[int, int]], count: int) -> None:
    rows = [{"start_s": 60 * a, "end_s": 60 * (a + n), "pieces": [(60 * a, 60 * (a + n), 1.0)]} for a, n in spans]
    problem = problem_of(rows, prepare_s=(60,), release_s=(60,))
    problem = replace(problem, antennas=replace(problem.antennas, beams=np.array([count])))
    free_s = [-1e9] * count
    enough = True
    for a, n in sorted(spans):
        beam = free_s.index(min(free_s))
        enough &= free_s[beam] <= 60 * a - 60
        free_s[beam] = 60 * (a + n) + 60
    # All of them together: a row forbids that exactly if some instant has too few beams.
    assert (sum(len(made) for made in beams(problem).rows) == 0) == enough


@pytest.fixture(scope="module")
def array_run(short_run: Run) -> Run:
    """The short run with an array of three beams instead of one dish."""
    antennas = {
        name: item.model_copy(update={"mount": "dome", "beams": 3, "price_per_minute": 0.0})
        if name == "Isvarde-A" else item
        for name, item in short_run.antennas.items()
    }
    return replace(short_run, antennas=antennas, mounts={**short_run.mounts, "dome": DOME})


def test_an_array_hears_several_at_a_time_and_the_audit_counts_them(array_run: Run) -> None:
    plan = plan_run(array_run)
    own = plan.contacts[plan.contacts["antenna"] == "Isvarde-A"]
    at_once = max(
        int(((own["start_utc"] <= start) & (start < own["end_utc"])).sum()) for start in own["start_utc"])
    assert 2 <= at_once <= 3

    def kinds(count: int, contacts: pd.DataFrame) -> set[str]:
        fewer = array_run.antennas["Isvarde-A"].model_copy(update={"beams": count})
        run = replace(array_run, antennas={**array_run.antennas, "Isvarde-A": fewer})
        return {fault.kind for fault in audit_plan(run, contacts, plan.segments, plan.summary)}

    assert kinds(3, plan.contacts) == set()
    assert kinds(1, plan.contacts) == {"antenna_overlap"}
    if at_once == 3:
        assert kinds(2, plan.contacts) == {"antenna_overlap"}
