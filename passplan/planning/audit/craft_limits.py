"""Does every spacecraft get the rest it needs?"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from itertools import pairwise

from passplan.inputs.run import Run
from passplan.planning.audit.faults import Fault
from passplan.planning.audit.rows import Contact


def check_craft_limits(run: Run, contacts: Sequence[Contact]) -> Iterator[Fault]:
    """Every limit on a spacecraft's own contacts; ``contacts`` are in time order."""
    for name in run.orbits:
        own = [contact for contact in contacts if contact.spacecraft == name]
        craft = run.spacecraft[name]
        yield from _rest("contact_gap", "contacts", name, own, craft.contact_gap_s)
        sending = [contact for contact in own if contact.service != "command"]
        yield from _rest("cool_down", "contacts with sending", name, sending, craft.cool_down_s)


def _rest(kind: str, what: str, name: str, contacts: Sequence[Contact], least_s: float) -> Iterator[Fault]:
    for before, after in pairwise(contacts):
        rest_s = after.start_s - before.end_s
        if 0.0 <= rest_s < least_s:
            sentence = f"{what} {before.contact_id} and {after.contact_id} leave {rest_s:g} s, {least_s:g} s are needed"
            yield Fault(kind, f"spacecraft {name}", sentence)
