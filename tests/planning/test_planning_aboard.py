"""Slots in which a spacecraft is busy with itself, and schedules that are aboard already."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from planning_runs import BOTH, DOWN, START, at, make_run, make_windows

from passplan.inputs.aboard import Slot
from passplan.inputs.decisions import Published
from passplan.planning.aboard import schedule_warnings
from passplan.planning.plan import Plan, build_problem, make_plan

PASSES = [("Teasel-1", "Isvarde-A", 600, 1_200), ("Teasel-1", "Isvarde-B", 1_500, 2_100),
          ("Teasel-1", "Isvarde-A", 4_000, 4_600)]
PLENTY = {"storage_mb": 9e4, "start_fill_mb": 8e4}


def slot(craft: str, start_s: float, end_s: float, kind: str = "imaging", note: str = "") -> Slot:
    return Slot(spacecraft=craft, start_utc=at(start_s), end_utc=at(end_s), kind=kind, note=note)


def loaded(antenna: str, start_s: float, end_s: float) -> Published:
    return Published(spacecraft="Teasel-1", antenna=antenna, start_utc=at(start_s), end_utc=at(end_s))


def planned(links: list[Any] | None = None, craft: dict[str, Any] | None = None, **rest: Any) -> Plan:
    run = make_run({"command_every_h": 1.0}, craft={**PLENTY, **(craft or {})}, **rest)
    return make_plan(run, make_windows(PASSES), links or [BOTH, DOWN, BOTH])


def spans(plan: Plan) -> list[tuple[str, str, int, int]]:
    return [(row["antenna"], row["service"], *(int((row[edge].to_datetime64() - START) / np.timedelta64(1, "s"))
                                               for edge in ("start_utc", "end_utc")))
            for row in plan.contacts.to_dict("records")]


@pytest.mark.parametrize(("kind", "words"), [
    ("imaging", "Teasel-1 takes images then (delta)"),
    ("attitude", "Teasel-1 holds an attitude then in which it cannot point at a station (delta)")])
def test_a_slot_keeps_contacts_out_and_says_why(kind: str, words: str) -> None:
    plan = planned(slots=(slot("Teasel-1", 1_450.2, 2_200, kind, "delta"), slot("Teasel-2", 0, 7_200)))
    assert plan.unused["reason"].tolist() == [kind]
    assert plan.unused["detail"].tolist() == [words]
    # One that touches a window only cuts it, to the second, and an antenna may prepare meanwhile.
    plan = planned(slots=(slot("Teasel-1", 0, 700.5, kind),))
    assert spans(plan)[0][2] == 701
    assert plan.contacts["cut"].iloc[0] == f"start: {kind}"


def test_a_schedule_aboard_sends_as_loaded_and_not_otherwise() -> None:
    plan = planned(loaded=(loaded("Isvarde-B", 1_600, 1_900), loaded("Isvarde-A", -500, -100)))
    assert spans(plan) == [
        ("Isvarde-A", "command", *spans(plan)[0][2:]), ("Isvarde-B", "downlink", 1_600, 1_900),
        ("Isvarde-A", "both", 4_000, 4_600)]
    assert plan.contacts["cut"].iloc[1] == "start: loaded; end: loaded"
    assert plan.contacts["origin"].tolist() == ["planned", "frozen", "planned"]
    assert not [s for s in plan.result.shortfalls if s.kind == "loaded" and "1600" in s.name]


def test_windows_without_commands_say_what_the_schedule_says() -> None:
    plan = planned([DOWN, DOWN, BOTH], loaded=(loaded("Isvarde-B", 1_600, 1_900),))
    assert plan.unused["reason"].tolist() == ["loaded"]
    assert plan.unused["detail"].tolist() == [
        "until 2027-03-09 00:31:40 UTC Teasel-1 sends as the schedule aboard says"]


def test_a_stated_instant_is_when_a_new_schedule_can_be_aboard() -> None:
    plan = planned([DOWN] * 3, {"loaded_until_utc": at(1_700)}, loaded=(loaded("Isvarde-A", 600, 1_200),))
    assert spans(plan)[0] == ("Isvarde-A", "downlink", 600, 1_200)
    assert spans(plan)[1][:2] == ("Isvarde-B", "downlink") and spans(plan)[1][2] >= 1_700
    # Without any loaded contact nothing at all is sent before.
    plan = planned([DOWN] * 3, {"loaded_until_utc": at(5_000)})
    assert len(plan.contacts) == 0


def test_a_new_schedule_that_no_contact_could_bring_up_is_warned_of() -> None:
    aboard = (loaded("Isvarde-A", 600, 1_200),)
    for links, warned in (([DOWN] * 3, True), ([BOTH, DOWN, DOWN], False)):
        run = make_run({"command_every_h": 1.0}, craft=PLENTY, loaded=aboard)
        plan = make_plan(run, make_windows(PASSES), links)
        lines = list(schedule_warnings(run, plan.contacts))
        assert len(lines) == warned
        if warned:
            assert lines[0].startswith("Teasel-1: from 2027-03-09 00:25 UTC on the plan needs a new schedule aboard")
    assert list(schedule_warnings(make_run(), plan.contacts)) == []


def test_a_loaded_contact_that_cannot_be_is_a_shortfall() -> None:
    plan = planned(loaded=(loaded("Isvarde-B", 2_500, 2_900),))
    (shortfall,) = [s for s in plan.result.shortfalls if s.kind == "loaded"]
    assert "The contact loaded aboard is not in the plan as it was loaded" in shortfall.sentence
    assert "not in view of Isvarde-B then" in shortfall.sentence
    assert shortfall.points == 100.0


def test_a_window_that_moved_by_seconds_carries_what_was_loaded() -> None:
    plan = planned(loaded=(loaded("Isvarde-B", 1_480, 2_100),))
    assert ("Isvarde-B", "downlink", 1_500, 2_100) in spans(plan)
    plan = planned(loaded=(loaded("Isvarde-B", 1_400, 2_100),))
    assert [s.kind for s in plan.result.shortfalls if s.kind == "loaded"] == ["loaded"]
    assert "Isvarde-B" not in {row[0] for row in spans(plan)}


def test_neither_slots_nor_a_schedule_change_nothing() -> None:
    run = make_run(craft=PLENTY)
    problem, _ = build_problem(run, make_windows(PASSES), [DOWN] * 3)
    more = make_run(craft=PLENTY, slots=(slot("Teasel-2", 0, 7_200),))
    other, _ = build_problem(more, make_windows(PASSES), [DOWN] * 3)
    assert problem.options.start_s.tolist() == other.options.start_s.tolist()
    assert problem.options.downlink.all()
