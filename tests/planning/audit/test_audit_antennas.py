"""The audit names each way in which a plan breaks a rule of an antenna, a site or the budget.

The honest plan of ``audit_bench`` stays; a rule is set so that it just holds, and then so that it is just broken.
"""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime, timedelta
from typing import Any

import pandas as pd
import pytest
from audit_bench import Bench, settle

from passplan.inputs.bookings import Booking
from passplan.inputs.calendar_records import Closure
from passplan.inputs.ground import Antenna, Site
from passplan.inputs.setup_times import SetupTime

A = "Isvarde-A"
Instant = pd.Timestamp


def change_antenna(bench: Bench, name: str = A, **values: Any) -> None:
    antenna = Antenna(**{**bench.run.antennas[name].model_dump(), **values})
    bench.run = replace(bench.run, antennas={**bench.run.antennas, name: antenna})


def change_site(bench: Bench, name: str = "Isvarde", **values: Any) -> None:
    site = Site(**{**bench.run.sites[name].model_dump(), **values})
    bench.run = replace(bench.run, sites={**bench.run.sites, name: site})


def change_policy(bench: Bench, **values: Any) -> None:
    bench.run = replace(bench.run, policy=bench.run.policy.model_copy(update=values))


def found(bench: Bench) -> set[str]:
    return {fault.kind for fault in bench.audit()}


def on(bench: Bench, antenna: str = A) -> pd.DataFrame:
    return bench.contacts[bench.contacts["antenna"] == antenna].sort_values("start_utc")


def held(bench: Bench, row: int = 0) -> tuple[datetime, datetime]:
    """When a contact of antenna A holds it."""
    contact, antenna = on(bench).iloc[row], bench.run.antennas[A]
    return (contact["start_utc"].to_pydatetime().replace(tzinfo=UTC) - timedelta(seconds=antenna.prepare_s),
            contact["end_utc"].to_pydatetime().replace(tzinfo=UTC) + timedelta(seconds=antenna.release_s))


def test_setup_of_a_band_and_a_service(bench: Bench) -> None:
    for meant, caught in (
            ({"low_mhz": 8_000, "high_mhz": 8_400}, True), ({"low_mhz": 25_000, "high_mhz": 27_000}, False),
            ({"low_mhz": 2_025, "high_mhz": 2_110}, True), ({"service": "both"}, True),
            ({"service": "command"}, True), ({"service": "command", "low_mhz": 8_000, "high_mhz": 8_100}, False)):
        spoilt = bench.copy()
        change_antenna(spoilt, setup=(SetupTime(**meant, prepare_s=1_500.0),))
        faults = spoilt.audit()
        assert {fault.kind for fault in faults} == ({"antenna_overlap"} if caught else set()), meant
        if caught:
            assert "1530 s are needed" in faults[0].sentence


def _beside(bench: Bench) -> Bench:
    """Isvarde-B given the setup and the site of A, and two contacts that go on at a time somewhere."""
    spans = [(row.start_utc, row.end_utc, row.antenna) for row in bench.contacts.itertuples()]
    pairs = {(x[2], y[2]) for x in spans for y in spans if x[2] < y[2] and x[0] < y[1] and y[0] < x[1]}
    first, second = sorted(pairs)[0]
    for name in (first, second):
        change_antenna(bench, name, site="Isvarde")
        bench.contacts.loc[bench.contacts["antenna"] == name, "site"] = "Isvarde"
    return bench


@pytest.mark.parametrize(("enough", "too_few", "kind"), [
    ({"pool": [{"name": "modem", "at_once": 9}]}, {"pool": [{"name": "modem", "at_once": 1}]}, "equipment"),
    ({"contacts_at_once": 9}, {"contacts_at_once": 1}, "staff"),
    ({"backhaul": {"rate_mbps": 5_000}}, {"backhaul": {"rate_mbps": 100}}, "backhaul"),
])
def test_what_a_site_shares(bench: Bench, enough: dict[str, Any], too_few: dict[str, Any], kind: str) -> None:
    both = _beside(bench)
    before = found(both)  # the moved antenna sees what it should not: nothing of that is new
    change_site(both, **enough)
    assert found(both) == before
    change_site(both, **{key: None if key != "pool" else () for key in enough})
    change_site(both, **too_few)
    assert found(both) - before == {kind}


