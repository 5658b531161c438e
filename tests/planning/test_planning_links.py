"""Spacecraft in several contacts at once: planned, proven against all plans, and their data counted once."""

from __future__ import annotations

import random
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from craft_cases import CraftJudge, random_craft_problem
from data_cases import DataJudge, random_ageing_problem, random_data_problem
from hypothesis import given, settings
from hypothesis import strategies as st
from link_cases import NoiseJudge, with_links
from need_cases import ordered_problem
from planning_cases import Judge, problem_of, random_problem, some_of
from planning_runs import DOWN, UP, make_run, make_windows

from passplan.planning.backlog import follow
from passplan.planning.joint_sending import joint_sending
from passplan.planning.lost_value import Chance, missed_links
from passplan.planning.maps import storage_maps, worth_of
from passplan.planning.plan import Plan, make_plan
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Conflict, Crowd, Limits, Problem
from passplan.planning.rules import all_terms
from passplan.planning.rules.rows import rows_of
from passplan.planning.rules.spacecraft_time import spacecraft_time
from passplan.planning.rules.terms import AtLeast, Terms, Wanted
from passplan.planning.several_links import around, without
from passplan.planning.value import account

PIECES = st.lists(
    st.tuples(st.integers(0, 30), st.integers(1, 12), st.sampled_from([0.0, 0.5, 1.0, 3.0])), max_size=6)


def at_once(problem: Problem, chosen: tuple[int, ...]) -> bool:
    """Whether two chosen contacts of one spacecraft overlap."""
    o = problem.options
    return any(o.spacecraft[a] == o.spacecraft[b] and o.start_s[a] < o.end_s[b] and o.start_s[b] < o.end_s[a]
               for a in chosen for b in chosen if a < b)


@pytest.mark.parametrize("block", some_of(range(25), 1))
def test_plans_with_links_equal_the_best_of_all_plans(block: int) -> None:
    doubled = 0
    for seed in range(8 * block, 8 * block + 8):
        problem = with_links(random_craft_problem(seed) if seed % 2 else random_problem(seed), seed)
        judge = (CraftJudge if seed % 2 else Judge)(problem)
        points, value = judge.best()
        result = find_plan(problem, Limits(gap=0.0))
        chosen = frozenset(result.chosen)
        assert judge.kept(chosen) and all(judge.compatible(a, b) for a in chosen for b in chosen if a < b), seed
        assert sum(s.points for s in result.shortfalls) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert judge.value(chosen) == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        assert result.value == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        assert result.bound >= result.value
        doubled += at_once(problem, result.chosen)
    assert doubled or block


@pytest.mark.parametrize("block", some_of(range(4), 1))
def test_classes_sent_over_several_links_equal_the_best_of_all_plans(block: int) -> None:
    for seed in range(8 * block, 8 * block + 8):
        problem = with_links(random_data_problem(seed), seed)
        points, value = DataJudge(problem).best()
        result = find_plan(problem, Limits(gap=0.0))
        assert sum(s.points for s in result.shortfalls) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert result.value == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"


@pytest.mark.parametrize("block", some_of(range(8), 1))
def test_ageing_data_sent_over_several_links_equals_the_best_of_all_plans(block: int) -> None:
    for seed in range(3 * block + 4, 3 * block + 7):
        problem = with_links(random_ageing_problem(seed), seed)
        judge = Judge(problem)
        best = max((-round(judge.points(plan), 9), account(problem, plan).value) for plan in judge.plans())
        result = find_plan(problem, Limits(gap=0.0))
        assert -sum(s.points for s in result.shortfalls) == pytest.approx(best[0], abs=1e-9), f"seed {seed}"
        assert result.value == pytest.approx(best[1], rel=1e-6, abs=1e-6), f"seed {seed}"
        assert result.bound >= result.value - 1e-6


