"""Requests with a weight, an exact time or ranging: met, missed and judged."""

from __future__ import annotations

from dataclasses import replace

import pytest
from need_cases import NeedJudge, needy_problem
from planning_cases import problem_of, some_of
from planning_runs import BOTH, DOWN, make_run, make_windows, request

from passplan.planning.plan import Plan, make_plan
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits, RequestNeed

ONE = [("Teasel-1", "Isvarde-A", 600, 1_800)]


@pytest.mark.parametrize("block", some_of(range(10), 2))
def test_100_cases_with_more_kinds_of_needs_equal_the_best_of_all_plans(block: int) -> None:
    for seed in range(10 * block, 10 * block + 10):
        problem = needy_problem(seed)
        judge = NeedJudge(problem)
        points, value = judge.best()
        result = find_plan(problem, Limits(gap=0.0))
        chosen = frozenset(result.chosen)
        assert judge.points(chosen) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert sum(s.points for s in result.shortfalls) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert result.value == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"


def test_a_fixed_request_is_met_to_the_second() -> None:
    fixed = request("calibration", "Teasel-1", 700, 1_111, fixed=True)
    for most in (1, 12):
        plan = make_plan(make_run({"options_per_window": most}, requests=(fixed,)), make_windows(ONE), [DOWN])
        row = plan.contacts.iloc[0]
        assert (row["duration_s"], row["origin"]) == (411, "requested")
        assert plan.result.shortfalls == ()


def test_the_request_that_weighs_more_is_met() -> None:
    rows = [{"spacecraft": k, "start_s": 0, "end_s": 600, "pieces": [(0, 600, 1.0)]} for k in range(2)]
    asks = tuple(RequestNeed(f"ask-{k}", "any", k, frozenset({0}), "downlink", 0, 600, 60) for k in range(2))
    fleet = {"weight": (5.0, 1.0), "generation": (0.0,) * 2, "capacity": (1e4,) * 2, "start": (1e3,) * 2}
    problem = problem_of(rows, requests=asks, **fleet)
    assert find_plan(problem, Limits(gap=0.0)).chosen == (0,)
    heavier = replace(problem, requests=(asks[0], replace(asks[1], points=1.5)))
    result = find_plan(heavier, Limits(gap=0.0))
    assert result.chosen == (1,)
    assert [(s.name, s.points) for s in result.shortfalls] == [("ask-0", 1.0)]


def test_ranging_wants_both_ways_on_an_antenna_that_offers_it() -> None:
    run = make_run({"cut_grid_s": 0}, requests=(request("range", "Teasel-1", 0, 7_000, service="ranging"),))
    assert [s.kind for s in make_plan(run, make_windows(ONE), [BOTH]).result.shortfalls] == ["request"]
    able = {name: antenna.model_copy(update={"ranging": True}) for name, antenna in run.antennas.items()}
    run = replace(run, antennas=able)
    assert make_plan(run, make_windows(ONE), [BOTH]).result.shortfalls == ()
    assert [s.name for s in make_plan(run, make_windows(ONE), [DOWN]).result.shortfalls] == ["range"]


def test_contacts_and_mb_by_the_day_are_due_in_proportion() -> None:
    run = make_run({"cut_grid_s": 0}, craft={"least_contacts_per_day": 25, "least_mb_per_day": 24_000.0})
    windows = make_windows([("Teasel-1", "Isvarde-A", 600, 1_800), ("Teasel-1", "Isvarde-A", 3_000, 4_200)])
    shortfalls = {s.name: s.sentence for s in make_plan(run, windows, [DOWN] * 2).result.shortfalls}
    assert list(shortfalls) == ["contacts of Teasel-2 on 2027-03-09", "MB of Teasel-2 on 2027-03-09"]
    assert shortfalls["MB of Teasel-2 on 2027-03-09"] == (
        "The plan has 0 of the 2000 that are due: the windows offer no more.")


def test_the_mb_of_a_contact_are_no_more_than_a_full_storage() -> None:
    # The link carries 11 800 MB; 500 MB aboard at most, and 0.5 MB/s meanwhile.
    craft = {"storage_mb": 500.0, "start_fill_mb": 0.0, "mission": "Teasel", "generation_mb_per_s": 0.5}
    policy = {"cut_grid_s": 0, "options_per_window": 1}
    for mb, missed in ((1_100.0, False), (1_101.0, True)):
        run = make_run({**policy, "guarantee": ({"mission": "Teasel", "mb": mb * 12},)}, craft=craft)
        plan = make_plan(run, make_windows(ONE), [DOWN])
        assert [s.kind for s in plan.result.shortfalls] == (["guarantee"] if missed else [])


def test_a_guarantee_over_several_days_is_one_sum() -> None:
    policy = {"guarantee": ({"mission": "Teasel", "contacts": 24, "days": 2},), "worth_per_money": 1e6}
    rows = [("Teasel-2", "Isvarde-B", 600, 1_800), ("Teasel-1", "Isvarde-B", 3_000, 4_200)]
    plan = make_plan(make_run(policy, craft={"mission": "Teasel"}), make_windows(rows), [DOWN] * 2)
    assert len(plan.contacts) == 1
    assert plan.result.shortfalls == ()


def fair(policy: dict[str, object], rows: list[tuple[str, str, float, float]]) -> tuple[Plan, dict[str, float]]:
    """The plan of two missions of one spacecraft each, and the MB that each has contacts for."""
    craft = {"generation_mb_per_s": 0.0, "storage_mb": 20_000.0, "start_fill_mb": 20_000.0}
    run = make_run({"cut_grid_s": 60, "options_per_window": 60, **policy}, craft=craft)
    weights = {name: one.model_copy(update={"mission": name, "weight": 9.0 if name == "Teasel-1" else 1.0})
               for name, one in run.spacecraft.items()}
    plan = make_plan(replace(run, spacecraft=weights), make_windows(rows), [DOWN] * len(rows))
    volume_mb = plan.contacts.groupby("spacecraft")["volume_mb"].sum()
    return plan, {name: float(volume_mb.get(name, 0.0)) for name in weights}


def test_the_smallest_share_is_as_large_as_it_can_be() -> None:
    # Both are in view of the only antenna at once; without fairness the one that weighs more takes it all.
    rows = [("Teasel-1", "Isvarde-A", 0, 2_000), ("Teasel-2", "Isvarde-A", 0, 2_000)]
    _, alone = fair({}, rows)
    assert (alone["Teasel-1"], alone["Teasel-2"]) == (pytest.approx(19_800.0), 0.0)
    plan, shared = fair({"fairness": "max_min"}, rows)
    spans = list(zip(plan.problem.options.spacecraft, plan.problem.options.start_s, plan.problem.options.end_s,
                     strict=True))
    best = 10.0 * max(min(b - a, d - c) - 20 for i, a, b in spans for k, c, d in spans if i != k and c >= b + 90)
    assert plan.fair_floor == pytest.approx(best / 20_000.0, abs=1 / 200)
    assert plan.fair_floor <= best / 20_000.0 + 1e-9
    assert min(shared.values()) >= plan.fair_floor * 20_000.0 - 1e-6
    assert plan.result.shortfalls == ()


def test_where_there_is_contact_enough_everybody_gets_all() -> None:
    plan, shared = fair({"fairness": "max_min"}, [
        ("Teasel-1", "Isvarde-A", 0, 2_100), ("Teasel-2", "Isvarde-A", 3_000, 5_100)])
    assert plan.fair_floor == 1.0
    assert list(shared.values()) == pytest.approx([20_000.0, 20_000.0])
