"""What the search does where there is much of everything: little at a time, looser ceilings, an eye on the clock."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from planning_cases import Judge, problem_of, random_problem, some_of

from passplan.planning.certificate import bound_of
from passplan.planning.clock import Clock
from passplan.planning.greedy import plan_greedily
from passplan.planning.maps import storage_maps
from passplan.planning.occupancy import first_conflict
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits, Problem
from passplan.planning.result import relative_gap
from passplan.planning.rules import all_terms
from passplan.planning.search import engine
from passplan.planning.search.bound import Sweep, Sweeper, limits_of
from passplan.planning.search.fleetarrays import FleetArrays, fleet_arrays
from passplan.planning.search.labels import make_work
from passplan.planning.value import account

pytestmark = pytest.mark.usefixtures("compiled")

SEARCH_ONLY = Limits(gap=0.0, exact_options=0, threads=1, time_limit_s=300.0)


def arrays_of(problem: Problem) -> FleetArrays:
    return fleet_arrays(problem, all_terms(problem), storage_maps(problem))


def swept(sweeper: Sweeper, arrays: FleetArrays, seed: int, slack: float = 0.0) -> Sweep:
    price = np.random.default_rng(seed).uniform(0.0, 30.0, len(limits_of(arrays)))
    for work in sweeper.work:
        work.slack[0] = slack
    found = sweeper(price, 100.0)
    assert found is not None
    return found


def days(count: int) -> Problem:
    """Three spacecraft with equal claims to two antennas, a contact for each every 50 minutes, for some days."""
    rows = [{"spacecraft": k % 3, "antenna": (k // 3) % 2, "start_s": 1_000 * k, "end_s": 1_000 * k + 2_400,
             "pieces": [(1_000 * k + 60, 1_000 * k + 2_400, 0.5 + k % 7 / 4)]} for k in range(80 * count)]
    return problem_of(
        rows, horizon_s=86_400 * count + 3_600, prepare_s=(300, 300), release_s=(0, 0), weight=(1.0, 2.0, 3.0),
        generation=(0.3,) * 3, capacity=(1_500.0,) * 3, start=(100.0,) * 3)


@pytest.mark.parametrize("block", some_of(range(20), 1))
def test_rebuilding_a_little_time_at_a_time_still_finds_the_best(block: int, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(engine, "_SPANS_S", (900, 300, None))
    limits = replace(SEARCH_ONLY, search_rounds=30)
    for seed in range(3_000 + 5 * block, 3_005 + 5 * block):
        problem = random_problem(seed)
        points, value = Judge(problem).best()
        result = find_plan(problem, limits)
        assert Judge(problem).points(frozenset(result.chosen)) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert result.value == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"


@pytest.mark.parametrize("seed", some_of(range(3_100, 3_160), 15))
def test_slack_loosens_ceilings_and_never_more_than_it_says(seed: int) -> None:
    arrays = arrays_of(random_problem(seed))
    exact, loose = (swept(Sweeper(arrays), arrays, seed, slack).worth for slack in (0.0, 5.0))
    assert np.all(loose >= exact - 1e-9)
    # Each start and each contact raises a label by the slack at most, once in either direction.
    assert np.all(loose <= exact + 5.0 * 2 * (2 * np.diff(arrays.first) + 1) + 1e-9)


@pytest.mark.parametrize("seed", some_of(range(3_200, 3_230), 8))
def test_labels_that_find_no_room_make_a_looser_ceiling_not_none(seed: int) -> None:
    arrays = arrays_of(random_problem(seed))
    sweeper, cramped = Sweeper(arrays), Sweeper(arrays)
    cramped.work = [make_work(8)]
    found, exact = swept(cramped, arrays, seed), swept(sweeper, arrays, seed)
    assert np.all(found.worth >= exact.worth - 1e-9)


def test_a_sweep_ends_when_time_is_up() -> None:
    arrays = arrays_of(random_problem(3))
    price = np.zeros(len(limits_of(arrays)))
    clock = Clock(60.0)
    assert Sweeper(arrays, clock=clock)(price, 0.0) is not None
    clock.stop()
    assert Sweeper(arrays, clock=clock)(price, 0.0) is None


def test_some_days_are_planned_well_and_the_bound_over_all_of_them_is_proved() -> None:
    problem = days(4)
    terms = all_terms(problem)
    limits = Limits(gap=0.005, exact_options=0, threads=1, time_limit_s=300.0, search_rounds=60)
    result = find_plan(problem, limits)
    assert first_conflict(terms, len(problem.options), result.chosen) is None
    greedy = account(problem, plan_greedily(problem, terms, Clock(60.0))).value
    assert greedy < result.value <= result.bound
    assert relative_gap(result.value, result.bound) < 0.02
    proved = sum(bound_of(proof.part.problem, proof.part.terms, proof.certificate) for proof in result.proofs)
    assert result.value - 1e-6 <= proved <= result.bound + 1e-6 * abs(result.bound)
