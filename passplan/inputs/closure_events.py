"""What may be wrong with one iCalendar event, and the plain values of its properties."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import date, datetime, timedelta
from typing import Any

from passplan.inputs.lines import shortened

_READ = ("DTSTART", "DTEND", "DURATION", "RRULE", "RDATE", "EXDATE", "RECURRENCE-ID")
# A rule is expanded by counting up from its first day, so a rule that repeats every second since 1970, or
# hourly but never on a day that exists, would keep a run for hours. No antenna is closed that way.
_TOO_FREQUENT = ("SECONDLY", "MINUTELY")
_WITH_HOURLY = frozenset({"FREQ", "INTERVAL", "COUNT", "UNTIL", "BYHOUR", "BYDAY", "WKST"})
_FIRST_YEAR = 1970


@dataclass(frozen=True)
class EventFault:
    """One fault of an event: the property, the value that stands there, and what to do."""

    where: str
    value: str | None
    remedy: str


def event_fault(event: Any) -> EventFault | None:
    """The first fault of a VEVENT that would make its times wrong or unknown, or None."""
    for name, message in getattr(event, "errors", ()):
        if str(name).upper() in _READ:
            return EventFault(f", {name}", None, f"cannot be read ({shortened(str(message))}); correct it")
    start = event.get("DTSTART")
    if start is None:
        return EventFault(", DTSTART", None, "missing; state when the event begins")
    for name in ("DTSTART", "DTEND", "RECURRENCE-ID"):
        fault = _zone_fault(event.get(name), name)
        if fault is not None:
            return fault
    return _length_fault(event, start.dt) or _rule_fault(event.get("RRULE"), start.dt.year)


def first_value(component: Any, name: str) -> str:
    """The text of a property, of its first appearance if it appears several times; "" if it does not."""
    value = component.get(name, "")
    if isinstance(value, list):
        value = value[0] if value else ""
    return str(value).strip()


def listed_values(component: Any, name: str) -> list[str]:
    """The values of a property that holds a list and may appear several times."""
    value = component.get(name)
    values = value if isinstance(value, list) else [value]
    found: list[str] = []
    for one in values:
        if one is None:
            continue
        parts = getattr(one, "cats", None) or str(one).replace("\\,", ",").split(",")
        found += [str(part).strip() for part in parts]
    return [one for one in found if one]


def _zone_fault(prop: Any, name: str) -> EventFault | None:
    if prop is None:
        return None
    if isinstance(prop, list):
        return EventFault(f", {name}", None, "stands twice in one event; remove one")
    moment = getattr(prop, "dt", None)
    if isinstance(moment, datetime):
        return None if moment.tzinfo is not None else _floating(prop, name)
    return None if isinstance(moment, date) else EventFault(f", {name}", _shown(prop), "not a time; correct it")


def _shown(prop: Any) -> str:
    return shortened(str(prop), 40)


def _floating(prop: Any, name: str) -> EventFault:
    zone = prop.params.get("TZID")
    if zone:
        return EventFault(f", {name}", str(zone), "this time zone is not known; use a name such as Europe/Oslo, or UTC")
    return EventFault(f", {name}", prop.dt.isoformat(), "the time has no zone; add Z for UTC, or a TZID")


def _length_fault(event: Any, start: date | datetime) -> EventFault | None:
    end, duration = event.get("DTEND"), event.get("DURATION")
    if end is not None:
        if isinstance(end.dt, datetime) != isinstance(start, datetime):
            return EventFault(", DTEND", str(end.dt), "one of DTSTART and DTEND has a time and the other has none")
        if end.dt <= start:
            return EventFault(", DTEND", end.dt.isoformat(), "is not after DTSTART; swap or correct them")
        return None
    if duration is not None:
        length = getattr(duration, "dt", None)
        sound = isinstance(length, timedelta) and length > timedelta()
        return None if sound else EventFault(", DURATION", _shown(duration), "is not positive; correct it")
    if isinstance(start, datetime):
        return EventFault(", DTEND", None, "missing; state when the event ends")
    return None


def _rule_fault(rules: Any, first_year: int) -> EventFault | None:
    for rule in rules if isinstance(rules, list) else [rules]:
        if rule is None:
            continue
        if not isinstance(rule, Mapping):
            return EventFault(", RRULE", _shown(rule), "not a recurrence rule; correct it")
        frequency = ",".join(map(str, rule.get("FREQ", []))).upper()
        if frequency in _TOO_FREQUENT or "BYSECOND" in rule or "BYMINUTE" in rule:
            return EventFault(", RRULE", frequency or None, "repeats too often for a closure; use HOURLY or rarer")
        if frequency == "HOURLY" and not set(rule) <= _WITH_HOURLY:
            return EventFault(", RRULE", frequency, "only BYHOUR and BYDAY go with HOURLY; use DAILY or rarer")
        if any(step < 1 for step in rule.get("INTERVAL", [])):
            return EventFault(", RRULE", "INTERVAL", "must be at least 1; correct it")
        if first_year < _FIRST_YEAR:
            return EventFault(", DTSTART", str(first_year), f"recurs since before {_FIRST_YEAR}; correct the year")
    return None
