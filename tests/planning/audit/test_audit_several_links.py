"""A plan in which spacecraft are in two contacts at once: the audit follows it, and names what is wrong with it."""

from __future__ import annotations

from dataclasses import replace
from itertools import combinations

import numpy as np
import pandas as pd
import pytest

from passplan.inputs.run import Run
from passplan.planning.audit import Fault, audit_plan
from passplan.planning.record import PlanRecord
from passplan.planning.steps import plan_run


def with_links(run: Run, links: int, **keys: object) -> Run:
    """The run in which every spacecraft has so many links."""
    return replace(run, spacecraft={
        name: craft.model_copy(update={"links": links, **keys}) for name, craft in run.spacecraft.items()})


@pytest.fixture(scope="module")
def doubled(short_run: Run) -> tuple[Run, PlanRecord]:
    """The audited plan of three spacecraft of the short run, with two links each and full storages."""
    names = ("Ambril-1", "Ambril-4", "Highwater")
    few = replace(short_run, requests=(), orbits={name: short_run.orbits[name] for name in names},
                  spacecraft={name: short_run.spacecraft[name] for name in names})
    run = with_links(few, 2, storage_mb=3e5, start_fill_mb=2e5)
    return run, plan_run(run)


def pairs_at_once(plan: PlanRecord) -> list[tuple[str, str]]:
    """Ids of contacts of one spacecraft that overlap."""
    rows = plan.contacts.to_dict("records")
    return [(a["contact_id"], b["contact_id"]) for a, b in combinations(rows, 2)
            if a["spacecraft"] == b["spacecraft"] and a["start_utc"] < b["end_utc"] and b["start_utc"] < a["end_utc"]]


def audited(run: Run, plan: PlanRecord, contacts: pd.DataFrame | None = None) -> list[Fault]:
    return audit_plan(run, plan.contacts if contacts is None else contacts, plan.segments, plan.summary)


def test_two_at_once_are_planned_and_audited(doubled: tuple[Run, PlanRecord]) -> None:
    run, plan = doubled
    assert len(pairs_at_once(plan)) >= 2
    assert audited(run, plan) == []
    assert {b for _, b in pairs_at_once(plan)} <= set(plan.contacts["contact_id"])


def test_more_contacts_at_once_than_links_are_named(doubled: tuple[Run, PlanRecord]) -> None:
    run, plan = doubled
    faults = audited(with_links(run, 1), plan)
    assert {fault.kind for fault in faults} == {"spacecraft_overlap", "storage"}
    first, second = pairs_at_once(plan)[0]
    assert any(first in fault.sentence and second in fault.sentence for fault in faults)


def test_two_on_one_antenna_are_named(doubled: tuple[Run, PlanRecord]) -> None:
    run, plan = doubled
    first, second = pairs_at_once(plan)[0]
    contacts = plan.contacts.copy()
    antenna = contacts.loc[contacts["contact_id"] == first, "antenna"].item()
    contacts.loc[contacts["contact_id"] == second, "antenna"] = antenna
    wide = replace(run, antennas={**run.antennas, antenna: run.antennas[antenna].model_copy(update={"beams": 2})})
    sentences = [f.sentence for f in audited(wide, plan, contacts) if f.kind == "spacecraft_overlap"]
    assert sentences == [f"contacts {first} and {second} are on {antenna} at once"]


def test_data_that_moved_from_one_to_the_other_is_named(doubled: tuple[Run, PlanRecord]) -> None:
    run, plan = doubled
    for first, second in pairs_at_once(plan):
        rows = [plan.segments.index[plan.segments["contact_id"] == name] for name in (first, second)]
        if all(map(len, rows)):
            break
    contacts, segments = plan.contacts.copy(), plan.segments.copy()
    for name, row, more in ((first, rows[0][0], 1.0), (second, rows[1][0], -1.0)):
        segments.loc[row, "volume_mb"] += more
        mine = contacts["contact_id"] == name
        contacts.loc[mine, "volume_mb"] += more
        contacts.loc[mine, "value"] += more * contacts.loc[mine, "weight"]
    faults = audit_plan(run, contacts, segments, plan.summary)
    assert {fault.kind for fault in faults} == {"volume"}
    assert {fault.place.split()[1] for fault in faults} == {first, second}


def test_rest_is_asked_of_each_link(doubled: tuple[Run, PlanRecord]) -> None:
    run, plan = doubled
    spans = plan.contacts.groupby("spacecraft")
    name = spans.size().idxmax()
    own = plan.contacts[plan.contacts["spacecraft"] == name].sort_values("start_utc")
    edges = [((own[key].to_numpy() - run.start_utc) / np.timedelta64(1, "s")).tolist()
             for key in ("start_utc", "end_utc")]
    # What each contact finds: the link that ended first, of two.
    ended, rests = [-1e9, -1e9], []
    for start_s, end_s in zip(*edges, strict=True):
        rests.append(start_s - min(ended))
        ended[ended.index(min(ended))] = end_s
    least_s = min(rest for rest in rests if rest >= 0.0)

    def kinds(gap_s: float) -> list[str]:
        craft = run.spacecraft[name].model_copy(update={"contact_gap_s": gap_s})
        return [f.kind for f in audited(replace(run, spacecraft={**run.spacecraft, name: craft}), plan)]

    assert kinds(least_s) == []
    assert kinds(least_s + 1.0)[0] == "contact_gap"
