"""Stand-bys: each way to promise a second antenna and not to hold it is caught and named."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from datetime import UTC, datetime

import numpy as np
import pandas as pd
import pytest
from audit_bench import ROOT

from passplan.inputs.calendar_records import Closure, Request
from passplan.inputs.load import load_run
from passplan.inputs.run import Run
from passplan.planning.audit import Fault, audit_plan
from passplan.planning.record import PlanRecord
from passplan.planning.steps import plan_run

Spoil = Callable[[pd.DataFrame], pd.DataFrame]


@pytest.fixture(scope="module")
def planned(tmp_path_factory: pytest.TempPathFactory) -> tuple[Run, PlanRecord]:
    """A plan for one spacecraft, with a request that wants a stand-by."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv("XDG_CACHE_HOME", str(tmp_path_factory.mktemp("cache")))
        whole = load_run(ROOT / "configs" / "daily.toml")
        asked = Request(
            name="drill", spacecraft="Teasel-1", service="both", standby=True, min_duration_s=300,
            earliest_utc=datetime(2027, 3, 9, 15, tzinfo=UTC), latest_utc=datetime(2027, 3, 9, 16, tzinfo=UTC))
        run = replace(
            whole, spacecraft={"Teasel-1": whole.spacecraft["Teasel-1"]}, orbits={"Teasel-1": whole.orbits["Teasel-1"]},
            requests=(asked,))
        return run, plan_run(run)


def _faults(planned: tuple[Run, PlanRecord], spoil: Spoil, run: Run | None = None) -> list[Fault]:
    own, record = planned
    return audit_plan(run or own, spoil(record.contacts.copy()), record.segments, record.summary)


def _said(faults: list[Fault], kind: str) -> str:
    return "\n".join(str(fault) for fault in faults if fault.kind == kind)


def _spare(table: pd.DataFrame) -> int:
    return int(np.flatnonzero(table["origin"] == "standby")[0])


def _with(**values: object) -> Spoil:
    """The table with some cells of the stand-by's row changed."""
    def spoil(table: pd.DataFrame) -> pd.DataFrame:
        for column, value in values.items():
            table.loc[table.index[_spare(table)], column] = value
        return table
    return spoil


def test_the_plan_holds_one_stand_by_and_is_sound(planned: tuple[Run, PlanRecord]) -> None:
    contacts = planned[1].contacts
    at = _spare(contacts)
    spare, first = contacts.iloc[at], contacts.iloc[at - 1]
    assert (first["origin"], first["spacecraft"]) == ("requested", spare["spacecraft"])
    assert first["antenna"] != spare["antenna"]
    assert (first["start_utc"], first["end_utc"]) == (spare["start_utc"], spare["end_utc"])
    assert (contacts["origin"] == "standby").sum() == 1
    assert _faults(planned, lambda table: table) == []


def test_a_stand_by_that_is_missing(planned: tuple[Run, PlanRecord]) -> None:
    faults = _faults(planned, lambda table: table[table["origin"] != "standby"])
    assert "no contact with a second antenna at the ready meets it" in _said(faults, "request")
    assert {fault.kind for fault in faults} == {"request"}


def test_a_stand_by_on_the_antenna_of_the_contact_itself(planned: tuple[Run, PlanRecord]) -> None:
    contacts = planned[1].contacts
    first = contacts.iloc[_spare(contacts) - 1]
    same = {key: first[key] for key in ("antenna", "site", "radio", "frequency_mhz", "polarisation", "modcod",
                                        "service", "usable_s", "cost")}
    faults = _faults(planned, _with(**same))
    assert "cannot stand by for a contact of its own" in _said(faults, "standby")
    assert _said(faults, "request") and _said(faults, "antenna_overlap")


def test_a_stand_by_that_comes_a_second_late(planned: tuple[Run, PlanRecord]) -> None:
    def late(table: pd.DataFrame) -> pd.DataFrame:
        at = table.index[_spare(table)]
        table.loc[at, "start_utc"] += np.timedelta64(1, "s")
        table.loc[at, "duration_s"] -= 1
        table.loc[at, "usable_s"] -= 1
        return table
    faults = _faults(planned, late)
    assert "it stands by for no contact of Teasel-1 of the same time" in _said(faults, "standby")
    assert {fault.kind for fault in faults} == {"standby", "request"}


def test_a_stand_by_that_cannot_do_what_is_asked(planned: tuple[Run, PlanRecord]) -> None:
    assert {fault.kind for fault in _faults(planned, _with(service="downlink"))} == {"request"}


def test_a_stand_by_that_claims_data(planned: tuple[Run, PlanRecord]) -> None:
    assert "yet it claims to bring data down" in _said(_faults(planned, _with(volume_mb=5.0)), "standby")


@pytest.mark.parametrize(("values", "kind"), [
    ({"usable_s": 3_000}, "usable"), ({"modcod": "QPSK 17/3"}, "modcod"), ({"radio": "s-command"}, "radio")])
def test_a_stand_by_whose_link_is_made_up(
    planned: tuple[Run, PlanRecord], values: dict[str, object], kind: str,
) -> None:
    assert kind in {fault.kind for fault in _faults(planned, _with(**values))}


def test_a_stand_by_whose_antenna_is_closed_or_taken(planned: tuple[Run, PlanRecord]) -> None:
    run, record = planned
    spare = record.contacts.iloc[_spare(record.contacts)]
    closed = Closure(antenna=spare["antenna"], start_utc=spare["start_utc"].to_pydatetime().replace(tzinfo=UTC),
                     end_utc=spare["end_utc"].to_pydatetime().replace(tzinfo=UTC))
    shut = _faults(planned, lambda table: table, replace(run, closures=(*run.closures, closed)))
    assert {fault.kind for fault in shut} == {"closure"}
    twice = _faults(planned, lambda table: pd.concat(
        [table, table[table["origin"] == "standby"].assign(contact_id="another")], ignore_index=True))
    assert "antenna_overlap" in {fault.kind for fault in twice}


def test_a_contact_cannot_pass_for_a_stand_by(planned: tuple[Run, PlanRecord]) -> None:
    def disguised(table: pd.DataFrame) -> pd.DataFrame:
        table.loc[table.index[0], "origin"] = "standby"
        return table
    assert "standby" in {fault.kind for fault in _faults(planned, disguised)}