def noisy_problem(seed: int) -> Problem:
    """Three spacecraft on three antennas; two of them have two links, and disturb those that are heard beside them."""
    rng = random.Random(f"noise {seed}")
    rows = []
    for _ in range(9):
        craft, a = rng.randrange(3), rng.randrange(12)
        b = a + rng.randint(2, 8)
        rows.append({
            "spacecraft": craft, "antenna": craft if rng.random() < 0.5 else rng.randrange(3), "start_s": 60 * a,
            "end_s": 60 * b, "pieces": [(60 * a, 60 * b, rng.choice([0.5, 1.0]))]})
    problem = problem_of(
        rows, horizon_s=1_200, weight=(1.0, 2.0, 1.5), generation=(0.1,) * 3, capacity=(1e4,) * 3, start=(1e3,) * 3,
        prepare_s=(0, 60, 0), release_s=(0,) * 3)
    crowd = Crowd("crowd", 0, 0, (1, 2), (0.9, 0.9), 60 * rng.randrange(5), 60 * rng.randint(8, 20))
    return replace(
        problem, fleet=replace(problem.fleet, links=np.array([1, 2, 2])), crowds=(crowd,),
        conflicts=(Conflict("pair", 1, 1, 2, 60 * rng.randrange(5), 60 * rng.randint(8, 20)),))


@pytest.mark.parametrize("block", some_of(range(6), 1))
def test_interference_with_several_links_equals_the_best_of_all_plans(block: int) -> None:
    """A conflict keeps all contacts of the other out; in a crowd each contact has its part of the share."""
    bound = 0
    for seed in range(15 * block, 15 * block + 15):
        problem = noisy_problem(seed)
        judge = NoiseJudge(problem)
        _, value = judge.best()
        result = find_plan(problem, Limits(gap=0.0))
        assert judge.kept(result.chosen), f"seed {seed}"
        assert result.value == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        bound += result.value < find_plan(replace(problem, conflicts=(), crowds=()), Limits(gap=0.0)).value - 1e-6
    assert bound >= 4


@pytest.mark.parametrize("seed", some_of(range(60), 6))
@pytest.mark.parametrize("of", [random_problem, ordered_problem])
def test_the_search_plans_others_beside_them_and_its_bounds_hold(seed: int, of: Callable[[int], Problem]) -> None:
    problem = with_links(of(seed), seed)
    two = np.where(np.arange(len(problem.fleet)) == 0, 2, 1)
    problem = replace(problem, fleet=replace(problem.fleet, links=two))
    exact = find_plan(problem, Limits(gap=0.0))
    found = find_plan(problem, Limits(gap=0.0, exact_options=0, time_limit_s=300.0, search_rounds=40))
    for best, tier in zip(exact.tiers, found.tiers, strict=True):
        sign = 1.0 if tier.sense == "most" else -1.0
        slack = 1e-6 * (1.0 + abs(best.value))
        assert sign * tier.bound >= sign * best.value - slack, tier.name
        if abs(best.value - tier.value) > slack:
            # What comes later is of other plans.
            assert sign * tier.value < sign * best.value
            break


@pytest.mark.parametrize("seed", some_of(range(40), 10))
def test_another_link_never_makes_a_plan_worse(seed: int) -> None:
    problem = with_links(random_problem(seed), seed)
    fewer = replace(problem, fleet=replace(problem.fleet, links=np.maximum(problem.fleet.links - 1, 1)))
    (points, value), (more_points, less_value) = (
        (sum(s.points for s in plan.shortfalls), plan.value)
        for plan in (find_plan(one, Limits(gap=0.0)) for one in (problem, fewer)))
    assert points <= more_points + 1e-9
    assert points < more_points - 1e-9 or value >= less_value - 1e-6 * (1.0 + abs(value))


