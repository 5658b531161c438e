"""Does every spacecraft get to do what it must do by itself: its slots, and the schedule that is aboard already?"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from datetime import datetime

import numpy as np

from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.planning.audit.faults import Fault
from passplan.planning.audit.rows import Contact

# Element sets that are fresher than those a schedule was made with move its contacts by seconds.
_DRIFT_S = 60.0
_WORDS = {"imaging": "while it takes images", "attitude": "while it cannot point at a station"}


def check_slots(run: Run, contact: Contact) -> Iterator[Fault]:
    """The contact lies apart from every slot of its spacecraft."""
    for slot in run.slots:
        from_s, until_s = _seconds(run, slot.start_utc), _seconds(run, slot.end_utc)
        if slot.spacecraft == contact.spacecraft and contact.start_s < until_s and from_s < contact.end_s:
            sentence = f"its spacecraft has a contact {_WORDS[slot.kind]}, {slot.start_utc:%Y-%m-%d %H:%M:%S} UTC on"
            yield Fault(slot.kind, contact.place, sentence)


def check_loaded(run: Run, contacts: Sequence[Contact]) -> Iterator[Fault]:
    """While a schedule aboard holds nothing else is sent."""
    for contact in contacts:
        mine = [item for item in run.loaded if item.spacecraft == contact.spacecraft]
        stated = run.spacecraft[contact.spacecraft].loaded_until_utc
        ends = [item.end_utc for item in mine] if stated is None else [stated]
        until_s = max((_seconds(run, end) for end in ends), default=0.0)
        if contact.service == "command" or contact.start_s >= until_s:
            continue
        if not any(
            item.antenna == contact.antenna
            and abs(contact.start_s - max(0.0, _seconds(run, item.start_utc))) <= _DRIFT_S
            and abs(contact.end_s - min(run.horizon_s, _seconds(run, item.end_utc))) <= _DRIFT_S
            for item in mine
        ):
            yield Fault("loaded", contact.place, "the schedule aboard does not send then, and no other can be aboard")


def _seconds(run: Run, instant: datetime) -> float:
    return float((datetime64(instant) - run.start_utc) / np.timedelta64(1, "ms")) / 1e3