def test_a_pool_means_antennas_and_bands(bench: Bench) -> None:
    for pool in ({"antennas": ["Isvarde-B"]}, {"low_mhz": 400, "high_mhz": 470}):
        change_site(bench, pool=[{"name": "modem", "at_once": 0, **pool}])
        assert ("equipment" in found(bench)) == (bool(pool.get("antennas")) and len(on(bench, "Isvarde-B")) > 0)
    change_site(bench, pool=[{"name": "modem", "at_once": 0, "service": "downlink"}])
    assert found(bench) == {"equipment"}


def test_staffing_hours(bench: Bench) -> None:
    start, end = held(bench)
    others = [{"opens": "00:00", "closes": "24:00", "days": ["wed", "mon"]}]
    # Minutes just around the first contact, the rest of the day open from its end on.
    first, last = start.replace(second=0), end.replace(second=0) + timedelta(minutes=1)
    shifts = [{"opens": f"{first:%H:%M}", "closes": f"{last:%H:%M}"}, {"opens": f"{last:%H:%M}", "closes": "24:00"},
              {"opens": "00:00", "closes": f"{first:%H:%M}"}]
    change_site(bench, staffed=[*shifts, *others])
    assert found(bench) == set()
    change_site(bench, staffed=[{"opens": f"{first + timedelta(minutes=2):%H:%M}", "closes": f"{first:%H:%M}"}])
    faults = bench.audit()
    assert {fault.kind for fault in faults} == {"staffing"}
    assert "nobody is at Isvarde" in faults[0].sentence
    change_site(bench, staffed=[{"opens": "00:00", "closes": "24:00", "days": ["sun"]}])
    assert found(bench) == {"staffing"}


def test_a_closed_line(bench: Bench) -> None:
    contact = on(bench).iloc[0]
    for seconds, caught in ((0, True), (-1, False)):
        end = contact["start_utc"] + timedelta(seconds=1 + seconds)
        shut = {"start_utc": (end - timedelta(seconds=30)).isoformat() + "Z", "end_utc": end.isoformat() + "Z"}
        change_site(bench, backhaul={"closure": [shut]})
        assert found(bench) == ({"backhaul"} if caught else set())
        change_site(bench, backhaul={"closure": [shut], "buffered": True, "rate_mbps": 5_000})
        assert found(bench) == set()


def test_mb_of_a_day(bench: Bench) -> None:
    here = set(bench.contacts["contact_id"][bench.contacts["site"] == "Isvarde"])
    own = bench.segments[bench.segments["contact_id"].isin(here)]
    seconds = (own["end_utc"] - own["start_utc"]) / pd.Timedelta(seconds=1)
    can_mb = float((own["rate_mbps"] / 8.0 * seconds).sum())
    for factor, kinds in ((1.000001, set()), (0.999999, {"backhaul"})):
        change_site(bench, backhaul={"mb_per_day": can_mb * factor})
        assert found(bench) == kinds
        change_site(bench, backhaul={"rate_mbps": can_mb * factor * 8.0 / 86_400.0, "buffered": True})
        assert found(bench) == kinds


def test_a_tentative_closure_kept_free(bench: Bench) -> None:
    start, _ = held(bench, 1)
    closure = Closure(antenna=A, start_utc=start - timedelta(seconds=9), end_utc=start + timedelta(seconds=3),
                      kind="booking", tentative=True)
    bench.run = replace(bench.run, closures=(*bench.run.closures, closure))
    assert found(bench) == {"closure"}
    change_policy(bench, tentative_closures="plan_through")
    assert found(bench) == {"tentative"}
    entry = {"contact_id": on(bench)["contact_id"].iloc[1], "start_utc": f"{closure.start_utc:%Y-%m-%dT%H:%M:%S}Z"}
    bench.summary["tentative"] = [entry]
    assert found(bench) == set()
    bench.summary["tentative"].append({**entry, "contact_id": on(bench)["contact_id"].iloc[0]})
    assert "touches no tentative closure" in str(bench.audit()[0])


def _rented(bench: Bench, *rows: dict[str, Any], **antenna: Any) -> None:
    change_antenna(bench, rented=True, **antenna)
    bench.run = replace(bench.run, bookings=tuple(Booking(antenna=A, **row) for row in rows))


def _whole_day(bench: Bench) -> dict[str, Any]:
    start = Instant(bench.run.start_utc, tz="UTC").to_pydatetime()
    return {"start_utc": start - timedelta(hours=1), "end_utc": start + timedelta(hours=25)}


