"""Rules of antennas, sites and money: what a run gives, and plans that equal the best of all plans."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from ground_cases import GroundJudge, limited_problem
from planning_cases import random_problem, some_of
from planning_runs import BOTH, DOWN, SteadyDownlink, at, closure, make_run, make_windows

from passplan.inputs.bookings import Booking
from passplan.inputs.ground import Antenna, Site
from passplan.inputs.run import Run
from passplan.link.choice import WindowLink
from passplan.planning.plan import Plan, build_problem, make_plan
from passplan.planning.portfolio import find_plan
from passplan.planning.price import price_of
from passplan.planning.problem import Limits
from passplan.planning.rented import Held, rented_time
from passplan.planning.rules import all_terms
from passplan.planning.rules.staffing import unstaffed_spans
from passplan.planning.spans import without
from passplan.planning.tentative import tentative_warnings, touched_by_tentative

Rows = list[tuple[str, str, float, float]]
# Two spacecraft over two antennas at the same time, one pass each.
SIDE_BY_SIDE: Rows = [("Teasel-1", "Isvarde-A", 600, 1_500), ("Teasel-2", "Isvarde-B", 600, 1_500)]
TWO: list[WindowLink] = [DOWN, DOWN]


def run_with(site: dict[str, Any] | None = None, antenna: dict[str, Any] | None = None, **rest: Any) -> Run:
    """The small run with more keys for its site and for its antenna A; both antennas are free of charge."""
    policy = {"cut_grid_s": 0, "options_per_window": 1, **rest.pop("policy", {})}
    run = make_run(policy, **rest)
    place = Site(**{**run.sites["Isvarde"].model_dump(), **(site or {})})
    antennas = {
        name: Antenna(**{**a.model_dump(), "price_per_minute": 0.0, **((antenna or {}) if name == "Isvarde-A" else {})})
        for name, a in run.antennas.items()}
    return replace(run, sites={"Isvarde": place}, antennas=antennas)


def planned(run: Run, rows: Rows = SIDE_BY_SIDE, links: list[WindowLink] = TWO) -> Plan:
    return make_plan(run, make_windows(rows), links)


def reasons(plan: Plan) -> list[str]:
    return plan.unused["reason"].tolist()


@pytest.mark.parametrize("block", some_of(range(4), 1))
def test_plans_under_limits_of_sites_and_money_equal_the_best_of_all_plans(block: int) -> None:
    bound = set()
    for seed in range(20 * block, 20 * block + 20):
        problem = limited_problem(seed)
        judge = GroundJudge(problem)
        points, value = judge.best()
        result = find_plan(problem, Limits(gap=0.0))
        chosen = frozenset(result.chosen)
        assert judge.kept(chosen), f"seed {seed}"
        assert judge.points(chosen) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert judge.value(chosen) == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        assert result.bound >= result.value
        bound |= {rows.kind for rows in all_terms(problem).rows if len(rows)}
    assert {"equipment_busy", "backhaul_full", "backhaul_busy", "budget"} <= bound


@pytest.mark.parametrize("seed", range(6))
def test_less_of_anything_is_never_worth_more(seed: int) -> None:
    problem = limited_problem(seed)
    free = find_plan(replace(problem, needs=()), Limits(gap=0.0))
    tight = find_plan(problem, Limits(gap=0.0))
    points = [sum(s.points for s in result.shortfalls) for result in (free, tight)]
    assert points[1] >= points[0] - 1e-9
    if points[1] == pytest.approx(points[0]):
        assert tight.value <= free.value + 1e-6


def test_rules_that_are_off_ask_for_nothing() -> None:
    problem, _ = build_problem(run_with(), make_windows(SIDE_BY_SIDE), TWO)
    assert problem.needs == ()
    assert sum(map(len, all_terms(random_problem(3)).rows)) == 0
    assert len(planned(run_with()).contacts) == 2


@pytest.mark.parametrize(("site", "reason", "words"), [
    ({"pool": [{"name": "X-band chain", "service": "downlink"}]}, "equipment_busy", "X-band chain of Isvarde is taken"),
    ({"contacts_at_once": 1}, "staff_busy", "the staff of Isvarde is taken"),
    ({"backhaul": {"rate_mbps": 159}}, "backhaul_busy", "the line of Isvarde is taken"),
    ({"backhaul": {"mb_per_day": 17_000}}, "backhaul_full", "the line of Isvarde on 2027-03-09 is taken"),
    ({"backhaul": {"rate_mbps": 1.6, "buffered": True}}, "backhaul_full", "the line of Isvarde on 2027-03-09 is taken"),
])
def test_what_a_site_shares_serves_one_of_two(site: dict[str, Any], reason: str, words: str) -> None:
    plan = planned(run_with(site))
    assert reasons(plan) == [reason]
    assert plan.unused["detail"].iloc[0].startswith(words)


@pytest.mark.parametrize("site", [
    {"pool": [{"name": "modem", "at_once": 2}]},
    {"pool": [{"name": "modem", "antennas": ["Isvarde-A"]}]},
    {"pool": [{"name": "modem", "service": "command"}]},
    {"pool": [{"name": "modem", "low_mhz": 2_000, "high_mhz": 2_300}]},
    {"contacts_at_once": 2}, {"backhaul": {"rate_mbps": 160}}, {"backhaul": {"mb_per_day": 17_600}},
    {"backhaul": {"rate_mbps": 2, "buffered": True}},
])
def test_what_a_site_shares_serves_both_where_there_is_enough(site: dict[str, Any]) -> None:
    assert len(planned(run_with(site)).contacts) == 2


def test_a_pool_is_held_while_preparing_unless_it_says_otherwise() -> None:
    rows: Rows = [("Teasel-1", "Isvarde-A", 600, 1_500), ("Teasel-2", "Isvarde-B", 1_560, 2_400)]
    for with_setup, contacts in ((True, 1), (False, 2)):
        pool = {"name": "modem", "with_setup": with_setup}
        assert len(planned(run_with({"pool": [pool]}), rows).contacts) == contacts


def test_a_pool_of_none_and_a_line_that_carries_nothing_leave_nothing() -> None:
    for site in ({"pool": [{"name": "modem", "at_once": 0}]}, {"backhaul": {"rate_mbps": 0}}):
        plan = planned(run_with(site))
        assert len(plan.contacts) == 0
        assert "it would need more than there is" in plan.unused["detail"].iloc[0]


def test_a_closed_line_bars_contacts_unless_the_site_buffers() -> None:
    shut = {"start_utc": at(500), "end_utc": at(1_600)}
    assert reasons(planned(run_with({"backhaul": {"rate_mbps": 900, "closure": [shut]}}))) == ["backhaul_closed"] * 2
    assert len(planned(run_with({"backhaul": {"rate_mbps": 900, "closure": [shut], "buffered": True}})).contacts) == 2
    # Receiving may begin the moment the line is open again: it needs no time to prepare.
    part = {"start_utc": at(0), "end_utc": at(900.5)}
    plan = planned(run_with({"backhaul": {"closure": [part]}}), SIDE_BY_SIDE[:1], TWO[:1])
    assert plan.contacts["start_utc"].tolist() == [np.datetime64(at(901).rstrip("Z"))]
    assert plan.contacts["cut"].tolist() == ["start: backhaul_closed"]


def test_closures_of_a_buffered_line_take_from_what_its_day_carries() -> None:
    # 86 400 s at 1.7 Mbit/s carry 18 360 MB; both contacts can bring 17 600 MB.
    line = {"rate_mbps": 1.7, "buffered": True}
    assert len(planned(run_with({"backhaul": line})).contacts) == 2
    shut = [{"start_utc": at(0), "end_utc": at(3_000)}, {"start_utc": at(2_000), "end_utc": at(4_000)}]
    assert len(planned(run_with({"backhaul": {**line, "closure": shut}})).contacts) == 1


@pytest.mark.parametrize(("shift", "spans"), [
    # A Tuesday, from midnight on for two hours, and a day on each side of it.
    ({"opens": "00:30", "closes": "01:00"}, [(-86_400, -84_600), (-82_800, 1_800), (3_600, 88_200), (90_000, 93_600)]),
    ({"opens": "22:00", "closes": "00:30"}, [(-84_600, -7_200), (1_800, 79_200), (88_200, 93_600)]),
    ({"opens": "00:00", "closes": "24:00", "days": ["tue"]}, [(-86_400, 0), (86_400, 93_600)]),
    # The site keeps UTC+1 in March.
    ({"opens": "01:15", "closes": "02:00", "zone": "site", "days": ["tue"]}, [(-86_400, 900), (3_600, 93_600)]),
    ({"opens": "00:00", "closes": "00:00"}, []),
])
def test_hours_without_staff(shift: dict[str, Any], spans: list[tuple[int, int]]) -> None:
    run = run_with({"staffed": [shift], "time_zone": "Europe/Oslo"})
    assert unstaffed_spans(run, run.sites["Isvarde"]) == spans


def test_hours_follow_summer_time() -> None:
    # Clocks in Oslo go from 02:00 to 03:00 on 28 March 2027: 01:00 to 04:00 are two hours that day.
    start = np.datetime64("2027-03-28T00:00:00.000", "ms")
    run = replace(run_with({"staffed": [{"opens": "01:00", "closes": "04:00", "zone": "site"}],
                            "time_zone": "Europe/Oslo"}), start_utc=start, end_utc=start + np.timedelta64(1, "D"))
    assert (7_200, 82_800) in unstaffed_spans(run, run.sites["Isvarde"])


def test_no_contact_nor_its_setup_outside_staffed_hours() -> None:
    plan = planned(run_with({"staffed": [{"opens": "00:12", "closes": "00:20"}]}))
    assert plan.contacts["start_utc"].tolist() == [np.datetime64(at(780).rstrip("Z"))] * 2
    assert plan.contacts["end_utc"].tolist() == [np.datetime64(at(1_170).rstrip("Z"))] * 2
    assert set(plan.contacts["cut"]) == {"start: unstaffed; end: unstaffed"}
    closed = planned(run_with({"staffed": [{"opens": "12:00", "closes": "13:00"}]}))
    assert closed.unused["detail"].tolist() == ["nobody is at Isvarde then"] * 2


@pytest.mark.parametrize(("through", "contacts"), [("keep_free", 0), ("plan_through", 1)])
def test_tentative_closures_are_the_policy_s_to_keep(through: str, contacts: int) -> None:
    tentative = closure("Isvarde-A", 500, 1_600).model_copy(update={"tentative": True, "kind": "booking"})
    run = run_with(policy={"tentative_closures": through}, closures=(tentative,))
    plan = planned(run, SIDE_BY_SIDE[:1], TWO[:1])
    assert len(plan.contacts) == contacts
    held = [Held("x.c1", "Isvarde-A", 1_600, 2_000), Held("y.c1", "Isvarde-A", 400, 501),
            Held("z.c1", "Isvarde-B", 0, 999)]
    touched = touched_by_tentative(run, held)
    assert [row["contact_id"] for row in touched] == ["y.c1"]
    assert "tentative booking of Isvarde-A from 2027-03-09 00:08 to 2027-03-09 00:26" in tentative_warnings(touched)[0]
    assert not touched_by_tentative(replace(run, closures=(closure("Isvarde-A", 0, 9_999),)), held)


def booking(state: str, start_s: float, end_s: float, **rest: Any) -> Booking:
    return Booking(antenna="Isvarde-A", start_utc=at(start_s), end_utc=at(end_s), state=state, **rest)


@pytest.mark.parametrize(("bookings", "antenna", "reason"), [
    ([booking("declined", 900, 1_000)], {}, "declined"),
    ([booking("asked", 0, 7_200, ask_by_utc=at(-1))], {}, "too_late_to_ask"),
    ([booking("open", 0, 7_200, ask_by_utc=at(-1))], {}, "too_late_to_ask"),
    ([], {"ask_before_h": 1}, "too_late_to_ask"),
    ([], {"ask_before_h": 0.1}, None),
    ([booking("asked", 0, 7_200, ask_by_utc=at(0))], {"ask_before_h": 1}, None),
    ([booking("granted", 0, 7_200, ask_by_utc=at(-9))], {"ask_before_h": 1}, None),
])
def test_rented_time_is_relied_on_only_where_it_can_be_had(
    bookings: list[Booking], antenna: dict[str, Any], reason: str | None,
) -> None:
    run = run_with(antenna={"rented": True, **antenna}, bookings=tuple(bookings), policy={"min_contact_s": 600})
    plan = planned(run, SIDE_BY_SIDE[:1], TWO[:1])
    assert reasons(plan) == ([] if reason is None else [reason])


def test_later_askings_see_less() -> None:
    run = run_with(antenna={"rented": True}, policy={"min_contact_s": 600})
    late = replace(run, asking_utc=np.datetime64(at(1_000).rstrip("Z")))
    assert len(planned(run, SIDE_BY_SIDE[:1], TWO[:1]).contacts) == 1
    assert len(planned(late, SIDE_BY_SIDE[:1], TWO[:1]).contacts) == 0


def test_what_is_still_to_ask_for_awaited_and_to_give_back() -> None:
    run = run_with(antenna={"rented": True, "ask_before_h": 0.5}, bookings=(
        booking("granted", 0, 1_000, give_back_by_utc=at(10)), booking("asked", 1_000, 1_200, ask_by_utc=at(60)),
        booking("granted", 5_000, 6_000, give_back_by_utc=at(-10)), booking("open", 4_000, 4_100)))
    found = rented_time(run, [
        Held("a", "Isvarde-A", 540, 1_530), Held("b", "Isvarde-A", 3_900, 4_050), Held("c", "Isvarde-B", 0, 900)])
    asked = [(row["start_utc"], row["end_utc"], row["ask_by_utc"], row["contact_id"]) for row in found["to_ask"]]
    assert asked == [
        (at(1_200), at(1_530), at(-600), "a"), (at(3_900), at(4_000), at(2_100), "b"),
        (at(4_000), at(4_050), None, "b")]
    assert [(row["start_utc"], row["end_utc"]) for row in found["awaited"]] == [(at(1_000), at(1_200))]
    # The later grant can no longer be returned.
    assert [(row["start_utc"], row["end_utc"], row["give_back_by_utc"]) for row in found["give_back"]] == [
        (at(0), at(540), at(10))]
    assert {row["name"] for rows in found.values() for row in rows} == {"Isvarde-A"}
    assert found["to_ask"][0]["sentence"] == (
        "2027-03-09 00:20 to 00:25 UTC, for contact a; to be asked for by 2027-03-08 23:50 UTC")
    assert found["give_back"][0]["sentence"] == (
        "2027-03-09 00:00 to 00:09 UTC can be given back until 2027-03-09 00:00 UTC")


@pytest.mark.parametrize(("prices", "duration_s", "cost"), [
    ({"price_per_minute": 3.0}, 90, 4.5),
    ({"price_per_minute": 3.0, "billed_s": 60}, 61, 6.0),
    ({"price_per_minute": 3.0, "billed_s": 60}, 120, 6.0),
    ({"price_per_contact": 40.0}, 700, 40.0),
    ({"price_per_contact": 5.0, "price_per_minute": 1.0, "minimum_charge": 20.0}, 600, 20.0),
    ({"price_per_contact": 5.0, "price_per_minute": 1.0, "minimum_charge": 20.0}, 1_200, 25.0),
])
def test_prices(prices: dict[str, Any], duration_s: int, cost: float) -> None:
    antenna = Antenna(name="a", site="s", **prices)
    assert price_of(antenna, duration_s) == pytest.approx(cost)


def test_a_budget_of_zero_leaves_the_free_antennas_and_says_why() -> None:
    run = run_with(antenna={"price_per_contact": 1.0}, policy={"budget_per_day": 0})
    plan = planned(run)
    assert plan.contacts["antenna"].tolist() == ["Isvarde-B"]
    assert reasons(plan) == ["budget"]
    assert plan.unused["detail"].tolist() == ["the budget of 0 for 2027-03-09: it would need more than there is"]


def test_the_budget_is_one_of_the_day_on_which_contacts_start() -> None:
    start = np.datetime64("2027-03-08T23:50:00.000", "ms")
    rows: Rows = [("Teasel-1", "Isvarde-A", 60, 500), ("Teasel-2", "Isvarde-A", 1_000, 1_500),
                  ("Teasel-1", "Isvarde-A", 1_800, 2_300)]
    run = run_with(antenna={"price_per_contact": 10.0}, policy={"budget_per_day": 10})
    windows = make_windows(rows)
    for column in ("aos_utc", "los_utc"):
        windows[column] -= np.timedelta64(600, "s")
    plan = make_plan(replace(run, start_utc=start, end_utc=start + np.timedelta64(7_200, "s")), windows, [DOWN] * 3)
    assert len(plan.contacts) == 2
    assert plan.contacts["cost"].sum() == 20.0
    assert reasons(plan) == ["budget"]


def test_a_slow_spacecraft_fits_beside_a_fast_one() -> None:
    run = run_with({"backhaul": {"rate_mbps": 100}})
    slow = WindowLink(SteadyDownlink(rate_mbps=20.0), None)
    assert len(planned(run, links=[DOWN, slow]).contacts) == 2
    assert len(planned(run, links=[BOTH, DOWN]).contacts) == 1


def test_spans_without_others() -> None:
    assert without((0, 100), [(90, 200), (20, 30), (25, 40), (-5, 3)]) == [(3, 20), (40, 90)]
    assert without((0, 100), [(0, 100)]) == []
    assert without((0, -5), []) == []
