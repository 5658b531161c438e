"""Requirements beyond plain requests: each way to miss one and not to say so is caught and named."""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC

import numpy as np
import pandas as pd
import pytest
from audit_bench import Bench

from passplan.inputs.calendar_records import Request
from passplan.inputs.decisions import Decision, Published
from passplan.inputs.policy import Guarantee


def _sentences(bench: Bench, kind: str) -> str:
    return "\n".join(str(fault) for fault in bench.audit() if fault.kind == kind)


def _ask_for(bench: Bench, contact: int, **rest: object) -> None:
    """A request that one contact of the plan meets exactly."""
    row = bench.contacts.iloc[contact]
    start, end = (row[key].to_pydatetime().replace(tzinfo=UTC) for key in ("start_utc", "end_utc"))
    asked = Request(name="asked", spacecraft=row["spacecraft"], antenna=row["antenna"], earliest_utc=start,
                    latest_utc=end, **rest)
    bench.run = replace(bench.run, requests=(*bench.run.requests, asked))


@pytest.mark.parametrize("seconds", [1, -1])
def test_a_fixed_request_shifted_by_a_second(bench: Bench, seconds: int) -> None:
    row = bench.contacts.iloc[3]
    _ask_for(bench, 3, fixed=True)
    assert bench.audit() == []
    asked = bench.run.requests[-1]
    moved = asked.model_copy(update={
        "earliest_utc": asked.earliest_utc + pd.Timedelta(seconds=seconds).to_pytimedelta(),
        "latest_utc": asked.latest_utc + pd.Timedelta(seconds=seconds).to_pytimedelta()})
    bench.run = replace(bench.run, requests=(*bench.run.requests[:-1], moved))
    assert "request asked: no contact meets it" in _sentences(bench, "request")
    assert row["duration_s"] == int((row["end_utc"] - row["start_utc"]) / np.timedelta64(1, "s"))


def test_ranging_on_an_antenna_that_does_not_measure_range(bench: Bench) -> None:
    both = int(np.flatnonzero(bench.contacts["service"] == "both")[0])
    _ask_for(bench, both, service="ranging")
    assert "request asked: no contact meets it" in _sentences(bench, "request")
    name = bench.contacts["antenna"].iloc[both]
    able = bench.run.antennas[name].model_copy(update={"ranging": True})
    bench.run = replace(bench.run, antennas={**bench.run.antennas, name: able})
    assert bench.audit() == []


def _stated(bench: Bench, contact: int) -> dict[str, object]:
    """Spacecraft, antenna and span of one contact of the plan."""
    row = bench.contacts.iloc[contact]
    start, end = (row[key].to_pydatetime().replace(tzinfo=UTC) for key in ("start_utc", "end_utc"))
    return {"spacecraft": row["spacecraft"], "antenna": row["antenna"], "start_utc": start, "end_utc": end}


def _swap(bench: Bench, contact: int) -> None:
    """Another antenna of the same site takes over, in the table only."""
    row = bench.contacts.iloc[contact]
    other = next(n for n, a in bench.run.antennas.items() if n != row["antenna"] and a.site == row["site"])
    bench.set_contact(contact, antenna=other)


def test_a_pinned_contact_that_moved_to_another_antenna(bench: Bench) -> None:
    bench.run = replace(bench.run, decisions=(Decision(kind="pin", **_stated(bench, 3)),))
    assert bench.audit() == []
    _swap(bench, 3)
    assert "no contact holds its span, and the plan does not say so" in _sentences(bench, "pin")


def test_a_pinned_window_that_is_not_used(bench: Bench) -> None:
    bench.run = replace(bench.run, decisions=(Decision(kind="pin", window=bench.contacts["window_id"].iloc[3]),))
    assert bench.audit() == []
    bench.set_contact(3, window_id="Teasel-1.Isvarde-A.270309-99")
    assert "no contact uses the window" in _sentences(bench, "pin")


@pytest.mark.parametrize("by_window", [True, False])
def test_a_contact_that_was_forbidden(bench: Bench, by_window: bool) -> None:
    row = bench.contacts.iloc[3]
    names = {"window": row["window_id"]} if by_window else {"antenna": row["antenna"]}
    span = {} if by_window else {key: value for key, value in _stated(bench, 3).items() if key.endswith("utc")}
    bench.run = replace(bench.run, decisions=(Decision(kind="forbid", note="crane", **names, **span),))
    faults = bench.audit()
    assert [(fault.kind, row["contact_id"] in fault.place) for fault in faults] == [("forbidden", True)]
    assert "crane" in faults[0].sentence


