"""Closures from an iCalendar file (RFC 5545), recurring events expanded over the horizon."""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass
from datetime import UTC, date, datetime, time, tzinfo
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

import numpy as np
import recurring_ical_events
from icalendar import Calendar

from passplan.inputs.calendar_records import Closure
from passplan.inputs.closure_events import event_fault, first_value, listed_values
from passplan.inputs.closure_places import Antennas, PlacedClosure
from passplan.inputs.errors import Findings
from passplan.inputs.lines import shortened
from passplan.inputs.tables import checked

_EVENT_START = re.compile(r"^BEGIN:VEVENT[ \t]*\r?$", re.MULTILINE | re.IGNORECASE)


@dataclass(frozen=True)
class _Series:
    """The events of one UID: the event itself and its changed occurrences, with the place of the first."""

    where: str
    events: tuple[Any, ...]


def calendar_closures(
    content: bytes,
    file: Path,
    outer: tuple[str, ...],
    known: Antennas,
    first_utc: np.datetime64,
    last_utc: np.datetime64,
    findings: Findings,
) -> list[PlacedClosure]:
    """The occurrences of the file's events that touch ``[first_utc, last_utc)``, as closures.

    Cancelled and transparent events are left out. The antennas are those of LOCATION or RESOURCES within
    ``outer`` (what the source is about), else ``outer``. A category ``booking`` makes a booking, anything
    else an outage; STATUS:TENTATIVE a tentative one. Times need a zone (Z or a known TZID); a day without a time
    is a day of the calendar's X-WR-TIMEZONE, else of UTC, which is warned of.
    """
    calendars = _calendars(content, file, findings)
    found: list[PlacedClosure] = []
    for calendar in calendars:
        if first_value(calendar, "METHOD").upper() == "CANCEL":
            continue
        zone = _day_zone(calendar)
        number = 0
        groups: dict[str, _Series] = {}
        for event in calendar.walk("VEVENT"):
            number += 1
            where = _event_place(number, event)
            fault = event_fault(event)
            if fault is not None:
                if not _is_left_out(event):
                    findings.problem(file, f"{where}{fault.where}", fault.value, fault.remedy)
                continue
            uid = first_value(event, "UID") or f"event {number} without UID"
            held = groups.get(uid, _Series(where, ()))
            groups[uid] = _Series(held.where, (*held.events, event))
        zones = calendar.walk("VTIMEZONE")
        for series in groups.values():
            for occurrence in _expanded(series, zones, first_utc, last_utc, file, findings):
                if not _is_left_out(occurrence):
                    found += _closures(occurrence, series.where, file, outer, known, zone, findings)
    return found


def _calendars(content: bytes, file: Path, findings: Findings) -> list[Any]:
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as fault:
        findings.problem(file, f"byte {fault.start}", None, "not UTF-8 text; save the file as UTF-8")
        return []
    try:
        calendars: list[Any] = [item for item in Calendar.from_ical(text, multiple=True) if item.name == "VCALENDAR"]
    except Exception as fault:  # not only ValueError: a zone named like a folder is an OSError
        findings.problem(file, "", None, f"not a valid iCalendar file ({shortened(str(fault))}); export it again")
        return []
    events = sum(len(calendar.walk("VEVENT")) for calendar in calendars)
    if not calendars:
        findings.problem(file, "", None, "holds no complete VCALENDAR; export it again")
    elif len(_EVENT_START.findall(text)) > events:
        findings.problem(file, "last line", None, "the calendar is cut off inside an event; export it again")
    return calendars


def _expanded(
    series: _Series,
    zones: Iterable[Any],
    first_utc: np.datetime64,
    last_utc: np.datetime64,
    file: Path,
    findings: Findings,
) -> list[Any]:
    """The occurrences of one series; each series is expanded alone so that a broken rule names its event."""
    calendar = Calendar()
    for part in (*zones, *series.events):
        calendar.add_component(part)
    try:
        occurrences: list[Any] = recurring_ical_events.of(calendar).between(_aware(first_utc), _aware(last_utc))
    except Exception as fault:  # the rule parser below it raises whatever its input provokes
        findings.problem(
            file, f"{series.where}, RRULE", None, f"cannot be expanded ({shortened(str(fault))}); correct it"
        )
        return []
    return occurrences


def _closures(
    occurrence: Any,
    where: str,
    file: Path,
    outer: tuple[str, ...],
    known: Antennas,
    zone: tzinfo | None,
    findings: Findings,
) -> list[PlacedClosure]:
    names = [*listed_values(occurrence, "RESOURCES"), first_value(occurrence, "LOCATION")]
    antennas = known.narrowed(names, outer)
    if not antennas:
        named = next((name for name in names if name), "")
        remedy = (
            f"no such antenna or site; {known.remedy(named)}"
            if named
            else "name the antenna or site in LOCATION, or in the config"
        )
        findings.problem(file, f"{where}, LOCATION", named or None, remedy)
        return []
    start, end = occurrence["DTSTART"].dt, occurrence["DTEND"].dt
    if not isinstance(start, datetime) and zone is None:
        findings.warn(f"{file}: days without a time are taken as UTC days; state X-WR-TIMEZONE or times with a zone")
    categories = {name.casefold() for name in listed_values(occurrence, "CATEGORIES")}
    record = {
        "antenna": antennas[0],
        "start_utc": _instant(start, zone),
        "end_utc": _instant(end, zone),
        "kind": _kind(categories),
        "tentative": first_value(occurrence, "STATUS").upper() == "TENTATIVE",
        "note": shortened(first_value(occurrence, "SUMMARY"), 200),
    }
    closure: Closure | None = checked(Closure, record, file, where, findings)
    if closure is None:
        return []
    day = f"{where} on {closure.start_utc:%Y-%m-%d}"
    return [PlacedClosure(closure.model_copy(update={"antenna": name}), file, day) for name in antennas]


def _event_place(number: int, event: Any) -> str:
    summary = first_value(event, "SUMMARY")
    return f"event {number} ({shortened(summary, 40)})" if summary else f"event {number}"


def _is_left_out(event: Any) -> bool:
    cancelled = first_value(event, "STATUS").upper() == "CANCELLED"
    return cancelled or first_value(event, "TRANSP").upper() == "TRANSPARENT"


def _day_zone(calendar: Any) -> tzinfo | None:
    """The zone in which a day without a time begins and ends, if the calendar states a known one."""
    try:
        return ZoneInfo(first_value(calendar, "X-WR-TIMEZONE") or "?")
    except (OSError, ValueError, KeyError):  # an unknown zone is a KeyError, a hostile name one of the others
        return None


def _kind(categories: set[str]) -> str:
    """What the categories say; a calendar of closures without any is one of outages."""
    if "booking" in categories:
        return "booking"
    return "wind_stow" if categories & {"wind_stow", "wind stow"} else "outage"


def _instant(moment: date | datetime, zone: tzinfo | None) -> datetime:
    if isinstance(moment, datetime):
        return moment.astimezone(UTC)
    return datetime.combine(moment, time(), zone or UTC).astimezone(UTC)


def _aware(instant_utc: np.datetime64) -> datetime:
    naive: datetime = instant_utc.astype("datetime64[ms]").astype(datetime)
    return naive.replace(tzinfo=UTC)
