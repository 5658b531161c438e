"""Contacts as calendars (RFC 5545, RFC 5546): an import updates what an earlier one brought, and never doubles it.

The UID of an event is the contact's id, which stays the same from plan to plan. SEQUENCE counts how often
the contact has changed since it was first planned (``planning/changes.py`` carries the count along), and a
contact that is gone stays as STATUS:CANCELLED, so that a calendar takes it out.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pandas as pd
from icalendar import Calendar, Event

from passplan._version import __version__
from passplan.planning.record import PlanRecord
from passplan.report.cautions import CAUTIONS
from passplan.report.names import file_stems
from passplan.report.words import megabytes


def write_calendars(record: PlanRecord, folder: Path) -> list[Path]:
    """Write ``all.ics``, and one file for each antenna and each spacecraft, into ``folder``."""
    written = [folder / "all.ics"]
    written[0].write_bytes(calendar(record))
    for kind, known in (("antenna", record.summary["antennas"]), ("spacecraft", record.summary["spacecraft"])):
        place = folder / kind
        place.mkdir()
        for name, stem in file_stems(known).items():
            written.append(place / f"{stem}.ics")
            written[-1].write_bytes(calendar(record, {kind: name}))
    return written


def calendar(record: PlanRecord, only: Mapping[str, str] | None = None) -> bytes:
    """One calendar as bytes; ``only`` narrows it to an ``antenna`` or a ``spacecraft``."""
    only = dict(only or {})
    book = Calendar()
    book.add("prodid", f"-//passplan {__version__}//contact plan//EN")
    book.add("version", "2.0")
    book.add("method", "PUBLISH")
    book.add("x-wr-calname", " ".join(["Contacts", *(f"of {name}" for name in only.values())]))
    stamp = datetime.now(UTC).replace(microsecond=0)
    draft = record.summary.get("approval", "draft") == "draft"
    against = record.summary.get("against", {})
    revisions = against.get("revisions", {})
    for row in _matching(record.contacts.to_dict("records"), only):
        event = _event(row, stamp, revisions.get(row["contact_id"], 0))
        event.add("status", "TENTATIVE" if draft else "CONFIRMED")
        event.add("summary", f"{'DRAFT ' if draft else ''}{row['spacecraft']} on {row['antenna']}")
        event.add("description", _description(row, record.summary, draft))
        event.add("categories", ["contact", row["service"]])
        book.add_component(event)
    for row in _matching(against.get("dropped", []), only):
        event = _event(row, stamp, revisions.get(row["contact_id"], 0))
        event.add("status", "CANCELLED")
        event.add("summary", f"CANCELLED {row['spacecraft']} on {row['antenna']}")
        instead = f"; instead: {row['moved_to']}" if row.get("moved_to") else ""
        event.add("description", f"Not in plan {record.summary['plan_id']}{instead}")
        book.add_component(event)
    return bytes(book.to_ical())


def _matching(rows: Iterable[Mapping[Any, Any]], only: Mapping[str, str]) -> list[Mapping[Any, Any]]:
    return [row for row in rows if all(row[kind] == name for kind, name in only.items())]


def _event(row: Mapping[Any, Any], stamp: datetime, sequence: int) -> Event:
    event = Event()
    event.add("uid", f"{row['contact_id']}@passplan")
    event.add("sequence", sequence)
    event.add("dtstamp", stamp)
    event.add("dtstart", _zoned(row["start_utc"]))
    event.add("dtend", _zoned(row["end_utc"]))
    event.add("location", row["antenna"])
    event.add("transp", "OPAQUE")
    return event


def _description(row: Mapping[Any, Any], summary: Mapping[str, Any], draft: bool) -> str:
    facts = [
        f"{row['service']} at {row['site']}, radio {row['radio']}, {row['frequency_mhz']:g} MHz {row['polarisation']}"
    ]
    if row["service"] != "command":
        facts.append(f"{row['modcod']}, {megabytes(row['volume_mb'])} net")
    if not pd.isna(row["min_margin_db"]):
        facts.append(f"least margin {row['min_margin_db']:.1f} dB, peak {row['peak_elevation_deg']:.0f} deg")
    facts.append(
        f"contact {row['contact_id']}, plan {summary['plan_id']}" + (", DRAFT until a named approval" if draft else "")
    )
    return "\n".join([*facts, *CAUTIONS])


def _zoned(instant: Any) -> datetime:
    stamp = pd.Timestamp(instant.rstrip("Z") if isinstance(instant, str) else instant)
    return stamp.to_pydatetime().replace(microsecond=0, tzinfo=UTC)
