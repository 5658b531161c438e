"""Calendars: read back, updated and cancelled, as a calendar program would."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pandas as pd
import pytest
from icalendar import Calendar, Event
from plan_variants import HOSTILE, renamed

from passplan.planning.record import PlanRecord
from passplan.report.calendars import calendar, write_calendars


def _events(content: bytes) -> list[Event]:
    return list(Calendar.from_ical(content).walk("VEVENT"))


def _import(book: dict[str, Event], content: bytes) -> None:
    """What RFC 5546 section 2.1.5 asks of a calendar: the higher SEQUENCE of a UID wins, CANCELLED takes it out."""
    for event in _events(content):
        uid = str(event["uid"])
        if uid not in book or int(event["sequence"]) >= int(book[uid]["sequence"]):
            book[uid] = event


def _shown(book: dict[str, Event]) -> dict[str, tuple[pd.Timestamp, pd.Timestamp]]:
    return {
        uid: (pd.Timestamp(e.decoded("dtstart")), pd.Timestamp(e.decoded("dtend")))
        for uid, e in book.items()
        if str(e["status"]) != "CANCELLED"
    }


def _planned(record: PlanRecord) -> dict[str, tuple[pd.Timestamp, pd.Timestamp]]:
    return {
        f"{row.contact_id}@passplan": (row.start_utc.tz_localize("UTC"), row.end_utc.tz_localize("UTC"))
        for row in record.contacts.itertuples()
    }


def test_every_contact_comes_back(short_plan: PlanRecord) -> None:
    book: dict[str, Event] = {}
    _import(book, calendar(short_plan))
    assert _shown(book) == _planned(short_plan)
    assert {str(event["status"]) for event in book.values()} == {"TENTATIVE"}
    assert {int(event["sequence"]) for event in book.values()} == {0}
    assert all("not permission to transmit" in str(event["description"]) for event in book.values())
    assert all(str(event["summary"]).startswith("DRAFT ") for event in book.values())


def test_a_stand_by_says_that_it_is_one(short_plan: PlanRecord) -> None:
    contacts = short_plan.contacts.copy()
    contacts.loc[contacts.index[0], "origin"] = "standby"
    first, *others = _events(calendar(replace(short_plan, contacts=contacts)))
    assert str(first["summary"]).endswith(", stand-by")
    assert f"stands by beside another contact of {contacts['spacecraft'].iloc[0]}" in str(first["description"])
    assert not any("stand" in str(event["summary"]) for event in others)


def test_an_import_updates_cancels_and_never_doubles(short_plan: PlanRecord, replanned: PlanRecord) -> None:
    book: dict[str, Event] = {}
    for plan in (short_plan, replanned, replanned):
        _import(book, calendar(plan))
    assert _shown(book) == _planned(replanned)
    cancelled = {uid for uid, event in book.items() if str(event["status"]) == "CANCELLED"}
    assert cancelled == {f"{row['contact_id']}@passplan" for row in replanned.summary["against"]["dropped"]}


def test_the_sequence_rises_where_a_contact_changed_and_only_there(replanned: PlanRecord) -> None:
    changes = dict(zip(replanned.contacts["contact_id"], replanned.contacts["change"], strict=True))
    for event in _events(calendar(replanned)):
        name = str(event["uid"]).removesuffix("@passplan")
        assert int(event["sequence"]) == (1 if changes.get(name, "dropped") in ("retimed", "dropped") else 0)


def test_a_file_for_each_antenna_and_spacecraft(short_plan: PlanRecord, tmp_path: Path) -> None:
    write_calendars(short_plan, tmp_path)
    whole = {str(event["uid"]) for event in _events((tmp_path / "all.ics").read_bytes())}
    for kind, known in (("antenna", short_plan.summary["antennas"]), ("spacecraft", short_plan.summary["spacecraft"])):
        files = list((tmp_path / kind).iterdir())
        assert len(files) == len(known)
        parts = [str(event["uid"]) for file in files for event in _events(file.read_bytes())]
        assert sorted(parts) == sorted(whole)


def test_a_file_holds_its_own_and_the_location_is_the_antenna(replanned: PlanRecord, tmp_path: Path) -> None:
    write_calendars(replanned, tmp_path)
    events = _events((tmp_path / "antenna" / "Isvarde-A.ics").read_bytes())
    assert {str(event["location"]) for event in events} == {"Isvarde-A"}
    assert {str(event["status"]) for event in events} == {"TENTATIVE", "CANCELLED"}


def test_an_approved_plan_is_confirmed(short_plan: PlanRecord) -> None:
    short_plan.summary["approval"] = "A. Person"
    try:
        statuses = {str(event["status"]) for event in _events(calendar(short_plan))}
    finally:
        short_plan.summary["approval"] = "draft"
    assert statuses == {"CONFIRMED"}


def test_lines_are_folded_and_ended_as_the_rfc_asks(short_plan: PlanRecord) -> None:
    content = calendar(short_plan)
    lines = content.split(b"\r\n")
    assert b"\n" not in b"".join(lines)
    assert max(map(len, lines)) <= 75
    assert lines[0] == b"BEGIN:VCALENDAR"


@pytest.mark.parametrize("name", HOSTILE.values())
def test_hostile_names_come_back_as_they_were(short_plan: PlanRecord, short_run: object, name: str) -> None:
    record, _ = renamed(short_plan, short_run, HOSTILE)  # type: ignore[arg-type]
    texts = " ".join(f"{e['summary']} {e['description']} {e['location']}" for e in _events(calendar(record)))
    assert name in texts
