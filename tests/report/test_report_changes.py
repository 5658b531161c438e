"""A plan against an earlier one: every contact has its change, and nothing that is gone is forgotten."""

from __future__ import annotations

import json
from collections import Counter

import pandas as pd

from passplan.inputs.run import Run
from passplan.planning.changes import compare
from passplan.planning.record import PlanRecord
from passplan.planning.steps import plan_run


def test_the_same_plan_again_keeps_everything(short_run: Run, short_plan: PlanRecord) -> None:
    again = plan_run(short_run, against=short_plan)
    assert set(again.contacts["change"]) == {"kept"}
    assert again.summary["against"]["dropped"] == []
    assert again.summary["against"]["revisions"] == {}
    assert again.summary["plan_id"] == short_plan.summary["plan_id"]


def test_an_outage_changes_what_it_touches(replanned: PlanRecord, short_plan: PlanRecord) -> None:
    against = replanned.summary["against"]
    assert against["plan_id"] == short_plan.summary["plan_id"]
    counts = Counter(replanned.contacts["change"])
    assert {name: counts[name] for name in ("new", "kept", "retimed", "moved")} == {
        name: n for name, n in against["counts"].items() if name != "dropped"
    }
    assert counts["kept"] > 10
    before = set(short_plan.contacts["contact_id"])
    after = set(replanned.contacts["contact_id"])
    assert {row["contact_id"] for row in against["dropped"]} == before - after
    assert len(before - after) > 3
    json.dumps(against, allow_nan=False)


def test_each_change_is_what_it_says(replanned: PlanRecord, short_plan: PlanRecord) -> None:
    before = short_plan.contacts.set_index("contact_id")
    moved_to = {row["moved_to"] for row in replanned.summary["against"]["dropped"] if row["moved_to"]}
    for row in replanned.contacts.itertuples():
        if row.change == "kept":
            assert before.loc[row.contact_id, "start_utc"] == row.start_utc
            assert before.loc[row.contact_id, "end_utc"] == row.end_utc
        elif row.change == "retimed":
            assert row.contact_id in before.index
        else:
            assert row.contact_id not in before.index
            assert (row.contact_id in moved_to) == (row.change == "moved")


def test_a_contact_moves_only_to_another_antenna_of_the_same_pass(replanned: PlanRecord) -> None:
    contacts = replanned.contacts.set_index("contact_id")
    windows = replanned.windows.set_index("window_id")
    for row in replanned.summary["against"]["dropped"]:
        if row["moved_to"]:
            other = contacts.loc[row["moved_to"]]
            window = windows.loc[other["window_id"]]
            assert other["spacecraft"] == row["spacecraft"]
            assert other["antenna"] != row["antenna"]
            assert pd.Timestamp(row["start_utc"].rstrip("Z")) < window["los_utc"]
            assert pd.Timestamp(row["end_utc"].rstrip("Z")) > window["aos_utc"]


def test_revisions_count_on_and_the_dropped_stay_dropped(short_plan: PlanRecord, replanned: PlanRecord) -> None:
    gone = {row["contact_id"] for row in replanned.summary["against"]["dropped"]}
    assert all(replanned.summary["against"]["revisions"][name] == 1 for name in gone)
    still = compare(replanned, replanned)
    assert {row["contact_id"] for row in still.summary["against"]["dropped"]} == gone
    assert {still.summary["against"]["revisions"][name] for name in gone} == {1}
    back = compare(short_plan, replanned)
    revisions = back.summary["against"]["revisions"]
    assert all(revisions[name] == 2 for name in gone)
    assert not {row["contact_id"] for row in back.summary["against"]["dropped"]} & gone
