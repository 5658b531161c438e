"""Contacts as calendars (RFC 5545, RFC 5546): an import updates what an earlier one brought, and never doubles it.

The UID of an event is the contact's id, which stays the same from plan to plan. SEQUENCE counts how often
the contact has changed since it was first planned (``planning/changes.py`` carries the count along), and a
contact that is gone stays as STATUS:CANCELLED, so that a calendar takes it out.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import pandas as pd
from icalendar import Calendar, Event

from passplan._version import __version__
from passplan.planning.record import STANDBY, PlanRecord
from passplan.report.cautions import CAUTIONS
from passplan.report.names import file_stems
from passplan.report.rows import rows
from passplan.report.words import megabytes


def write_calendars(record: PlanRecord, folder: Path) -> list[Path]:
    """Write ``all.ics``, and one file for each antenna and each spacecraft, into ``folder``."""
    entries = _entries(record)
    written = [folder / "all.ics"]
    written[0].write_bytes(_book("Contacts", entries))
    for kind, known in (("antenna", record.summary["antennas"]), ("spacecraft", record.summary["spacecraft"])):
        place = folder / kind
        place.mkdir()
        own: dict[str, list[_Entry]] = {name: [] for name in known}
        for entry in entries:
            own.setdefault(entry.row[kind], []).append(entry)
        for name, stem in file_stems(known).items():
            written.append(place / f"{stem}.ics")
            written[-1].write_bytes(_book(f"Contacts of {name}", own[name]))
    return written


def calendar(record: PlanRecord) -> bytes:
    """All contacts of a plan, and those that it dropped, as one calendar."""
    return _book("Contacts", _entries(record))


@dataclass(frozen=True)
class _Entry:
    """A contact with its event as text: the text goes into several files, and making it is what takes time."""

    row: Mapping[Any, Any]
    text: bytes


def _book(name: str, entries: Iterable[_Entry]) -> bytes:
    book = Calendar()
    book.add("prodid", f"-//passplan {__version__}//contact plan//EN")
    book.add("version", "2.0")
    book.add("method", "PUBLISH")
    book.add("x-wr-calname", name)
    head, mark, tail = bytes(book.to_ical()).partition(b"END:VCALENDAR")
    return head + b"".join(entry.text for entry in entries) + mark + tail


def _entries(record: PlanRecord) -> list[_Entry]:
    stamp = datetime.now(UTC).replace(microsecond=0)
    draft = record.summary.get("approval", "draft") == "draft"
    against = record.summary.get("against", {})
    revisions = against.get("revisions", {})
    entries = []
    for row in rows(record.contacts):
        event = _event(row, stamp, revisions.get(row["contact_id"], 0))
        event.add("status", "TENTATIVE" if draft else "CONFIRMED")
        ready = ", stand-by" if row["origin"] == STANDBY else ""
        event.add("summary", f"{'DRAFT ' if draft else ''}{row['spacecraft']} on {row['antenna']}{ready}")
        event.add("description", _description(row, record.summary, draft))
        event.add("categories", ["contact", row["service"]])
        entries.append(_Entry(row, bytes(event.to_ical())))
    for row in against.get("dropped", []):
        event = _event(row, stamp, revisions.get(row["contact_id"], 0))
        event.add("status", "CANCELLED")
        event.add("summary", f"CANCELLED {row['spacecraft']} on {row['antenna']}")
        instead = f"; instead: {row['moved_to']}" if row.get("moved_to") else ""
        event.add("description", f"Not in plan {record.summary['plan_id']}{instead}")
        entries.append(_Entry(row, bytes(event.to_ical())))
    return entries


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
    if row["origin"] == STANDBY:
        facts.append(f"stands by beside another contact of {row['spacecraft']}, to take over should that fail")
    elif row["service"] != "command":
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
