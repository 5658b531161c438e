"""Does every spacecraft get the rest it needs, and is none asked for more contacts or sending than it stands?"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from itertools import pairwise

import numpy as np

from passplan.inputs.fleet import Spacecraft
from passplan.inputs.run import Run
from passplan.planning.audit.faults import Fault
from passplan.planning.audit.rows import Contact
from passplan.planning.audit.sky import fixed_km

# The plan finds a passage of the equator in its own way; so near to one either orbit is right.
_NODE_S = 2.0
_STEP_S = 30.0
_ROUNDING_S = 1e-6


def check_craft_limits(run: Run, contacts: Sequence[Contact]) -> Iterator[Fault]:
    """Every limit on a spacecraft's own contacts; ``contacts`` are in time order."""
    for name in run.orbits:
        own = [contact for contact in contacts if contact.spacecraft == name]
        craft = run.spacecraft[name]
        sending = [contact for contact in own if contact.service != "command"]
        for kind, what, held, least_s in (
            ("contact_gap", "contacts", own, craft.contact_gap_s),
            ("cool_down", "contacts with sending", sending, craft.cool_down_s),
        ):
            rest = _rest if craft.links == 1 else _rest_of_links
            yield from rest(kind, what, craft, held, least_s)
        yield from _counts(run, craft, own)
        yield from _sending(run, craft, own)


def _rest(kind: str, what: str, craft: Spacecraft, contacts: Sequence[Contact], least_s: float) -> Iterator[Fault]:
    for before, after in pairwise(contacts):
        rest_s = after.start_s - before.end_s
        if 0.0 <= rest_s < least_s:
            sentence = f"{what} {before.contact_id} and {after.contact_id} leave {rest_s:g} s, {least_s:g} s are needed"
            yield Fault(kind, f"spacecraft {craft.name}", sentence)


def _rest_of_links(
    kind: str, what: str, craft: Spacecraft, contacts: Sequence[Contact], least_s: float,
) -> Iterator[Fault]:
    """Each contact takes the link that has rested longest; contacts that outnumber the links are a fault by itself."""
    ended_s = [-math.inf] * craft.links
    for contact in contacts:
        rest_s = contact.start_s - min(ended_s)
        if 0.0 <= rest_s < least_s:
            sentence = f"between {what} each link has rested for {rest_s:g} s at most when {contact.contact_id} starts"
            yield Fault(kind, f"spacecraft {craft.name}", f"{sentence}, {least_s:g} s are needed")
        ended_s[ended_s.index(min(ended_s))] = contact.end_s


def _counts(run: Run, craft: Spacecraft, contacts: Sequence[Contact]) -> Iterator[Fault]:
    place = f"spacecraft {craft.name}"
    most = craft.contacts_per_day
    if most is not None:
        days = [str((run.start_utc + np.timedelta64(math.floor(c.start_s * 1e3), "ms")).astype("datetime64[D]"))
                for c in contacts]
        for day in sorted(set(days)):
            if days.count(day) > most:
                yield Fault("contacts_per_day", place, f"{days.count(day)} contacts start on {day}, {most} are allowed")
    most = craft.contacts_per_orbit
    if most is not None:
        for low_s, high_s in _orbits(run, craft.name):
            surely = [c for c in contacts if low_s + _NODE_S <= c.start_s < high_s - _NODE_S]
            if len(surely) > most:
                sentence = f"{len(surely)} contacts start in the orbit from {max(low_s, 0.0):.0f} s of the horizon on"
                yield Fault("contacts_per_orbit", place, f"{sentence}, {most} are allowed")


def _sending(run: Run, craft: Spacecraft, contacts: Sequence[Contact]) -> Iterator[Fault]:
    place = f"spacecraft {craft.name}"
    on_air = [on_air_s(run, contact) for contact in contacts if contact.pieces]
    most_s = craft.sending_per_contact_s
    if most_s is not None:
        for contact in contacts:
            length_s = np.subtract(*on_air_s(run, contact)[::-1]) if contact.pieces else 0.0
            if length_s > most_s + _ROUNDING_S:
                sentence = f"its transmitter is on for {length_s:g} s, {most_s:g} s are allowed in one contact"
                yield Fault("sending_per_contact", contact.place, sentence)
    most_s = craft.sending_per_orbit_s
    if most_s is not None:
        for low_s, high_s in _orbits(run, craft.name):
            total_s = _inside(on_air, low_s + _NODE_S, high_s - _NODE_S)
            if total_s > most_s + _ROUNDING_S:
                sentence = f"its transmitter is on for {total_s:.0f} s in the orbit from {max(low_s, 0.0):.0f} s on"
                yield Fault("sending_per_orbit", place, f"{sentence}, {most_s:g} s are allowed")
    most_s = craft.sending_per_span_s
    if most_s is not None:
        span_s = 3_600.0 * craft.sending_span_h
        # Slide the span until one of its edges meets an edge of sending: nowhere between is there more inside.
        begins = [t for edges in on_air for t in (edges[0], edges[1] - span_s)]
        total_s, begin_s = max(((_inside(on_air, t, t + span_s), t) for t in begins), default=(0.0, 0.0))
        if total_s > most_s + _ROUNDING_S:
            sentence = f"its transmitter is on for {total_s:.0f} s in {span_s / 3600.0:g} h, from {begin_s:.0f} s on"
            yield Fault("sending_per_span", place, f"{sentence}; {most_s:g} s are allowed")


def on_air_s(run: Run, contact: Contact) -> tuple[float, float]:
    """From when to when the transmitter is on [s]: with its acquisition, but not before the contact."""
    begin_s = contact.pieces[0].start_s - run.radios[contact.radio].acquisition_s
    return max(contact.start_s, begin_s), contact.pieces[-1].end_s


def _inside(spans: Sequence[tuple[float, float]], low_s: float, high_s: float) -> float:
    return math.fsum(max(0.0, min(b, high_s) - max(a, low_s)) for a, b in spans)


def _orbits(run: Run, name: str) -> list[tuple[float, float]]:
    """From ascending node to ascending node, by straight lines between samples; open at both ends."""
    times = np.arange(0.0, run.horizon_s + _STEP_S, _STEP_S)
    north_km = fixed_km(run.orbits[name], run.start_utc, times)[2]
    edges = [-math.inf]
    for k in np.flatnonzero((north_km[:-1] <= 0.0) & (north_km[1:] > 0.0)):
        edges.append(float(times[k] - _STEP_S * north_km[k] / (north_km[k + 1] - north_km[k])))
    return list(pairwise([*edges, math.inf]))