def test_an_emergency_without_its_contact(bench: Bench) -> None:
    there = {**_stated(bench, 3), "antenna": None, "service": bench.contacts["service"].iloc[3]}
    bench.run = replace(bench.run, decisions=(Decision(kind="emergency", **there),))
    assert bench.audit() == []
    bench.shift(3, end_s=1)
    assert "no contact answers it" in _sentences(bench, "emergency")


def test_a_frozen_contact_shifted_by_a_second(bench: Bench) -> None:
    policy = bench.run.policy.model_copy(update={"freeze_h": 24.0})
    contact = next(k for k in range(len(bench.contacts)) if bench.contacts["duration_s"].iloc[k] > 400)
    bench.run = replace(bench.run, published=(Published(**_stated(bench, contact)),), policy=policy)
    assert bench.audit() == []
    bench.shift(contact, start_s=1)
    assert "no contact is as it was published" in _sentences(bench, "frozen")


def test_a_frozen_contact_may_end_where_the_antenna_can_follow_no_longer(bench: Bench) -> None:
    policy = bench.run.policy.model_copy(update={"freeze_h": 24.0})
    contact = int(np.flatnonzero(bench.contacts["antenna"] == "Isvarde-A")[0])
    there = _stated(bench, contact)
    there["end_utc"] += pd.Timedelta(seconds=20).to_pytimedelta()
    bench.run = replace(bench.run, published=(Published(**there),), policy=policy)
    assert bench.audit() == []
    there["end_utc"] += pd.Timedelta(seconds=60).to_pytimedelta()
    bench.run = replace(bench.run, published=(Published(**there),))
    assert "no contact is as it was published" in _sentences(bench, "frozen")


def test_a_contact_less_than_due(bench: Bench) -> None:
    name = "Teasel-1"
    have = int((bench.contacts["spacecraft"] == name).sum())
    craft = bench.run.spacecraft[name].model_copy(update={"least_contacts_per_day": have})
    bench.run = replace(bench.run, spacecraft={**bench.run.spacecraft, name: craft})
    assert bench.audit() == []
    last = int(np.flatnonzero(bench.contacts["spacecraft"] == name)[-1])
    bench.set_contact(last, spacecraft="Teasel-3")
    said = f"the contacts of Teasel-1 on 2027-03-09: {have - 1} contacts of {have}, and the plan"
    assert said in _sentences(bench, "daily")


def test_a_mission_with_less_than_it_was_promised(bench: Bench) -> None:
    mission = bench.run.spacecraft["Teasel-1"].mission
    carried = 0.0
    for row in bench.segments.to_dict("records"):
        owner = bench.contacts.set_index("contact_id").loc[row["contact_id"]]
        craft = bench.run.spacecraft[owner["spacecraft"]]
        if craft.mission == mission:
            seconds = (row["end_utc"] - row["start_utc"]).total_seconds()
            carried += min(row["rate_mbps"] / 8 * seconds,
                           craft.storage_mb + craft.generation_mb_per_s * owner["duration_s"])
    for need, kinds in ((0.999 * carried, set()), (1.001 * carried, {"guarantee"})):
        policy = bench.run.policy.model_copy(update={"guarantee": (Guarantee(mission=mission, mb=need),)})
        bench.run = replace(bench.run, policy=policy)
        assert bench.kinds() == kinds
    bench.summary["shortfalls"] = [{"kind": "guarantee", "name": f"MB of mission {mission} on 2027-03-09"}]
    assert bench.kinds() == set()


def test_a_mission_below_the_fair_floor(bench: Bench) -> None:
    bench.run = replace(bench.run, policy=bench.run.policy.model_copy(update={"fairness": "max_min"}))
    assert "not as a share from 0 to 1" in _sentences(bench, "fair")
    bench.summary["fair_floor"] = 0.2
    assert bench.audit() == []
    bench.contacts = bench.contacts[bench.contacts["spacecraft"] != "Teasel-3"]
    assert "the share of" in _sentences(bench, "fair") or bench.run.spacecraft["Teasel-3"].mission == "sea state"
    bench.contacts = bench.contacts[bench.contacts["spacecraft"] != "Teasel-1"]
    assert "the share of sea state: 0 MB of" in _sentences(bench, "fair")
