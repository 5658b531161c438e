"""Independent parts of a network are found, and planned apart they give the whole."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from planning_cases import Judge, problem_of, random_problem, some_of

from passplan.planning.certificate import bound_of
from passplan.planning.parts import independent_parts
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits, Problem, RequestNeed
from passplan.planning.rules import all_terms
from passplan.planning.rules.terms import Wanted

MANY = 60


@pytest.fixture(autouse=True)
def _small_parts(monkeypatch: pytest.MonkeyPatch) -> None:
    """Parts of any size are planned apart."""
    monkeypatch.setattr("passplan.planning.parts._LEAST_OPTIONS", 1)


def two_networks(crossing: bool) -> Problem:
    """Two spacecraft, many windows each on an antenna of its own; ``crossing``: once on the same one."""
    rows: list[dict[str, Any]] = [
        {"spacecraft": k, "antenna": k, "start_s": t, "end_s": t + 120, "pieces": [(t, t + 120, 0.4)]}
        for k in (0, 1) for t in range(0, 300 * MANY, 300)]
    if crossing:
        rows.append({"spacecraft": 0, "antenna": 1, "start_s": 300, "end_s": 420, "pieces": [(300, 420, 2.0)]})
    two = {name: (value,) * 2 for name, value in (
        ("weight", 1.0), ("generation", 0.2), ("capacity", 500.0), ("start", 0.0))}
    return problem_of(rows, horizon_s=300 * MANY, prepare_s=(0, 0), release_s=(0, 0), **two)


def test_spacecraft_that_share_no_time_are_apart() -> None:
    problem = two_networks(crossing=False)
    parts = independent_parts(problem, all_terms(problem))
    assert [len(part.options) for part in parts] == [MANY, MANY]
    assert sorted(np.concatenate([part.options for part in parts]).tolist()) == list(range(2 * MANY))
    joined = two_networks(crossing=True)
    assert len(independent_parts(joined, all_terms(joined))) == 1


def test_a_request_that_both_could_meet_ties_them_together() -> None:
    problem = two_networks(crossing=False)
    terms = all_terms(problem)
    both = np.array([0, MANY])
    assert len(independent_parts(problem, replace(terms, wanted=(Wanted("ask", "any", both),)))) == 1


def test_the_parts_of_a_plan_add_up() -> None:
    problem = two_networks(crossing=False)
    result = find_plan(problem, Limits(gap=0.0))
    assert len(result.proofs) == 2
    apart = [find_plan(proof.part.problem, Limits(gap=0.0)) for proof in result.proofs]
    assert result.value == pytest.approx(sum(part.value for part in apart), rel=1e-9)
    assert result.bound == pytest.approx(sum(part.bound for part in apart), rel=1e-6)


@pytest.mark.parametrize("seed", some_of(range(20), 6))
def test_small_parts_planned_apart_are_as_good_as_the_whole(seed: int) -> None:
    problem = random_problem(seed)
    points, value = Judge(problem).best()
    result = find_plan(problem, Limits(gap=0.0))
    assert result.value == pytest.approx(value, rel=1e-6, abs=1e-6)
    assert sum(s.points for s in result.shortfalls) == pytest.approx(points, abs=1e-9)
    assert result.bound >= value - 1e-6 * abs(value) - 1e-6
    for proof in result.proofs:
        part = bound_of(proof.part.problem, proof.part.terms, proof.certificate)
        assert part == pytest.approx(proof.certificate.bound, rel=1e-5, abs=1e-5)


def test_requirements_of_nobody_are_counted_once() -> None:
    problem = two_networks(crossing=False)
    ask = RequestNeed("ask", "Lost-1", -1, frozenset({0}), "downlink", 0, 600, 60)
    result = find_plan(replace(problem, requests=(ask,)), Limits(gap=0.0))
    assert [s.name for s in result.shortfalls] == ["ask"]
    assert result.tiers[0].value == result.tiers[0].bound == 1.0
