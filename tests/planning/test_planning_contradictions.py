"""Requirements that contradict each other are named, no more of them than it takes."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from itertools import combinations

import numpy as np
import pytest
from need_cases import NeedJudge, needy_problem
from planning_cases import problem_of, some_of
from planning_runs import BOTH, DOWN, at, closure, make_run, make_windows, request

from passplan.inputs.decisions import Decision
from passplan.planning.contradictions import Demand, RulesConflictError, find_contradictions, only
from passplan.planning.plan import make_plan
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Conflict as Disturbance
from passplan.planning.problem import Limits, RequestNeed
from passplan.planning.rules import all_terms
from passplan.planning.rules.terms import Terms
from passplan.planning.shortfalls import find_shortfalls

EXACT = Limits(gap=0.0)
SIDE_BY_SIDE = [("Teasel-1", "Isvarde-A", 600, 1_800), ("Teasel-2", "Isvarde-A", 700, 1_900)]


def pin(craft: str, start_s: float, end_s: float) -> Decision:
    return Decision(kind="pin", spacecraft=craft, antenna="Isvarde-A", start_utc=at(start_s), end_utc=at(end_s))


def test_two_pins_on_one_antenna_at_one_time() -> None:
    pins = (pin("Teasel-1", 700, 1_700), pin("Teasel-2", 800, 1_800))
    plan = make_plan(make_run(decisions=pins), make_windows(SIDE_BY_SIDE), [DOWN, DOWN])
    [conflict] = plan.contradictions
    assert sorted(conflict.demands) == [
        "the pinned contact, Teasel-1 on Isvarde-A 2027-03-09 00:11:40 to 00:28:20 UTC",
        "the pinned contact, Teasel-2 on Isvarde-A 2027-03-09 00:13:20 to 00:30:00 UTC"]
    assert conflict.sentence.startswith("The pinned contact, Teasel-")
    assert conflict.sentence.endswith("cannot all be met (antenna busy: Isvarde-A).")
    assert len(plan.contacts) == 1


def test_a_pin_under_a_closure_stands_for_itself() -> None:
    run = make_run(decisions=(pin("Teasel-1", 700, 1_700),), closures=(closure("Isvarde-A", 900, 1_000),))
    plan = make_plan(run, make_windows(SIDE_BY_SIDE), [DOWN, DOWN])
    assert len(plan.contradictions[0].demands) == 1
    assert "Isvarde-A is closed" in plan.contradictions[0].sentence


def test_a_command_requirement_longer_than_any_gap_allows_and_a_request_outside_every_window() -> None:
    run = make_run({"command_every_h": 0.5}, requests=(request("late", "Teasel-2", 6_000, 7_000),))
    plan = make_plan(run, make_windows(SIDE_BY_SIDE[:1]), [BOTH])
    said = [conflict.sentence for conflict in plan.contradictions]
    assert any("Request late for Teasel-2 cannot be met" in sentence for sentence in said)
    assert any("A command contact of Teasel-1 every 0.5 h cannot be met (no choice of windows" in s for s in said)
    assert len(plan.contacts) == 1


def test_two_spacecraft_that_always_interfere() -> None:
    rows = [{"spacecraft": k, "antenna": k, "start_s": 0, "end_s": 600, "pieces": [(0, 600, 1.0)]} for k in range(2)]
    asks = tuple(RequestNeed(f"ask-{k}", f"craft-{k}", k, frozenset({0, 1}), "downlink", 0, 600, 60) for k in range(2))
    problem = problem_of(
        rows, weight=(1.0, 1.0), generation=(0.0, 0.0), capacity=(1e4, 1e4), start=(1e3, 1e3), prepare_s=(0, 0),
        release_s=(0, 0), requests=asks, conflicts=(Disturbance("craft-0 beside craft-1", 0, 0, 1, 0, 600),))
    result, terms = find_plan(problem, EXACT), all_terms(problem)
    conflict = find_contradictions(problem, terms, result.chosen, EXACT, 10.0)[0]
    assert len(result.chosen) == 1
    assert sorted(conflict.demands) == ["request ask-0 for craft-0", "request ask-1 for craft-1"]
    assert conflict.between == ("interference: craft-0 beside craft-1",)


def test_the_policy_may_want_no_plan_then() -> None:
    pins = (pin("Teasel-1", 700, 1_700), pin("Teasel-2", 800, 1_800))
    run = make_run({"when_rules_conflict": "stop"}, decisions=pins)
    with pytest.raises(RulesConflictError, match="Teasel-1 on Isvarde-A") as caught:
        make_plan(run, make_windows(SIDE_BY_SIDE), [DOWN, DOWN])
    assert caught.value.exit_code == 4
    assert len(make_plan(replace(run, decisions=pins[:1]), make_windows(SIDE_BY_SIDE), [DOWN, DOWN]).contacts) == 1


@pytest.mark.parametrize("block", some_of(range(2), 1))
def test_60_cases_name_sets_that_cannot_be_met_of_which_any_part_can(block: int) -> None:
    seen = 0
    for seed in range(30 * block, 30 * block + 30):
        problem = needy_problem(seed)
        terms = all_terms(problem)
        result = find_plan(problem, EXACT)
        plans = [set(chosen) for chosen in NeedJudge(problem).plans()]
        found = find_contradictions(problem, terms, result.chosen, EXACT, 30.0)
        assert bool(found) == bool(result.shortfalls), f"seed {seed}"
        demands = [*terms.wanted, *terms.recurrences, *terms.guarantees]
        for conflict in found:
            core = [d for d in demands if any(d is other for other in conflict.core)]
            assert len(core) == len(conflict.demands)
            assert not any(_met(terms, core, chosen) for chosen in plans), f"seed {seed}"
            for fewer in combinations(core, len(core) - 1):
                assert any(_met(terms, fewer, chosen) for chosen in plans), f"seed {seed}"
            seen += len(core) > 1
    assert seen > 0


def _met(terms: Terms, demands: Sequence[Demand], chosen: set[int]) -> bool:
    return not find_shortfalls(only(terms, demands), np.array(sorted(chosen), dtype=int))
