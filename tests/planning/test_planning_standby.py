"""A second antenna as a stand-by: what counts, what it holds, and how the plan shows it."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from planning_cases import some_of
from planning_runs import BOTH, DOWN, UP, at, make_run, make_windows, request
from standby_cases import HeldJudge, held_problem

from passplan.inputs.decisions import Decision, read_published
from passplan.inputs.errors import Findings
from passplan.inputs.reader import Reader
from passplan.link.choice import WindowLink
from passplan.planning.plan import Plan, make_plan
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits
from passplan.planning.rules.rows import at_the_same_time
from passplan.planning.rules.standby import backed

TWO = [("Teasel-1", "Isvarde-A", 600, 1_800), ("Teasel-1", "Isvarde-B", 900, 2_400)]


def _planned(
    windows: list[tuple[str, str, int, int]] = TWO, links: list[WindowLink] | None = None, **rest: object,
) -> Plan:
    return make_plan(make_run({"cut_grid_s": 0}, **rest), make_windows(windows), links or [BOTH] * len(windows))


def _rows(plan: Plan) -> list[tuple[str, str, int, int, str]]:
    start = pd.Timestamp("2027-03-09")
    seconds = [((plan.contacts[key] - start) / pd.Timedelta("1s")).astype(int) for key in ("start_utc", "end_utc")]
    return list(zip(plan.contacts["spacecraft"], plan.contacts["antenna"], *seconds, plan.contacts["origin"],
                    strict=True))


def test_a_stand_by_follows_for_as_long_as_the_contact_and_brings_nothing_down() -> None:
    asked = request("ask", "Teasel-1", 0, 7_000, standby=True, antenna="Isvarde-A", min_duration_s=800)
    plan = _planned(requests=(asked,))
    assert _rows(plan) == [("Teasel-1", "Isvarde-A", 900, 1_800, "requested"),
                           ("Teasel-1", "Isvarde-B", 900, 1_800, "standby")]
    assert plan.result.shortfalls == ()
    first, spare = plan.contacts.to_dict("records")
    assert (spare["volume_mb"], spare["value"], spare["cut"]) == (0.0, 0.0, "end: standby")
    assert first["volume_mb"] > 0.0 and set(plan.segments["contact_id"]) == {first["contact_id"]}
    assert plan.unused.empty


def test_without_the_word_no_second_antenna_is_held() -> None:
    plan = _planned(requests=(request("ask", "Teasel-1", 0, 7_000, min_duration_s=800),))
    assert len(plan.problem.options.further) == 0
    assert "standby" not in set(plan.contacts["origin"])


@pytest.mark.parametrize(("second", "spare"), [
    (("Teasel-1", "Isvarde-B", 1_500, 2_400), BOTH),   # too short together
    (("Teasel-1", "Isvarde-B", 900, 2_400), UP),       # cannot receive
    (("Teasel-1", "Isvarde-A", 1_900, 2_900), BOTH),  # the same antenna
    (("Teasel-2", "Isvarde-B", 900, 2_400), BOTH),     # another spacecraft
])
def test_a_contact_that_nothing_can_stand_by_for_does_not_count(
    second: tuple[str, str, int, int], spare: WindowLink,
) -> None:
    asked = request("ask", "Teasel-1", 0, 7_000, standby=True, antenna="Isvarde-A", min_duration_s=800)
    plan = _planned([TWO[0], second], [BOTH, spare], requests=(asked,))
    assert [s.kind for s in plan.result.shortfalls] == ["request"]
    assert "no second antenna can follow for as long and stand by" in plan.result.shortfalls[0].sentence
    assert "standby" not in set(plan.contacts["origin"])


def test_the_antenna_of_a_stand_by_serves_nobody_else() -> None:
    others = [*TWO, ("Teasel-2", "Isvarde-B", 1_000, 1_700)]
    asked = request("ask", "Teasel-1", 0, 7_000, standby=True, antenna="Isvarde-A", min_duration_s=800)
    assert ("Teasel-2", "Isvarde-B") in [row[:2] for row in _rows(_planned(others, [DOWN] * 3))]
    plan = _planned(others, [DOWN] * 3, requests=(asked,))
    assert "Teasel-2" not in set(plan.contacts["spacecraft"])
    row = plan.unused.iloc[0]
    assert row["reason"] == "antenna_busy"
    assert row["detail"] == (
        "Isvarde-B is taken: Teasel-1 on Isvarde-A, with Isvarde-B at the ready, from 00:15:00 to 00:30:00 UTC")


@pytest.mark.parametrize("kind", ["pin", "emergency"])
def test_pins_and_emergencies_with_a_stand_by(kind: str) -> None:
    span = {"antenna": "Isvarde-A", "start_utc": at(1_000), "end_utc": at(1_600)}
    item = Decision(kind=kind, spacecraft="Teasel-1", standby=True, **span)
    plan = _planned(decisions=(item,))
    assert plan.result.shortfalls == ()
    origin = {"pin": "pinned"}.get(kind, kind)
    assert {("Isvarde-A", origin), ("Isvarde-B", "standby")} <= {(row[1], row[4]) for row in _rows(plan)}
    alone = _planned([TWO[0]], decisions=(item,))
    assert [s.kind for s in alone.result.shortfalls] == [kind]
    assert "no second antenna" in alone.result.shortfalls[0].sentence


def test_what_is_forbidden_is_not_held_as_a_stand_by_either() -> None:
    asked = request("ask", "Teasel-1", 0, 7_000, standby=True, antenna="Isvarde-A", min_duration_s=800)
    window = make_windows(TWO)["window_id"].iloc[1]
    plan = _planned(requests=(asked,), decisions=(Decision(kind="forbid", window=window),))
    assert [s.kind for s in plan.result.shortfalls] == ["request"]


def test_an_option_that_holds_two_antennas_uses_twice_of_what_they_share() -> None:
    rows = at_the_same_time(
        "equipment_busy", "modems", np.array([0, 0, 1]), np.array([0, 0, 50]), np.array([100, 100, 150]), 2.0)
    assert rows.offset.tolist() == [0, 2]
    assert (rows.options.tolist(), rows.amounts.tolist()) == ([0, 1], [2.0, 1.0])


@pytest.mark.parametrize("block", some_of(range(10), 2))
def test_150_cases_with_stand_bys_equal_the_best_of_all_plans(block: int) -> None:
    held = served = 0
    for seed in range(15 * block, 15 * block + 15):
        problem = held_problem(seed)
        judge = HeldJudge(problem)
        points, value = judge.best()
        result = find_plan(problem, Limits(gap=0.0))
        chosen = frozenset(result.chosen)
        assert chosen in set(judge.plans()), f"seed {seed}"
        assert judge.points(chosen) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert sum(s.points for s in result.shortfalls) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert result.value == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        held += any(o in chosen for o in problem.options.further.option.tolist())
        served += any(need.standbys is not None and judge._served(chosen, need) for need in problem.requests)
    assert held > 3 and served > 0


@pytest.mark.parametrize("block", some_of(range(4), 1))
def test_the_search_keeps_what_stand_bys_hold(block: int) -> None:
    limits = Limits(gap=0.0, exact_options=0, threads=1, time_limit_s=300.0, search_rounds=20)
    for seed in range(200 + 10 * block, 210 + 10 * block):
        problem = held_problem(seed)
        judge = HeldJudge(problem)
        points, value = judge.best()
        result = find_plan(problem, limits)
        chosen = frozenset(result.chosen)
        assert chosen in set(judge.plans()), f"seed {seed}"
        assert judge.points(chosen) >= points - 1e-9
        assert judge.points(chosen) > points + 1e-9 or judge.value(chosen) <= value + 1e-6 * max(1.0, abs(value))
        if judge.points(chosen) <= points + 1e-9:
            assert result.bound >= value - 1e-6 * max(1.0, abs(value)), f"seed {seed}"


@pytest.mark.parametrize("seed", some_of(range(300, 330), 8))
def test_asking_for_a_stand_by_never_makes_requirements_easier(seed: int) -> None:
    problem = held_problem(seed)
    looser = replace(problem, requests=tuple(replace(need, standbys=None) for need in problem.requests))
    tight, loose = (sum(s.points for s in find_plan(one, Limits(gap=0.0)).shortfalls) for one in (problem, looser))
    assert tight >= loose - 1e-9


def test_taking_options_takes_what_they_hold() -> None:
    problem = held_problem(3)
    options = problem.options
    order = np.array([2, 0, 1])
    taken = options.take(order)
    for new, old in enumerate(order.tolist()):
        mine, before = taken.further.option == new, options.further.option == old
        assert taken.further.antenna[mine].tolist() == options.further.antenna[before].tolist()
        assert taken.further.start_s[mine].tolist() == options.further.start_s[before].tolist()
    assert backed(taken, None).tolist() == backed(options, None)[order].tolist()


def test_a_published_stand_by_is_no_contact_to_keep(tmp_path: Path) -> None:
    columns = "spacecraft,antenna,start_utc,end_utc,service,origin\n"
    span = f"{at(900)},{at(1_800)},both"
    file = tmp_path / "contacts.csv"
    file.write_text(f"{columns}Teasel-1,Isvarde-A,{span},requested\nTeasel-1,Isvarde-B,{span},standby\n")
    run, findings = make_run(), Findings()
    found = read_published(file, dict(run.spacecraft), run.antennas, Reader(tmp_path), findings)
    assert [item.antenna for item in found] == ["Isvarde-A"]
