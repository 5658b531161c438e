"""Pins, forbids, emergencies and frozen contacts: in the plan, or missed and said so in the user's words."""

from __future__ import annotations

from typing import Any

import pytest
from planning_runs import BOTH, DOWN, UP, at, closure, make_run, make_windows

from passplan.inputs.decisions import Decision, Published
from passplan.link.choice import WindowLink
from passplan.planning.plan import Plan, make_plan

PASSES = [("Teasel-1", "Isvarde-A", 600, 1_800), ("Teasel-2", "Isvarde-A", 900, 2_100),
          ("Teasel-1", "Isvarde-B", 3_000, 4_200)]


def decision(kind: str, start_s: float | None = None, end_s: float | None = None, **rest: Any) -> Decision:
    span = {} if start_s is None or end_s is None else {"start_utc": at(start_s), "end_utc": at(end_s)}
    return Decision(kind=kind, **span, **rest)


def published(craft: str, antenna: str, start_s: float, end_s: float) -> Published:
    return Published(spacecraft=craft, antenna=antenna, start_utc=at(start_s), end_utc=at(end_s))


def planned(*decisions: Decision, link: WindowLink = DOWN, policy: dict[str, Any] | None = None, **rest: Any) -> Plan:
    run = make_run({"worth_per_money": 1e6, **(policy or {})}, decisions=decisions, **rest)
    return make_plan(run, make_windows(PASSES), [link] * len(PASSES))


def rows(plan: Plan) -> list[tuple[str, str, int, str]]:
    table = plan.contacts
    return [(c, a, int(d), o) for c, a, d, o in zip(
        table["spacecraft"], table["antenna"], table["duration_s"], table["origin"], strict=True)]


def test_a_pinned_span_is_held_though_it_costs_more_than_it_brings() -> None:
    pin = decision("pin", 3_100, 3_500, spacecraft="Teasel-1", antenna="Isvarde-B")
    assert all(antenna == "Isvarde-A" for _, antenna, _, _ in rows(planned()))
    plan = planned(pin)
    kept = plan.contacts[plan.contacts["antenna"] == "Isvarde-B"].iloc[0]
    assert kept["origin"] == "pinned"
    assert (kept["start_utc"] - make_run().start_utc).total_seconds() <= 3_100
    assert (kept["end_utc"] - make_run().start_utc).total_seconds() >= 3_500


def test_a_pinned_window_is_used_even_if_it_can_only_command() -> None:
    plan = planned(decision("pin", window="Teasel-1.Isvarde-B.2"), link=UP)
    assert [(c, a, o) for c, a, _, o in rows(plan)] == [("Teasel-1", "Isvarde-B", "pinned")]


def test_what_is_forbidden_is_cut_out_and_said_so() -> None:
    plan = planned(decision("forbid", 1_000, 2_200, antenna="Isvarde-A", note="crane"))
    assert rows(plan) == [("Teasel-1", "Isvarde-A", 400, "planned")]
    unused = plan.unused.set_index("window_id").loc["Teasel-2.Isvarde-A.1"]
    assert (unused["reason"], unused["detail"]) == ("forbidden", "forbidden: crane")
    plan = planned(decision("forbid", window="Teasel-1.Isvarde-A.0"))
    assert rows(plan)[0][0] == "Teasel-2"
    assert plan.unused.set_index("window_id").loc["Teasel-1.Isvarde-A.0", "reason"] == "forbidden"


def test_a_forbidden_spacecraft_makes_room_for_others() -> None:
    assert {craft for craft, *_ in rows(planned(decision("forbid", spacecraft="Teasel-2")))} == {"Teasel-1"}


def test_an_emergency_outranks_a_pin_and_a_frozen_contact() -> None:
    plan = planned(
        decision("pin", 600, 1_800, spacecraft="Teasel-1", antenna="Isvarde-A"),
        decision("emergency", 900, 2_200, spacecraft="Teasel-2", min_duration_s=600, note="tumbling"), link=BOTH,
        published=(published("Teasel-1", "Isvarde-A", 600, 1_800),), policy={"freeze_h": 1.0})
    assert ("Teasel-2", "emergency") in [(craft, origin) for craft, _, _, origin in rows(plan)]
    assert [(s.kind, s.points) for s in plan.result.shortfalls] == [("pin", 20.0), ("frozen", 100.0)]
    assert plan.result.shortfalls[0].sentence == (
        "The pinned contact is not in the plan: "
        "every contact that would fit it collides with other requirements.")


def test_published_contacts_are_frozen_until_the_freeze_instant_only() -> None:
    contacts = (published("Teasel-2", "Isvarde-A", 1_017, 1_900), published("Teasel-1", "Isvarde-B", 3_200, 3_900))
    plan = planned(published=contacts, policy={"freeze_h": 0.5})
    assert ("Teasel-2", "Isvarde-A", 883, "frozen") in rows(plan)
    assert not any(antenna == "Isvarde-B" for _, antenna, _, _ in rows(plan))
    both = planned(published=contacts, policy={"freeze_h": 1.0})
    assert ("Teasel-1", "Isvarde-B", 700, "frozen") in rows(both)
    assert not any(origin == "frozen" for *_, origin in rows(planned(published=contacts)))


@pytest.mark.parametrize(("late_s", "held"), [(-5, True), (-60, True), (-61, False)])
def test_a_frozen_contact_is_cut_where_its_window_has_moved_by_up_to_a_minute(late_s: int, held: bool) -> None:
    contact = published("Teasel-1", "Isvarde-A", 600 + late_s, 1_500)
    plan = planned(published=(contact,), policy={"freeze_h": 1.0})
    assert (("Teasel-1", "Isvarde-A", 900, "frozen") in rows(plan)) == held
    assert [s.kind for s in plan.result.shortfalls] == ([] if held else ["frozen"])


@pytest.mark.parametrize(("item", "why"), [
    (decision("pin", window="Teasel-9.Isvarde-A.4"), "the run has no window of that name"),
    (decision("pin", 5_000, 5_600, spacecraft="Teasel-1", antenna="Isvarde-A"), "is not in view of Isvarde-A then"),
    (decision("pin", 1_000, 3_000, spacecraft="Teasel-1", antenna="Isvarde-A"), "no longer open for all of that time"),
    (decision("emergency", 0, 500, spacecraft="Teasel-1"), "is not in view of any antenna then"),
    (decision("emergency", 3_100, 3_700, spacecraft="Teasel-1"), "or offers no such contact"),
])
def test_what_cannot_be_is_a_shortfall_with_its_reason(item: Decision, why: str) -> None:
    assert why in planned(item).result.shortfalls[0].sentence


def test_a_pin_under_a_closure_or_a_forbid_says_so() -> None:
    pin = decision("pin", 700, 1_700, spacecraft="Teasel-1", antenna="Isvarde-A")
    closed = planned(pin, closures=(closure("Isvarde-A", 1_000, 1_100),))
    assert "Isvarde-A is closed" in closed.result.shortfalls[0].sentence
    forbidden = planned(pin, decision("forbid", spacecraft="Teasel-1", note="safe mode"))
    assert "forbidden: safe mode" in forbidden.result.shortfalls[0].sentence
