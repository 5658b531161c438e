"""Requests that contacts meet from hand to hand: made, explained, and optimal as trying all plans has it."""

from __future__ import annotations

import random
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from link_cases import FollowJudge
from planning_cases import STEP_S, problem_of, some_of
from planning_runs import BOTH, DOWN, UP, make_run, make_windows, request

from passplan.inputs.calendar_records import Request
from passplan.planning.contradictions import find_contradictions
from passplan.planning.plan import Plan, build_problem, make_plan
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits, Problem, RequestNeed
from passplan.planning.rules import all_terms
from passplan.planning.rules.handovers import HandoverNeed

PLENTY = {"storage_mb": 9e4, "start_fill_mb": 8e4, "links": 2}
CHAIN = [("Teasel-1", "Isvarde-A", 600, 1_500), ("Teasel-1", "Isvarde-B", 1_380, 2_400)]


def followed_problem(seed: int) -> Problem:
    """One or two spacecraft with two links over three antennas, and spans to be followed at random."""
    rng = random.Random(f"follow {seed}")
    rows: list[dict[str, Any]] = []
    for w in range(rng.randint(4, 8)):
        a = (4 * w + rng.randint(0, 4)) % 24
        b = a + rng.randint(6, 14)
        for low, high in {(a, b), (a + rng.randint(0, 2), b - rng.randint(0, 2))}:
            sends = rng.random() < 0.8
            rows.append({
                "window": w, "spacecraft": w % 4 == 3, "antenna": w % 3,
                "start_s": low * STEP_S, "end_s": high * STEP_S,
                "pieces": [(low * STEP_S, high * STEP_S, rng.choice([0.5, 1.0]))] if sends else [],
                "command": rng.random() < 0.5, "cost": rng.choice([0.0, 20.0, 700.0])})
    problem = problem_of(
        rows, horizon_s=40 * STEP_S, weight=(1.0, 3.0), generation=(0.2, 0.1), capacity=(800.0, 1e4),
        start=(500.0, 5e3), prepare_s=(60, 0, 60), release_s=(0, 60, 0), worth_per_money=1.0)
    needs = []
    for k in range(rng.randint(1, 2)):
        low = rng.randint(3, 8)
        asked = RequestNeed(
            f"follow-{k}", "craft-0", 0, frozenset(rng.choice([[0, 1, 2], [0, 1, 2], [1, 2]])),
            rng.choice(["downlink", "downlink", "command"]), low * STEP_S, (low + rng.randint(6, 20)) * STEP_S,
            rng.choice([2, 5]) * STEP_S, points=rng.choice([0.5, 1.0, 3.0]))
        needs.append(HandoverNeed(asked, rng.choice([1, 1, 2, 4]) * STEP_S))
    return replace(problem, needs=tuple(needs), fleet=replace(problem.fleet, links=np.array([2, 1])))


@pytest.mark.parametrize("block", some_of(range(14), 1))
def test_followed_spans_equal_the_best_of_all_plans(block: int) -> None:
    kept, handed = 0, 0
    for seed in range(14 * block, 14 * block + 14):
        problem = followed_problem(seed)
        judge = FollowJudge(problem)
        points, value = judge.best()
        result = find_plan(problem, Limits(gap=0.0))
        chosen = frozenset(result.chosen)
        assert judge.kept(chosen) and all(judge.compatible(a, b) for a in chosen for b in chosen if a < b), seed
        assert judge.points(chosen) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert sum(s.points for s in result.shortfalls) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert result.value == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        assert result.bound >= result.value
        kept += points == 0.0
        free = find_plan(replace(problem, needs=()), Limits(gap=0.0))
        handed += judge.points(frozenset(free.chosen)) > points + 1e-9
    assert kept >= 2 and handed >= 5


@pytest.mark.parametrize("seed", range(12))
def test_a_longer_overlap_never_leaves_fewer_seconds_unfollowed(seed: int) -> None:
    def seconds(more_s: int) -> float:
        problem = followed_problem(seed)
        (need, *_) = problem.needs_of(HandoverNeed)
        # The same end of what is wanted, so that only the overlap is asked for more strictly.
        asked = replace(need.request, latest_s=need.request.latest_s + more_s, points=1.0)
        longer = replace(problem, needs=(HandoverNeed(asked, need.overlap_s + more_s),), horizon_s=60 * STEP_S)
        return sum(s.points for s in find_plan(longer, Limits(gap=0.0)).shortfalls)

    assert seconds(0) <= seconds(60) + 1e-9


def planned(overlap_s: int, windows: list[tuple[str, str, int, int]] = CHAIN, **rest: Any) -> Plan:
    asked = request("follow", "Teasel-1", 700, 2_300, handover_overlap_s=overlap_s, **rest)
    run = make_run({"cut_grid_s": 0, "options_per_window": 1}, craft=PLENTY, requests=(asked,))
    return make_plan(run, make_windows(windows), [BOTH] * len(windows))


