"""Are pins, emergencies and frozen contacts in the plan, and is nothing in it that was forbidden?"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace
from datetime import datetime

import numpy as np

from passplan.inputs.decisions import Decision
from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.planning.audit.faults import Fault
from passplan.planning.audit.mechanics import check_mechanics
from passplan.planning.audit.rows import Contact
from passplan.planning.audit.standby import stands_by
from passplan.planning.audit.standing import Standing
from passplan.planning.audit.visibility import check_visibility, sight_of

# Plans count in whole seconds.
_SECOND = 1.0
# A window that fresh element sets moved by more than that no longer carries what was pinned or published in it.
_DRIFT_S = 60.0
_HELD = {"frozen": "published", "loaded": "loaded aboard"}


def check_forbids(run: Run, contact: Contact) -> Iterator[Fault]:
    """The contact touches nothing that somebody forbade."""
    for item in run.decisions:
        if item.kind != "forbid":
            continue
        if item.window is not None:
            hit = contact.window_id == item.window
        else:
            low_s, high_s = _span_s(run, item.start_utc, item.end_utc)
            hit = (item.spacecraft in (None, contact.spacecraft) and item.antenna in (None, contact.antenna)
                   and contact.start_s < high_s and contact.end_s > low_s)
        if hit:
            yield Fault("forbidden", contact.place, f"somebody forbade {item.name}{': ' * bool(item.note)}{item.note}")


def decided(
    run: Run, contacts: Sequence[Contact], spares: Sequence[Contact],
) -> Iterator[tuple[tuple[str, str], Standing]]:
    """How each pin and each emergency fares; ``spares`` are the contacts that stand by."""
    for item in run.decisions:
        ready = " with a second antenna at the ready" if item.standby else ""
        if item.kind == "emergency":
            met = any(_answers(run, item, contact) for contact in contacts
                      if not item.standby or stands_by(spares, contact, item.service))
            yield ("emergency", item.name), Standing(not met, met, f"no contact{ready} answers it")
        elif item.kind == "pin" and item.window is not None:
            met = any(contact.window_id == item.window for contact in contacts)
            yield ("pin", item.name), Standing(not met, met, "no contact uses the window")
        elif item.kind == "pin":
            span = _span_s(run, item.start_utc, item.end_utc)
            mine = [c for c in contacts if (c.spacecraft, c.antenna) == (item.spacecraft, item.antenna)
                    and (not item.standby or stands_by(spares, c))]
            met = any(_late_s(c, span) < _SECOND for c in mine)
            close = any(_holds_what_it_can(run, c, span) for c in mine)
            yield ("pin", item.name), Standing(not met and not close, met, f"no contact{ready} holds its span")


def frozen(run: Run, contacts: Sequence[Contact]) -> Iterator[tuple[tuple[str, str], Standing]]:
    """How each frozen or loaded contact fares: it stands as it was, or as far as the antenna can still follow."""
    until = run.frozen_until_utc
    held = [("frozen", item) for item in run.published if until is not None and datetime64(item.start_utc) < until]
    for kind, item in [*held, *(("loaded", item) for item in run.loaded)]:
        span = _span_s(run, item.start_utc, item.end_utc)
        mine = [c for c in contacts if (c.spacecraft, c.antenna) == (item.spacecraft, item.antenna)
                and c.start_s > span[0] - _SECOND and c.end_s < span[1] + _SECOND]
        met = any(_late_s(c, span) < _SECOND for c in mine)
        close = any(_holds_what_it_can(run, c, span) for c in mine)
        yield (kind, item.name), Standing(not met and not close, met, f"no contact is as it was {_HELD[kind]}")


def _answers(run: Run, item: Decision, contact: Contact) -> bool:
    low_s, high_s = _span_s(run, item.start_utc, item.end_utc)
    return (
        contact.spacecraft == item.spacecraft and item.antenna in (None, contact.antenna)
        and contact.service in (item.service, "both") and low_s <= contact.start_s and contact.end_s <= high_s
        and contact.end_s - contact.start_s >= item.min_duration_s)


def _late_s(contact: Contact, span: tuple[float, float]) -> float:
    """How much of a span's ends the contact leaves out, at the worse end [s]."""
    return max(contact.start_s - span[0], span[1] - contact.end_s)


def _holds_what_it_can(run: Run, contact: Contact, span: tuple[float, float]) -> bool:
    """Whether an end of the span that the contact leaves out is one at which the antenna cannot follow."""
    if contact.start_s >= span[1] or contact.end_s <= span[0] or _late_s(contact, span) > _DRIFT_S:
        return False
    ends = ((contact.start_s, span[0], contact.start_s), (contact.end_s, contact.end_s, span[1]))
    outside = [(a, b) for _, a, b in ends if b - a >= _SECOND]
    for start_s, end_s in outside:
        beyond = replace(contact, start_s=start_s, end_s=end_s, pieces=())
        seen = sight_of(run, beyond)
        if not list(check_visibility(run, beyond, seen)) and not list(check_mechanics(run, beyond, seen)):
            return False
    return True


def _span_s(run: Run, start: datetime | None, end: datetime | None) -> tuple[float, float]:
    """A span in seconds from the horizon's start, no further than the horizon; all of it where none is stated."""
    if start is None or end is None:
        return 0.0, float(run.horizon_s)
    low_s, high_s = (float((datetime64(t) - run.start_utc) / np.timedelta64(1, "ms")) / 1e3 for t in (start, end))
    return max(low_s, 0.0), min(high_s, float(run.horizon_s))
