"""The search and its bound, on problems small enough to know the answer of."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from planning_cases import Judge, problem_of, random_problem, some_of

from passplan.planning.certificate import bound_of
from passplan.planning.clock import Clock
from passplan.planning.greedy import plan_greedily
from passplan.planning.maps import storage_maps
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits, Problem
from passplan.planning.rules import RULES, all_terms
from passplan.planning.rules.rows import rows_of
from passplan.planning.rules.terms import Lane, Rows, Terms, Wanted
from passplan.planning.search.engine import Found, search_plan
from passplan.planning.search.fleetarrays import fleet_arrays
from passplan.planning.shortfalls import find_shortfalls, total_points

pytestmark = pytest.mark.usefixtures("compiled")

# Rounds, not seconds: where a bound does not close by itself, the search would go on to the end of its time.
SEARCH_ONLY = Limits(gap=0.0, exact_options=0, threads=1, time_limit_s=300.0, search_rounds=20)


def searched(problem: Problem, limits: Limits = SEARCH_ONLY, terms: Terms | None = None) -> Found:
    terms = all_terms(problem) if terms is None else terms
    start = plan_greedily(problem, terms, Clock(60.0))
    arrays = fleet_arrays(problem, terms, storage_maps(problem))
    points = total_points(find_shortfalls(terms, start))
    return search_plan(arrays, terms, limits, Clock(60.0), start, points)


def with_rows(problem: Problem, seed: int) -> Terms:
    """The terms of a problem and some linear limits at random, within and across spacecraft."""
    rng = np.random.default_rng(seed)
    count, rows = len(problem.options), []
    for k in range(int(rng.integers(1, 4))):
        mine = np.flatnonzero(rng.random(count) < 0.7)
        amounts = rng.integers(1, 4, len(mine)).astype(float)
        rows.append((f"budget {k}", mine, amounts, float(rng.integers(1, 6))))
    return all_terms(problem) + Terms(rows=(rows_of("budget", rows),))


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


@pytest.mark.parametrize("seed", some_of(range(700, 750), 20))
def test_the_certificate_proves_the_bound_again(seed: int) -> None:
    problem = random_problem(seed)
    if len(problem.options) == 0:
        return
    terms = with_rows(problem, seed)
    found = searched(problem, terms=terms)
    assert bound_of(problem, terms, found.certificate) == pytest.approx(found.bound, rel=1e-9, abs=1e-6)


@pytest.mark.parametrize("seed", some_of(range(750, 760), 3))
def test_any_prices_prove_some_bound(seed: int) -> None:
    problem = random_problem(seed, needs=False)
    if len(problem.options) == 0:
        return
    terms = all_terms(problem)
    certificate = searched(problem).certificate
    price = np.random.default_rng(seed).uniform(0.0, 30.0, len(certificate.price))
    certificate = replace(certificate, price=price, point_price=0.0)
    assert bound_of(problem, terms, certificate) >= Judge(problem).best()[1] - 1e-6
    with pytest.raises(ValueError, match="negative"):
        bound_of(problem, terms, replace(certificate, price=price - 40.0))


def test_threads_change_nothing() -> None:
    problem = random_problem(44)
    one, two = (searched(problem, Limits(gap=0.0, threads=n)) for n in (1, 2))
    assert one.chosen == two.chosen
    assert one.bound == pytest.approx(two.bound, rel=1e-12)


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


def test_what_the_search_cannot_count_is_left_as_it_is() -> None:
    # Both spacecraft could meet the request; the greedy plan meets it, and the search may not lose that again.
    rows = [{"spacecraft": 0, "start_s": 0, "end_s": 60, "pieces": [(0, 60, 0.1)]},
            {"spacecraft": 1, "start_s": 0, "end_s": 120, "pieces": [(0, 120, 1.0)]},
            {"spacecraft": 1, "start_s": 300, "end_s": 360, "pieces": [(300, 360, 1.0)]}]
    two = {"weight": (1.0, 1.0), "generation": (0.0, 0.0), "capacity": (90.0, 90.0), "start": (90.0, 90.0)}
    problem = problem_of(rows, **two)

    def asks(_: Problem) -> Terms:
        return Terms(wanted=(Wanted("ask", "any", np.array([0, 2])),))

    result = find_plan(problem, SEARCH_ONLY, rules=(*RULES, asks))
    assert result.shortfalls == ()
    assert result.path in ("search", "greedy")
    assert set(result.chosen) & {0, 2}
    assert result.bound >= result.value


@pytest.mark.parametrize("cool_s", [0, 60, 240])
def test_a_spacecraft_may_need_time_after_a_contact(cool_s: int) -> None:
    # Three antennas, so that only the spacecraft's own lane, held for longer than its contacts, keeps them apart.
    for seed in range(30):
        problem = random_problem(900 + seed, needs=False)

        def cooling(problem: Problem) -> Terms:
            options = problem.options
            lanes = [Lane(name, "spacecraft_busy", mine, options.start_s[mine], options.end_s[mine] + cool_s, owner=k)
                     for k, name in enumerate(problem.fleet.names)
                     for mine in [np.flatnonzero(options.spacecraft == k)]]
            return Terms(lanes=tuple(lanes))

        exact = find_plan(problem, Limits(gap=0.0), rules=(*RULES, cooling))
        by_search = find_plan(problem, SEARCH_ONLY, rules=(*RULES, cooling))
        assert by_search.value == pytest.approx(exact.value, rel=1e-6, abs=1e-6), f"seed {seed}"
        assert by_search.bound >= exact.value - 1e-6 * abs(exact.value) - 1e-6, f"seed {seed}"


def test_rows_are_kept_by_the_search_as_enumeration_has_it() -> None:
    for seed in range(800, 860):
        problem = random_problem(seed, needs=seed % 2 == 0, windows=8)
        if len(problem.options) == 0:
            continue
        extra = with_rows(problem, seed).rows

        def budget(_: Problem, extra: tuple[Rows, ...] = extra) -> Terms:
            return Terms(rows=extra)

        judge = Judge(problem)

        def kept(chosen: frozenset[int], extra: tuple[Rows, ...] = extra) -> bool:
            return all(
                rows.amounts[x:y][np.isin(rows.options[x:y], list(chosen))].sum() <= limit + 1e-9
                for rows in extra for x, y, limit in zip(rows.offset[:-1], rows.offset[1:], rows.limit, strict=True))

        best = max(((-judge.points(c), judge.value(c)) for c in judge.plans() if kept(c)),
                   key=lambda pair: (round(pair[0], 9), pair[1]))
        result = find_plan(problem, SEARCH_ONLY, rules=(*RULES, budget))
        chosen = frozenset(result.chosen)
        assert kept(chosen), f"seed {seed}"
        assert judge.points(chosen) == pytest.approx(-best[0], abs=1e-9), f"seed {seed}"
        assert judge.value(chosen) == pytest.approx(best[1], rel=1e-6, abs=1e-6), f"seed {seed}"
        assert result.bound >= best[1] - 1e-6 * abs(best[1]) - 1e-6, f"seed {seed}"