def test_the_second_contact_begins_well_before_the_first_one_ends() -> None:
    plan = planned(120)
    assert plan.result.shortfalls == ()
    assert plan.contacts["origin"].tolist() == ["requested", "requested"]
    first, second = plan.contacts.to_dict("records")
    assert (first["end_utc"] - second["start_utc"]).total_seconds() >= 120


def test_contacts_can_hand_over_with_no_more_than_the_overlap() -> None:
    windows = [("Teasel-1", "Isvarde-A", 600, 2_000), ("Teasel-1", "Isvarde-B", 1_000, 2_400)]
    asked = (request("follow", "Teasel-1", 700, 2_300, handover_overlap_s=120),)

    def spans(*requests: Request) -> dict[int, set[tuple[int, int]]]:
        run = make_run({"cut_grid_s": 0, "options_per_window": 4}, craft=PLENTY, requests=requests)
        o = build_problem(run, make_windows(windows), [DOWN] * 2)[0].options
        return {w: {(int(a), int(b)) for a, b in zip(o.start_s[o.window == w], o.end_s[o.window == w], strict=True)}
                for w in (0, 1)}

    made = spans(*asked)
    assert (700, 1_120) in made[0] and (1_880, 2_300) in made[1]
    assert not any(1_120 in span or 1_880 in span for spans_of in spans().values() for span in spans_of)


def test_what_is_missing_is_said_and_counted_in_proportion() -> None:
    (missed,) = planned(121).result.shortfalls
    assert (missed.kind, missed.name, missed.spacecraft) == ("request", "follow", "Teasel-1")
    # From 121 s before the end of the first to the start of the second: 1 s of 1600 - 121.
    assert missed.spans_s == ((1_379, 1_380),)
    assert missed.points == pytest.approx(1.0 / 1_479.0)
    assert "no windows offer contacts that overlap by 121 s there" in missed.sentence


def test_the_service_and_the_least_length_are_those_of_each_contact() -> None:
    assert planned(120, service="command").result.shortfalls == ()
    assert planned(120, min_duration_s=901).result.shortfalls[0].points > 0.4
    asked = request("follow", "Teasel-1", 700, 2_300, handover_overlap_s=60, service="command")
    run = make_run({"cut_grid_s": 0, "command_min_s": 60.0}, craft=PLENTY, requests=(asked,))
    (missed,) = make_plan(run, make_windows(CHAIN), [BOTH, DOWN]).result.shortfalls
    assert missed.spans_s == ((1_440, 2_240),)
    assert make_plan(run, make_windows(CHAIN), [BOTH, UP]).result.shortfalls == ()


def test_a_span_is_asked_for_within_the_horizon_only() -> None:
    windows = make_windows([("Teasel-1", "Isvarde-A", 0, 7_200)])
    for low, high, met in ((-500, 3_000, True), (6_000, 9_000, True), (7_150, 9_000, True)):
        asked = request("follow", "Teasel-1", low, high, handover_overlap_s=60)
        run = make_run({"cut_grid_s": 0}, craft=PLENTY, requests=(asked,))
        assert (make_plan(run, windows, [DOWN]).result.shortfalls == ()) == met


def test_a_spacecraft_that_takes_no_part_leaves_it_missed() -> None:
    asked = request("follow", "Teasel-9", 700, 2_300, handover_overlap_s=60)
    run = make_run({"cut_grid_s": 0}, craft=PLENTY, requests=(asked,))
    (missed,) = make_plan(run, make_windows(CHAIN), [DOWN] * 2).result.shortfalls
    assert "takes no part" in missed.sentence and missed.points == 1.0


def test_two_that_want_the_same_antenna_contradict_each_other() -> None:
    other = ("Teasel-2", "Isvarde-B", 1_300, 2_400)
    asked = (request("follow", "Teasel-1", 700, 2_300, handover_overlap_s=60),
             request("other", "Teasel-2", 1_300, 2_400, min_duration_s=900, points=2))
    run = make_run({"cut_grid_s": 0, "options_per_window": 1}, craft=PLENTY, requests=asked)
    problem, _ = build_problem(run, make_windows([*CHAIN, other]), [DOWN] * 3)
    terms, limits = all_terms(problem), Limits(gap=0.0)
    result = find_plan(problem, limits)
    assert [s.name for s in result.shortfalls] == ["follow"]
    (found,) = find_contradictions(problem, terms, result.chosen, limits, 20.0)
    assert "follow" in found.sentence and "other" in found.sentence


def test_a_request_without_an_overlap_changes_nothing() -> None:
    asked = request("plain", "Teasel-1", 600, 2_400)
    run = make_run({"cut_grid_s": 0}, craft=PLENTY, requests=(asked,))
    problem, _ = build_problem(run, make_windows(CHAIN), [DOWN] * 2)
    assert problem.needs_of(HandoverNeed) == []
    assert all_terms(problem).recurrences == ()
    assert [need.name for need in problem.requests] == ["plain"]