def test_what_others_hold_is_taken_off_and_what_they_meet_is_met() -> None:
    rows = [{"spacecraft": k, "start_s": a, "end_s": a + 300, "pieces": [(a, a + 300, 1.0)]}
            for k, a in ((0, 0), (1, 200), (1, 600))]
    fleet = {"weight": (1.0,) * 2, "generation": (0.0,) * 2, "capacity": (1e4,) * 2, "start": (1e3,) * 2}
    problem = problem_of(rows, **fleet)
    problem = replace(problem, fleet=replace(problem.fleet, links=np.array([2, 1])))
    every = np.arange(3)
    terms = all_terms(problem) + Terms(
        rows=(rows_of("budget", [("money", every, [5.0, 4.0, 3.0], 8.0)]),),
        wanted=(Wanted("any", "any", every),), guarantees=(AtLeast("daily", "x", "MB", every, np.full(3, 3.0), 6.0),))
    view = around(problem, terms, [0])
    assert (view.part.options.tolist(), view.fixed, view.whole([1])) == ([1, 2], (0,), (0, 2))
    budget, stuck = (rows for rows in view.part.terms.rows if len(rows))
    assert (budget.limit.tolist(), budget.amounts.tolist()) == ([8.0], [4.0, 3.0])
    # The second contact exceeds the budget beside the first; of its own row nothing is left.
    assert (stuck.options.tolist(), stuck.limit.tolist(), view.used.tolist()) == ([0], [1.0], [5.0, 1.0])
    assert view.part.terms.wanted == ()
    assert [(g.need, g.amounts.tolist()) for g in view.part.terms.guarantees] == [(6.0, [3.0, 3.0])]
    assert (view.given.tolist(), view.shared.tolist()) == ([0.5], [True])
    alone = without(problem, terms)
    assert [rows.limit.tolist() for rows in alone.terms.rows if rows.kind == "budget"] == [[8.0]]
    assert alone.terms.wanted == () and alone.terms.guarantees == ()


def two_at_once(**rest: object) -> Problem:
    """One spacecraft with 100 MB, on two antennas for 100 s at once, at 0.6 and 0.4 MB/s."""
    rows = [{"antenna": k, "start_s": 0, "end_s": 100, "pieces": [(0, 100, rate)]} for k, rate in ((0, 0.6), (1, 0.4))]
    problem = problem_of(rows, horizon_s=200, prepare_s=(0, 0), release_s=(0, 0), **{"start": (100.0,), **rest})
    return replace(problem, fleet=replace(problem.fleet, links=np.array([2])))


def test_two_contacts_empty_one_storage_together() -> None:
    both = account(two_at_once(), [0, 1])
    assert both.delivered_mb == pytest.approx([100.0])
    assert both.contact_mb == pytest.approx([60.0, 40.0])
    # Half as much aboard: both run dry at 50 s, and what there was has been divided as their rates are.
    half = account(two_at_once(start=(50.0,)), [0, 1])
    assert half.delivered_mb == pytest.approx([50.0])
    assert half.contact_mb == pytest.approx([30.0, 20.0])
    problem = two_at_once(start=(50.0,))
    assert worth_of(problem, storage_maps(problem), 0, [0, 1]) == pytest.approx(50.0)
    with pytest.raises(ValueError, match="overlaps the piece before it"):
        account(replace(problem, fleet=replace(problem.fleet, links=np.array([1]))), [0, 1])


def test_one_link_is_the_default() -> None:
    problem = two_at_once()
    single = replace(problem, fleet=replace(problem.fleet, links=np.zeros(0, dtype=np.int64)))
    assert single.fleet.links.tolist() == [1]
    terms = spacecraft_time(single)
    assert len(terms.lanes) == 1 and terms.rows == ()
    assert find_plan(single, Limits(gap=0.0)).chosen == (0,)
    assert find_plan(problem, Limits(gap=0.0)).chosen == (0, 1)


def test_a_spacecraft_has_one_contact_at_a_time_on_one_antenna() -> None:
    problem = two_at_once()
    options = replace(problem.options, antenna=np.array([0, 0]))
    together = replace(problem, options=options, antennas=replace(problem.antennas, beams=np.array([2, 1])))
    assert find_plan(together, Limits(gap=0.0)).chosen == (0,)


