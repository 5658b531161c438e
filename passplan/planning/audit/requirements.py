"""Is every requirement met, or else named as a shortfall?"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from datetime import datetime
from typing import Any

import numpy as np

from passplan.inputs.calendar_records import Request
from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.planning.audit.decisions import decided, frozen
from passplan.planning.audit.faults import Fault
from passplan.planning.audit.guarantees import promised, shared
from passplan.planning.audit.handovers import handed_over
from passplan.planning.audit.rows import Contact
from passplan.planning.audit.standby import stands_by
from passplan.planning.audit.standing import Standing

# Plans count in whole seconds; within a second of the limit either answer is right.
_TOLERANCE_S = 1.0


_PLACES = {"command": "spacecraft", "daily": "the", "guarantee": "the", "fair": "the"}


def check_requirements(run: Run, contacts: Sequence[Contact], summary: Mapping[str, Any]) -> Iterator[Fault]:
    """Requests, decisions and command intervals against the contacts and the shortfalls that the plan admits."""
    spares = [contact for contact in contacts if contact.standby]
    contacts = [contact for contact in contacts if not contact.standby]
    standings = {("request", request.name): _request(run, request, contacts, spares) for request in run.requests}
    for name in run.orbits:
        every_h = run.spacecraft[name].command_every_h or run.policy.command_every_h
        if every_h is not None:
            standings["command", name] = _command(run, name, every_h, contacts)
    standings.update(decided(run, contacts, spares))
    standings.update(frozen(run, contacts))
    standings.update(promised(run, contacts))
    if run.policy.fairness == "max_min":
        floor = summary.get("fair_floor")
        if not isinstance(floor, float) or not 0.0 <= floor <= 1.0:
            yield Fault("fair", "plan", f"its fair floor is stated as {floor}, not as a share from 0 to 1")
            return
        standings.update(shared(run, contacts, floor))
    admitted = [(str(entry.get("kind")), str(entry.get("name"))) for entry in summary.get("shortfalls", [])]
    for (kind, name), standing in standings.items():
        place = f"{_PLACES.get(kind, kind)} {name}"
        listed = (kind, name) in admitted
        if standing.missed and not listed:
            yield Fault(kind, place, f"{standing.sentence}, and the plan does not say so")
        elif standing.met and listed:
            yield Fault(kind, place, "the plan calls it a shortfall, yet it is met")
    for kind, name in admitted:
        if (kind, name) not in standings:
            yield Fault(kind, f"shortfall {name}", "the run has no such requirement")


def _request(run: Run, request: Request, contacts: Sequence[Contact], spares: Sequence[Contact]) -> Standing:
    earliest_s, latest_s = _seconds(run, request.earliest_utc), _seconds(run, request.latest_utc)
    able = [contact for contact in contacts if contact.spacecraft == request.spacecraft
            and request.antenna in (None, contact.antenna)
            and request.site in (None, run.antennas[contact.antenna].site)
            and contact.service in (request.service, "both")
            and (request.service != "ranging" or run.antennas[contact.antenna].ranging)
            and contact.end_s - contact.start_s >= request.min_duration_s]
    if request.handover_overlap_s is not None:
        in_run = request.spacecraft in run.orbits
        return handed_over(
            able, math.ceil(max(0.0, earliest_s)), math.floor(min(latest_s, run.horizon_s)), request.handover_overlap_s,
            in_run)
    met = any(
        earliest_s <= contact.start_s
        and contact.end_s <= latest_s
        and (not request.fixed or (contact.start_s < earliest_s + 1.0 and contact.end_s > latest_s - 1.0))
        and (not request.standby or _backed(run, request, contact, spares))
        for contact in able
    )
    ready = " with a second antenna at the ready" if request.standby else ""
    return Standing(not met, met, f"no contact{ready} meets it")


def _backed(run: Run, request: Request, contact: Contact, spares: Sequence[Contact]) -> bool:
    """Whether another antenna stands by that can do what is asked for."""
    service = "both" if request.service == "ranging" else request.service
    return any(request.service != "ranging" or run.antennas[spare.antenna].ranging
               for spare in stands_by(spares, contact, service))


def _command(run: Run, name: str, every_h: float, contacts: Sequence[Contact]) -> Standing:
    """How the spacecraft fares with its command contacts.

    The interval runs from the end of one command contact to the start of the next, from the last one
    before the horizon (or the horizon's start) on; one that is open at the horizon's end is not missed yet.
    """
    last_utc = run.spacecraft[name].last_command_utc
    last_s = 0.0 if last_utc is None else _seconds(run, last_utc)
    late_s = -np.inf
    for contact in contacts:
        if contact.spacecraft == name and contact.service != "downlink":
            late_s = max(late_s, contact.start_s - max(last_s + every_h * 3600.0, 0.0))
            last_s = max(last_s, contact.end_s)
    late_s = max(late_s, run.horizon_s - max(last_s + every_h * 3600.0, 0.0))
    sentence = f"a command contact is due every {every_h:g} h, and one comes {late_s:.0f} s late or not at all"
    return Standing(late_s > _TOLERANCE_S, late_s < -_TOLERANCE_S, sentence)


def _seconds(run: Run, instant: datetime) -> float:
    return float((datetime64(instant) - run.start_utc) / np.timedelta64(1, "ms")) / 1e3
