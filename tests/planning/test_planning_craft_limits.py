"""Limits on a spacecraft's own contacts: made from the run, kept, explained, and optimal as enumeration has it."""

from __future__ import annotations

import numpy as np
import pytest
from craft_cases import CraftJudge, random_craft_problem
from planning_runs import BOTH, DOWN, UP, make_run, make_windows

from passplan.planning.plan import Plan, build_problem, make_plan
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits
from passplan.planning.rules import all_terms
from passplan.planning.unused import REASONS
from passplan.report.usage import REASON_WORDS

PASSES = [("Teasel-1", "Isvarde-A", 600, 1_200), ("Teasel-1", "Isvarde-B", 1_300, 1_900),
          ("Teasel-1", "Isvarde-A", 2_400, 3_000)]
PLENTY = {"storage_mb": 9e4, "start_fill_mb": 8e4}


@pytest.mark.parametrize("block", range(6))
def test_plans_under_limits_of_spacecraft_equal_the_best_of_all_plans(block: int) -> None:
    for seed in range(25 * block, 25 * block + 25):
        problem = random_craft_problem(seed)
        judge = CraftJudge(problem)
        points, value = judge.best()
        result = find_plan(problem, Limits(gap=0.0))
        assert judge.kept(result.chosen), f"seed {seed}"
        assert sum(s.points for s in result.shortfalls) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert result.value == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        assert result.bound >= result.value


def planned(links: list[object], craft: dict[str, object], **policy: object) -> Plan:
    run = make_run({"cut_grid_s": 0, "options_per_window": 1, **policy}, craft={**PLENTY, **craft})
    return make_plan(run, make_windows(PASSES[:len(links)]), links)


def test_limits_that_are_off_change_nothing() -> None:
    run = make_run(craft=PLENTY)
    problem, _ = build_problem(run, make_windows(PASSES), [DOWN] * 3)
    assert problem.needs == ()
    terms = all_terms(problem)
    assert {lane.kind for lane in terms.lanes} == {"antenna_busy", "spacecraft_busy"}
    assert sum(map(len, terms.rows)) == 0 and terms.removals == ()


def test_a_gap_keeps_contacts_apart_and_says_so() -> None:
    assert len(planned([DOWN] * 2, {"contact_gap_s": 100}).contacts) == 2
    plan = planned([DOWN] * 2, {"contact_gap_s": 100.5})
    assert plan.unused["reason"].tolist() == ["contact_gap"]
    assert plan.unused["detail"].str.contains("Teasel-1, with 101 s between contacts, is taken").all()


def test_a_transmitter_cools_down_between_contacts_that_send() -> None:
    plan = planned([DOWN] * 3, {"cool_down_s": 300})
    assert plan.unused["reason"].tolist() == ["cool_down"]
    assert len(plan.contacts) == 2
    # A contact for commands alone may stand between them, and does not cool the transmitter any sooner.
    plan = planned([DOWN, UP, DOWN], {"cool_down_s": 1_200}, command_every_h=0.4)
    assert plan.contacts["service"].tolist() == ["downlink", "command", "downlink"]
    assert len(planned([DOWN, UP, DOWN], {"cool_down_s": 1_201}, command_every_h=0.4).contacts) == 2


def test_every_reason_has_words() -> None:
    assert set(REASONS) <= set(REASON_WORDS)


def test_rest_is_counted_in_whole_seconds_rounded_up() -> None:
    run = make_run(craft={"contact_gap_s": 0.2, "cool_down_s": 10.0})
    problem, _ = build_problem(run, make_windows(PASSES), [BOTH] * 3)
    lanes = {lane.kind: lane for lane in all_terms(problem).lanes}
    for kind, behind_s in (("contact_gap", 1), ("cool_down", 10)):
        held_s = lanes[kind].end_s - problem.options.end_s[lanes[kind].options]
        assert np.all(held_s == behind_s)
