"""The front door: a run, its windows and links become tables."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from planning_runs import BOTH, DOWN, START, UP, closure, make_run, make_windows, request

from passplan.planning.plan import Plan, make_plan
from passplan.planning.tables import CONTACT_COLUMNS, SEGMENT_COLUMNS
from passplan.planning.unused import REASONS, UNUSED_COLUMNS

ROWS = [
    ("Teasel-1", "Isvarde-A", 600.25, 1_199.75),
    ("Teasel-2", "Isvarde-A", 700.0, 1_300.0),
    ("Teasel-1", "Isvarde-B", 650.0, 1_250.0),
    ("Teasel-2", "Isvarde-B", 3_000.0, 3_100.0),
    ("Teasel-2", "Isvarde-A", 3_000.0, 3_900.0),
]


def second(column: pd.Series) -> np.ndarray:
    return ((column.to_numpy() - START) / np.timedelta64(1, "s")).astype(int)


@pytest.fixture(scope="module")
def plan() -> Plan:
    requests = (request("ask", "Teasel-2", 2_900, 4_000), request("no", "Teasel-1", 0, 500))
    run = make_run({"command_every_h": 1}, requests=requests)
    return make_plan(run, make_windows(ROWS), [BOTH, DOWN, DOWN, DOWN, BOTH])


def test_tables_have_their_columns_and_types(plan: Plan) -> None:
    assert tuple(plan.contacts.columns) == CONTACT_COLUMNS
    assert tuple(plan.segments.columns) == SEGMENT_COLUMNS
    assert tuple(plan.unused.columns) == UNUSED_COLUMNS
    for table in (plan.contacts, plan.segments):
        assert {str(table[c].dtype) for c in ("start_utc", "end_utc")} == {"datetime64[ms]"}


def test_contacts_are_flyable_and_add_up(plan: Plan) -> None:
    contacts = plan.contacts
    assert len(contacts) > 0
    for _, mine in contacts.groupby("antenna"):
        assert (second(mine["start_utc"])[1:] >= second(mine["end_utc"])[:-1] + 90).all()
    for _, mine in contacts.groupby("spacecraft"):
        assert (second(mine["start_utc"])[1:] >= second(mine["end_utc"])[:-1]).all()
    assert contacts["volume_mb"].sum() == pytest.approx(plan.result.account.delivered_mb.sum(), rel=1e-12)
    assert plan.segments["volume_mb"].sum() == pytest.approx(contacts["volume_mb"].sum(), rel=1e-12)
    assert np.allclose(contacts["value"], contacts["weight"] * contacts["volume_mb"])
    assert contacts["contact_id"].is_unique
    assert plan.result.value == pytest.approx(
        contacts["value"].sum() - 0.1 * plan.result.account.lost_mb.sum(), rel=1e-9)


def test_every_window_is_used_or_has_a_reason(plan: Plan) -> None:
    used, unused = set(plan.contacts["window_id"]), set(plan.unused["window_id"])
    assert not used & unused
    assert len(used | unused) == len(ROWS)
    assert set(plan.unused["reason"]) <= set(REASONS)
    assert (plan.unused["detail"].str.len() > 0).all()
    assert plan.unused.set_index("window_id")["reason"]["Teasel-2.Isvarde-B.3"] == "too_short"


def test_requests_are_marked_and_missed_ones_named(plan: Plan) -> None:
    asked = plan.contacts[plan.contacts["origin"] == "requested"]
    assert set(asked["spacecraft"]) == {"Teasel-2"}
    assert "no" in {s.name for s in plan.result.shortfalls if s.kind == "request"}


def test_the_reason_names_what_stands_in_the_way() -> None:
    run = make_run({"cut_grid_s": 0, "options_per_window": 1}, craft={"storage_mb": 9e4, "start_fill_mb": 8e4})
    rows = [("Teasel-1", "Isvarde-A", 600, 1_600), ("Teasel-2", "Isvarde-A", 900, 1_400),
            ("Teasel-1", "Isvarde-B", 700, 1_100)]
    table = make_plan(run, make_windows(rows), [DOWN] * 3).unused.set_index("window_id")
    assert table["reason"].tolist() == ["antenna_busy", "spacecraft_busy"]
    assert "Isvarde-A is taken: Teasel-1 on Isvarde-A from 00:10:00 to 00:26:40" in table["detail"].iloc[0]


def test_an_expensive_contact_is_not_worth_it_and_an_empty_store_brings_nothing() -> None:
    dear = make_run({"worth_per_money": 1e6, "spill_cost_per_mb": 0.0})
    assert make_plan(dear, make_windows([("Teasel-1", "Isvarde-B", 600, 900)]), [DOWN]).unused["reason"].tolist() == [
        "not_worth_it"]
    dry = make_run(craft={"start_fill_mb": 0.0, "generation_mb_per_s": 0.0})
    assert make_plan(dry, make_windows([("Teasel-1", "Isvarde-A", 600, 900)]), [DOWN]).unused["reason"].tolist() == [
        "nothing_aboard"]


def test_a_cut_says_why() -> None:
    run = make_run(craft={"storage_mb": 9e4, "start_fill_mb": 8e4}, closures=(closure("Isvarde-A", 1_000, 1_300),))
    contacts = make_plan(run, make_windows([("Teasel-1", "Isvarde-A", 600, 1_200)]), [DOWN]).contacts
    assert contacts["cut"].tolist() == ["end: closure"]


def test_a_contact_for_commands_alone_has_no_modcod_and_no_volume() -> None:
    plan = make_plan(make_run({"command_every_h": 1}), make_windows([("Teasel-1", "Isvarde-A", 600, 1_200)]), [UP])
    row = plan.contacts.iloc[0]
    assert (row["service"], row["modcod"], row["volume_mb"], row["radio"]) == ("command", "", 0.0, "s")
    assert len(plan.segments) == 0


def test_a_spacecraft_that_is_left_out_takes_no_part_and_its_request_is_a_shortfall() -> None:
    run = make_run(
        {}, orbits={"Teasel-2": None}, left_out={"Teasel-1": "too old"}, requests=(request("ask", "Teasel-1", 0, 999),))
    plan = make_plan(run, make_windows(ROWS[1:2]), [DOWN])
    assert plan.problem.fleet.names == ("Teasel-2",)
    assert "takes no part" in plan.result.shortfalls[0].sentence


def test_no_windows_is_an_empty_plan_with_typed_tables() -> None:
    plan = make_plan(make_run(), make_windows([]), [])
    assert plan.result.status == "empty"
    assert (len(plan.contacts), len(plan.segments), len(plan.unused)) == (0, 0, 0)
    assert str(plan.contacts["start_utc"].dtype) == "datetime64[ms]"
    assert str(plan.contacts["volume_mb"].dtype) == "float64"


def test_the_same_run_gives_the_same_plan_and_progress_is_told() -> None:
    told: list[tuple[str, int, int]] = []
    plans = [make_plan(make_run(), make_windows(ROWS), [BOTH] * 5, progress=lambda *now: told.append(now))
             for _ in range(2)]
    pd.testing.assert_frame_equal(plans[0].contacts, plans[1].contacts)
    pd.testing.assert_frame_equal(plans[0].unused, plans[1].unused)
    assert told
    assert "gap" in told[0][0]
