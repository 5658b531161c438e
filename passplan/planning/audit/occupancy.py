"""Is nobody asked to be in two places: antennas with their setup times, spacecraft, closures, the horizon."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable, Iterator, Sequence

import numpy as np

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
    antenna = run.antennas[contact.antenna]
    held_from_s, held_until_s = contact.start_s - antenna.prepare_s, contact.end_s + antenna.release_s
    for closure in run.closures:
        if closure.antenna != contact.antenna:
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
    """No antenna has more contacts at a time than beams, setup times counted, and no spacecraft has two."""
    setup_s = {name: antenna.prepare_s + antenna.release_s for name, antenna in run.antennas.items()}
    several = {name for name, antenna in run.antennas.items() if antenna.beams > 1}
    alone = [contact for contact in contacts if contact.antenna not in several]
    yield from _overlaps(alone, "antenna", lambda contact: contact.antenna, lambda name: setup_s[name])
    for name in sorted(several):
        yield from _crowded(run, name, [contact for contact in contacts if contact.antenna == name])
    yield from _overlaps(contacts, "spacecraft", lambda contact: contact.spacecraft, lambda _: 0.0)


def _crowded(run: Run, name: str, contacts: Sequence[Contact]) -> Iterator[Fault]:
    """Each beam goes to the contact that is next to begin, once it has been released: is there always one?"""
    antenna = run.antennas[name]
    free_s = [float("-inf")] * antenna.beams
    for contact in sorted(contacts, key=lambda contact: contact.start_s):
        beam = free_s.index(min(free_s))
        if contact.start_s - antenna.prepare_s < free_s[beam]:
            sentence = f"contact {contact.contact_id} begins while its {antenna.beams} beams are held by others"
            yield Fault("antenna_overlap", f"antenna {name}", sentence)
        free_s[beam] = max(free_s[beam], contact.end_s + antenna.release_s)


def _overlaps(
    contacts: Sequence[Contact], what: str, owner: Callable[[Contact], str], setup_s: Callable[[str], float]
) -> Iterator[Fault]:
    groups: dict[str, list[Contact]] = defaultdict(list)
    for contact in contacts:
        groups[owner(contact)].append(contact)
    for name, group in groups.items():
        # The one that ends last so far is the one that can stand in the way.
        latest = group[0]
        for contact in group[1:]:
            gap_s = contact.start_s - latest.end_s
            if gap_s < setup_s(name):
                how = "overlap" if gap_s < 0.0 else f"leave {gap_s:g} s between them, {setup_s(name):g} s are needed"
                yield Fault(
                    f"{what}_overlap",
                    f"{what} {name}",
                    f"contacts {latest.contact_id} and {contact.contact_id} {how}",
                )
            if contact.end_s > latest.end_s:
                latest = contact
