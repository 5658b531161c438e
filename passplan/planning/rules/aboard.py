"""A schedule that is already loaded aboard is kept until a new one can replace it.

Until then a spacecraft sends in the contacts that were loaded, as they were loaded, and in no others; commands may
reach it at any time. It lasts until ``loaded_until_utc``, or until the last loaded contact is over.
"""

from __future__ import annotations

from collections.abc import Iterator

from passplan.inputs.run import Run
from passplan.planning.aboard import loaded_until_s
from passplan.planning.hooks import Draft, Silence, Wish
from passplan.planning.horizon import instants_of
from passplan.planning.rules.decisions import DecidedContact, decided_contact, decided_span


def silences(run: Run) -> Iterator[Silence]:
    """One record per spacecraft with a schedule aboard."""
    for name in run.orbits:
        until_s = loaded_until_s(run, name)
        if until_s <= 0:
            continue
        kept = tuple((c.antenna, *decided_span(run, c)) for c in run.loaded if c.spacecraft == name)
        at = str(instants_of(run, min(until_s, run.horizon_s)))[:19].replace("T", " ")
        yield Silence(name, until_s, kept, "loaded", f"until {at} UTC {name} sends as the schedule aboard says")


def loaded_wishes(run: Run) -> Iterator[Wish]:
    """A loaded contact must be to be had as it was loaded."""
    for contact in run.loaded:
        if contact.spacecraft in run.orbits:
            yield Wish(contact.spacecraft, contact.antenna, *decided_span(run, contact))


def loaded_needs(draft: Draft) -> Iterator[DecidedContact]:
    """Every loaded contact is wanted; the rule of decisions takes it from there."""
    for contact in draft.run.loaded:
        yield decided_contact(draft, "loaded", contact)