def test_declined_time_and_time_too_late_to_ask_for(bench: Bench) -> None:
    start, _ = held(bench)
    day = _whole_day(bench)
    gone = Instant(bench.run.start_utc, tz="UTC").to_pydatetime() - timedelta(hours=2)
    _rented(bench, {**day, "state": "granted", "give_back_by_utc": gone})
    assert found(bench) == set()
    _rented(bench, {"start_utc": day["start_utc"], "end_utc": start + timedelta(seconds=1), "state": "declined"},
            {"start_utc": start + timedelta(seconds=1), "end_utc": day["end_utc"], "state": "granted",
             "give_back_by_utc": gone})
    assert [fault.sentence for fault in bench.audit()] == [f"relies on time that {A} declined"]
    _rented(bench, {**day, "state": "asked", "ask_by_utc": gone})
    assert f"it is too late to ask {A} for its time" in {fault.sentence for fault in bench.audit()}


def _honest_lists(bench: Bench) -> None:
    """What a plan says where the whole day of A is asked for, beside an hour of another grant that is not used."""
    rows = on(bench)
    bench.summary["awaited"] = [
        {"antenna": A, "start_utc": f"{a:%Y-%m-%dT%H:%M:%S}Z", "end_utc": f"{b:%Y-%m-%dT%H:%M:%S}Z",
         "ask_by_utc": None}
        for a, b in (held(bench, row) for row in range(len(rows)))]
    bench.summary["to_ask"] = bench.summary["give_back"] = []


def test_what_is_to_be_asked_for_is_said(bench: Bench) -> None:
    _rented(bench, {**_whole_day(bench), "state": "asked"})
    assert found(bench) == {"rented"}
    _honest_lists(bench)
    assert found(bench) == set()
    dropped = bench.copy()
    dropped.summary["awaited"] = bench.summary["awaited"][1:]
    assert "belongs under awaited" in str(dropped.audit()[0])
    wrong = bench.copy()
    wrong.summary["awaited"], wrong.summary["to_ask"] = bench.summary["awaited"][1:], bench.summary["awaited"][:1]
    assert {"belongs under awaited" in str(f) or "does not belong under to_ask" in str(f) for f in wrong.audit()} == {
        True}
    late = bench.copy()
    late.summary["awaited"] = [{**bench.summary["awaited"][0], "ask_by_utc": "2027-03-09T00:00:00Z"},
                               *bench.summary["awaited"][1:]]
    assert len(late.audit()) == 2


def test_time_without_a_booking_has_to_be_asked_for_ahead(bench: Bench) -> None:
    _rented(bench, ask_before_h=0.0)
    bench.run = replace(bench.run, asking_utc=bench.run.start_utc)
    said = {fault.sentence for fault in bench.audit()}
    assert said
    assert all("belongs under to_ask" in sentence for sentence in said)
    _rented(bench, ask_before_h=48.0)
    assert f"it is too late to ask {A} for its time" in {fault.sentence for fault in bench.audit()}


def test_unused_grants_are_said(bench: Bench) -> None:
    _rented(bench, {**_whole_day(bench), "state": "granted"})
    faults = bench.audit()
    assert {fault.kind for fault in faults} == {"rented"}
    assert len(faults) >= len(on(bench)) - 1
    assert all("belongs under give_back" in fault.sentence for fault in faults)


@pytest.mark.parametrize("prices", [
    {"price_per_contact": 7.0}, {"price_per_minute": 1.5, "billed_s": 60}, {"minimum_charge": 90.0},
    {"price_per_contact": 2.0, "price_per_minute": 0.25}])
def test_cost_of_a_contact(bench: Bench, prices: dict[str, float]) -> None:
    change_antenna(bench, **prices)
    assert found(bench) == {"value"}
    minutes = on(bench)["duration_s"] / 60.0
    if "billed_s" in prices:
        minutes = -(-minutes // 1)
    cost = (prices.get("price_per_contact", 0.0) + minutes * prices.get("price_per_minute", 0.0)).clip(
        lower=prices.get("minimum_charge", 0.0))
    bench.contacts.loc[cost.index, "cost"] = cost
    summary = bench.summary
    settle(bench)
    bench.summary["shortfalls"] = summary["shortfalls"]
    assert found(bench) == set()


def test_budget_of_a_day(bench: Bench) -> None:
    change_antenna(bench, price_per_contact=7.0)
    bench.contacts.loc[on(bench).index, "cost"] = 7.0
    settle(bench)
    spent = 7.0 * len(on(bench))
    change_policy(bench, budget_per_day=spent)
    assert found(bench) == set()
    change_policy(bench, budget_per_day=spent - 0.01)
    faults = bench.audit()
    assert [fault.kind for fault in faults] == ["budget"]
    assert "the contacts of 2027-03-09 cost" in faults[0].sentence
