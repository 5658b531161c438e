"""Is nobody asked to be in two places: antennas with their setup times, spacecraft, closures, the horizon."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable, Iterator, Sequence

import numpy as np

from passplan.inputs.contact_kind import ContactKind
from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.planning.audit.faults import Fault
from passplan.planning.audit.rows import Contact


def check_times(run: Run, contact: Contact) -> Iterator[Fault]:
    """The contact lies within the horizon, lasts long enough, and its segments lie within it in order."""
    length_s = contact.end_s - contact.start_s
    if contact.start_s < 0.0 or contact.end_s > run.horizon_s:
        yield Fault("horizon", contact.place, "reaches beyond the horizon of the plan")
    if length_s < run.policy.min_contact_s:
        sentence = f"lasts {length_s:g} s, less than the {run.policy.min_contact_s:g} s that the policy asks for"
        yield Fault("too_short", contact.place, sentence)
    reached_s = contact.start_s
    for piece in contact.pieces:
        if piece.start_s < reached_s or piece.end_s > contact.end_s or piece.end_s <= piece.start_s:
            yield Fault("table", contact.place, "its segments overlap, are empty, or reach beyond it")
            return
        reached_s = piece.end_s


def check_closures(run: Run, contact: Contact) -> Iterator[Fault]:
    """The antenna is open throughout the contact and the time to prepare and to release."""
    held_from_s, held_until_s = held(run, contact)
    for closure in run.closures:
        planned_through = closure.tentative and run.policy.tentative_closures == "plan_through"
        if closure.antenna != contact.antenna or planned_through:
            continue
        from_s, until_s = (
            float((datetime64(instant) - run.start_utc) / np.timedelta64(1, "ms")) / 1e3
            for instant in (closure.start_utc, closure.end_utc)
        )
        if held_from_s < until_s and from_s < held_until_s:
            inside = contact.start_s < until_s and from_s < contact.end_s
            what = "lies in" if inside else "leaves no time to prepare or release beside"
            yield Fault(
                "closure",
                contact.place,
                f"{what} the {closure.kind} of {contact.antenna} from {closure.start_utc:%Y-%m-%d %H:%M:%S}"
                f" to {closure.end_utc:%Y-%m-%d %H:%M:%S} UTC",
            )


def check_overlaps(run: Run, contacts: Sequence[Contact]) -> Iterator[Fault]:
    """No antenna has more contacts at a time than beams, setup times counted, and no spacecraft more than links.

    Those of a spacecraft with several links are each on an antenna of their own. Those that stand by take up an
    antenna, but nothing of the spacecraft.
    """
    several = {name for name, antenna in run.antennas.items() if antenna.beams > 1}
    alone = [contact for contact in contacts if contact.antenna not in several]
    yield from _overlaps(alone, "antenna", lambda contact: contact.antenna, lambda contact: held(run, contact))
    for name in sorted(several):
        spans = [(*held(run, contact), contact) for contact in contacts if contact.antenna == name]
        yield from _crowded("antenna", name, run.antennas[name].beams, "beams", spans)
    own = [contact for contact in contacts if not contact.standby]
    yield from _overlaps(
        [contact for contact in own if run.spacecraft[contact.spacecraft].links == 1], "spacecraft",
        lambda contact: contact.spacecraft, lambda contact: (contact.start_s, contact.end_s))
    for name, craft in run.spacecraft.items():
        mine = [(contact.start_s, contact.end_s, contact) for contact in own if contact.spacecraft == name]
        if craft.links > 1:
            yield from _crowded("spacecraft", name, craft.links, "links", mine)
            yield from _twice_there(mine)


def held(run: Run, contact: Contact) -> tuple[float, float]:
    """The time [s] that a contact holds its antenna, preparing and releasing included."""
    antenna = run.antennas[contact.antenna]
    before, after = [], []
    for row in antenna.setup:
        if is_of_kind(run, contact, row):
            before += [] if row.prepare_s is None else [row.prepare_s]
            after += [] if row.release_s is None else [row.release_s]
    return (
        contact.start_s - (max(before) if before else antenna.prepare_s),
        contact.end_s + (max(after) if after else antenna.release_s))


def is_of_kind(run: Run, contact: Contact, kind: ContactKind) -> bool:
    """Whether a rule that speaks of a kind of contacts means this one."""
    carriers = {contact.frequency_mhz}
    if contact.service == "both":
        radios = (run.radios[name] for name in run.spacecraft[contact.spacecraft].radios)
        carriers |= {radio.frequency_mhz for radio in radios if radio.direction == "command"}
    in_band = kind.low_mhz is None or any(kind.low_mhz <= f <= (kind.high_mhz or 0.0) for f in carriers)
    return in_band and (kind.service is None or contact.service in ("both", kind.service))


def _crowded(
    what: str, name: str, count: int, units: str, spans: Sequence[tuple[float, float, Contact]],
) -> Iterator[Fault]:
    """Each beam, or link, goes to the contact that is next to hold one, once it is free: is there always one?"""
    free_s = [float("-inf")] * count
    for from_s, until_s, contact in sorted(spans, key=lambda entry: entry[:2]):
        unit = free_s.index(min(free_s))
        if from_s < free_s[unit]:
            sentence = f"contact {contact.contact_id} begins while its {count} {units} are held by others"
            yield Fault(f"{what}_overlap", f"{what} {name}", sentence)
        free_s[unit] = max(free_s[unit], until_s)


def _twice_there(spans: Sequence[tuple[float, float, Contact]]) -> Iterator[Fault]:
    """Two contacts of one spacecraft at once on one antenna, which several beams would not tell apart."""
    last: dict[str, Contact] = {}
    for _, _, contact in sorted(spans, key=lambda entry: entry[:2]):
        before = last.get(contact.antenna)
        if before is not None and contact.start_s < before.end_s:
            sentence = f"contacts {before.contact_id} and {contact.contact_id} are on {contact.antenna} at once"
            yield Fault("spacecraft_overlap", f"spacecraft {contact.spacecraft}", sentence)
        if before is None or contact.end_s > before.end_s:
            last[contact.antenna] = contact


def _overlaps(
    contacts: Sequence[Contact], what: str, owner: Callable[[Contact], str],
    span: Callable[[Contact], tuple[float, float]],
) -> Iterator[Fault]:
    groups: dict[str, list[tuple[float, float, Contact]]] = defaultdict(list)
    for contact in contacts:
        groups[owner(contact)].append((*span(contact), contact))
    for name, group in groups.items():
        group.sort(key=lambda entry: entry[:2])
        # The one that is held longest so far is the one that can stand in the way.
        _, busy_s, latest = group[0]
        for from_s, until_s, contact in group[1:]:
            if from_s < busy_s:
                gap_s = contact.start_s - latest.end_s
                needed_s = busy_s - latest.end_s + contact.start_s - from_s
                how = "overlap" if gap_s < 0.0 else f"leave {gap_s:g} s between them, {needed_s:g} s are needed"
                yield Fault(
                    f"{what}_overlap",
                    f"{what} {name}",
                    f"contacts {latest.contact_id} and {contact.contact_id} {how}",
                )
            if until_s > busy_s:
                busy_s, latest = until_s, contact