@given(PIECES)
@settings(max_examples=80, deadline=None)
def test_joint_sending_adds_rates_and_loses_nothing(given_pieces: list[tuple[int, int, float]]) -> None:
    pieces = [(float(a), float(a + n), rate) for a, n, rate in given_pieces]
    joint = joint_sending(pieces)
    assert all(before[1] <= after[0] for before, after in zip(joint.pieces, joint.pieces[1:], strict=False))
    for second in range(45):
        rate = sum(r for a, b, r in joint.pieces if a <= second < b)
        assert rate == pytest.approx(sum(r for a, b, r in pieces if a <= second < b))
    assert all(sum(share for _, share in shares) == pytest.approx(1.0) for shares in joint.shares)
    sent = joint.dealt_out(np.array([(b - a) * r for a, b, r in joint.pieces]))
    assert sent == pytest.approx([(b - a) * r for a, b, r in pieces])


def test_pieces_that_lie_apart_stay_as_they_are() -> None:
    pieces = [(0.0, 10.0, 1.0), (10.0, 20.0, 2.0), (25.0, 30.0, 0.1)]
    joint = joint_sending(pieces)
    assert joint.pieces == pieces
    assert joint.shares == [[(0, 1.0)], [(1, 1.0)], [(2, 1.0)]]


def test_a_gap_is_kept_on_each_link() -> None:
    passes = [("Teasel-1", "Isvarde-A", 600, 1_200), ("Teasel-1", "Isvarde-B", 700, 1_300),
              ("Teasel-1", "Isvarde-A", 1_400, 2_000)]

    def served(gap_s: float) -> int:
        run = make_run({"cut_grid_s": 0, "options_per_window": 1}, craft={
            "storage_mb": 9e4, "start_fill_mb": 8e4, "links": 2, "contact_gap_s": gap_s})
        return len(make_plan(run, make_windows(passes), [DOWN] * 3).contacts)

    # The link that was free first has rested for 200 s.
    assert (served(200.0), served(201.0)) == (3, 2)


def planned(links: int, *ends: object) -> Plan:
    run = make_run({"cut_grid_s": 0, "options_per_window": 1, "command_every_h": 1.0}, craft={
        "storage_mb": 9e4, "start_fill_mb": 8e4, "links": links})
    windows = make_windows([("Teasel-1", "Isvarde-A", 600, 1_200), ("Teasel-1", "Isvarde-B", 700, 1_300)])
    return make_plan(run, windows, list(ends))


def test_what_stands_in_the_way_is_said() -> None:
    assert len(planned(2, DOWN, DOWN).contacts) == 2
    assert set(planned(1, DOWN, DOWN).unused["reason"]) == {"spacecraft_busy"}
    assert len(planned(2, DOWN, UP).contacts) == 2


def test_the_backlog_of_the_report_adds_both_up() -> None:
    store = follow(100.0, 0.0, 200.0, [(0.0, 100.0, 0.6), (0.0, 50.0, 0.4)], 200.0)
    assert store.at(np.array([50.0, 100.0, 150.0])) == pytest.approx([50.0, 20.0, 20.0])


def test_a_second_link_that_is_free_counts_as_missed() -> None:
    store = follow(1_000.0, 0.0, 2_000.0, [(0.0, 100.0, 1.0)], 100.0)
    step = np.array([0.0])
    chances = [Chance(step, np.array([8.0]), ((0.0, 100.0, "in_contact"),)),
               Chance(step, np.array([4.0]), ((0.0, 100.0, "antenna_busy"),)),
               Chance(step, np.array([2.0]), ((0.0, 100.0, "closure"),))]
    sent = np.array([[0.0, 100.0, 8.0]])
    assert missed_links(store, chances, sent).extra_mb.sum() == 0.0
    missed = missed_links(store, chances, sent, 2)
    # The second fastest is free: 4 Mbit/s for 100 s.
    assert missed.extra_mb.sum() == pytest.approx(50.0)
    assert {missed.causes[k] for k in missed.cause[missed.extra_mb > 0.0]} == {"antenna_busy"}
    assert missed_links(store, chances, sent, 3).extra_mb.sum() == pytest.approx(75.0)
