"""Corner cases, each of which must end well."""

from __future__ import annotations

from typing import Any

import pytest
from planning_cases import problem_of

from passplan.planning.portfolio import find_plan
from passplan.planning.problem import CommandNeed, Limits, RequestNeed

# The first search on a machine compiles its kernels, which takes a while where much else is running.
SEARCH = Limits(gap=0.0, exact_options=0, time_limit_s=300.0)

PASS = {"start_s": 600, "end_s": 1_200, "pieces": [(630, 1_200, 2.0)], "command": True}
PATHS = pytest.mark.parametrize("limits", [Limits(gap=0.0), SEARCH], ids=["exact", "search"])


def ask(**change: Any) -> RequestNeed:
    values: dict[str, Any] = {
        "name": "ask", "craft_name": "craft-0", "spacecraft": 0, "antennas": frozenset({0}), "service": "downlink",
        "earliest_s": 0, "latest_s": 6_000, "min_duration_s": 120, **change}
    return RequestNeed(**values)


@PATHS
def test_no_windows(limits: Limits) -> None:
    result = find_plan(problem_of([], generation=(1.0,), capacity=(10.0,), start=(0.0,), spill_cost_per_mb=1.0), limits)
    assert result.status == "empty"
    assert result.chosen == ()
    assert result.value == result.bound == pytest.approx(-(6_000.0 - 10.0))
    assert result.gap == 0.0


@PATHS
def test_one_window(limits: Limits) -> None:
    result = find_plan(problem_of([PASS]), limits)
    assert result.status == "optimal"
    assert result.value == pytest.approx(570 * 2.0)


@PATHS
@pytest.mark.parametrize("change", [{"capacity": (0.0,), "start": (0.0,)}, {"weight": (0.0,)}, {"prepare_s": (0,)}])
def test_zero_storage_and_zero_weight(limits: Limits, change: dict[str, Any]) -> None:
    problem = problem_of([PASS], **{"generation": (0.1,), "spill_cost_per_mb": 0.5, **change})
    result = find_plan(problem, limits)
    assert result.gap == pytest.approx(0.0, abs=1e-9)
    came = result.account.start_mb + result.account.generated_mb
    gone = result.account.delivered_mb + result.account.lost_mb + result.account.left_mb
    assert gone == pytest.approx(came, rel=1e-9)


@PATHS
def test_a_spacecraft_without_an_antenna_spills_and_nothing_else(limits: Limits) -> None:
    problem = problem_of(
        [PASS], weight=(1.0, 1.0), generation=(0.0, 1.0), capacity=(1e6, 100.0), start=(1e5, 0.0),
        spill_cost_per_mb=1.0)
    result = find_plan(problem, limits)
    assert result.account.lost_mb.tolist() == [0.0, pytest.approx(5_900.0)]
    assert result.chosen == (0,)


def test_a_second_is_enough_for_a_plan() -> None:
    rows = [{"spacecraft": k % 20, "antenna": k % 7, "start_s": 60 * (k % 90), "end_s": 60 * (k % 90) + 480,
             "pieces": [(60 * (k % 90) + 30, 60 * (k % 90) + 480, 1.0 + k % 5)]} for k in range(900)]
    many = {name: (value,) * 20 for name, value in (
        ("weight", 1.0), ("generation", 0.4), ("capacity", 700.0), ("start", 200.0))}
    problem = problem_of(rows, prepare_s=(60,) * 7, release_s=(0,) * 7, **many)
    result = find_plan(problem, Limits(gap=0.0, time_limit_s=1.0))
    assert result.chosen
    assert result.bound >= result.value > 0.0
    assert result.seconds


def test_a_thousand_identical_spacecraft() -> None:
    rows = [{"spacecraft": k, "start_s": 600, "end_s": 900, "pieces": [(600, 900, 1.0)]} for k in range(1_000)]
    many = {name: (value,) * 1_000 for name, value in (
        ("weight", 1.0), ("generation", 0.0), ("capacity", 500.0), ("start", 500.0))}
    for limits in (Limits(gap=0.0), SEARCH):
        result = find_plan(problem_of(rows, **many), limits)
        assert (len(result.chosen), result.value) == (1, pytest.approx(300.0))
        assert result.status == "optimal"


@PATHS
def test_a_request_outside_every_window_is_a_named_shortfall_and_the_rest_is_planned(limits: Limits) -> None:
    result = find_plan(problem_of([PASS], requests=(ask(latest_s=600), ask(name="met"))), limits)
    assert result.chosen == (0,)
    assert [(s.kind, s.name, s.possible) for s in result.shortfalls] == [("request", "ask", False)]
    assert "no window" in result.shortfalls[0].sentence
    assert result.tiers[0].value == result.tiers[0].bound == 1.0


def test_a_request_of_a_spacecraft_that_takes_no_part_says_so() -> None:
    result = find_plan(problem_of([PASS], requests=(ask(spacecraft=-1, craft_name="Lost-1"),)))
    assert "Lost-1 is not met: the spacecraft takes no part" in result.shortfalls[0].sentence


@PATHS
def test_a_command_interval_longer_than_any_gap_allows_is_a_named_shortfall(limits: Limits) -> None:
    result = find_plan(problem_of([PASS], commands=(CommandNeed(0, 1_800, -1_500),)), limits)
    assert result.chosen == (0,)
    # Too old from 300 s, for want of a window, to 600 s, and again from 1 200 + 1 800 s to the end.
    assert result.shortfalls[0].spans_s == ((300, 600), (3_000, 6_000))
    assert result.shortfalls[0].points == pytest.approx(3_300 / 1_800)
    assert "no window offers a command contact in time" in result.shortfalls[0].sentence


@PATHS
def test_requests_that_collide_are_told_apart_from_those_without_a_window(limits: Limits) -> None:
    rows = [{**PASS, "spacecraft": k} for k in (0, 1)]
    two = {name: (value,) * 2 for name, value in (
        ("weight", 1.0), ("generation", 0.0), ("capacity", 1e4), ("start", 1e3))}
    asks = tuple(ask(name=f"ask-{k}", craft_name=f"craft-{k}", spacecraft=k) for k in (0, 1))
    result = find_plan(problem_of(rows, requests=asks, **two), limits)
    assert len(result.shortfalls) == 1
    assert "collides" in result.shortfalls[0].sentence
    assert result.shortfalls[0].possible


@PATHS
def test_a_requirement_comes_before_any_value(limits: Limits) -> None:
    # The command contact brings nothing down and costs money, and it shuts the rich one out.
    poor = {"start_s": 600, "end_s": 900, "command": True, "cost": 50.0}
    rich = {"spacecraft": 1, "start_s": 600, "end_s": 1_200, "pieces": [(600, 1_200, 9.0)]}
    problem = problem_of(
        [poor, rich], weight=(1.0, 5.0), generation=(0.0, 0.0), capacity=(9e3, 9e3), start=(9e3, 9e3),
        requests=(ask(service="command"),), worth_per_money=1.0)
    result = find_plan(problem, limits)
    assert result.chosen == (0,)
    assert result.shortfalls == ()


def test_progress_moves_toward_the_end() -> None:
    seen: list[tuple[float, float, float]] = []
    result = find_plan(problem_of([PASS]), Limits(gap=0.0), progress=lambda *now: seen.append(now))
    assert seen[-1] == (result.value, pytest.approx(result.bound), pytest.approx(result.gap, abs=1e-9))
