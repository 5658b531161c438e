"""How far a plan departs from the published one, and what that costs by the policy."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.planning.audit.rows import Contact

# Edges this close to the published ones are those of the same contact under fresh element sets.
_SAME_S = 60.0


def departures(run: Run, contacts: Sequence[Contact]) -> tuple[float, int]:
    """The cost [worth] of the published contacts that are no longer there, and the number of all changes."""
    contacts = [contact for contact in contacts if not contact.standby]
    kept_contacts: set[str] = set()
    cost, gone = 0.0, 0
    for item in run.published:
        low_s, high_s = (float((datetime64(t) - run.start_utc) / np.timedelta64(1, "ms")) / 1e3
                         for t in (item.start_utc, item.end_utc))
        same = [c.contact_id for c in contacts if (c.spacecraft, c.antenna) == (item.spacecraft, item.antenna)
                and abs(c.start_s - low_s) <= _SAME_S and abs(c.end_s - high_s) <= _SAME_S]
        kept_contacts.update(same)
        if not same:
            gone += 1
            cost += run.policy.change_cost * 2.0 ** (-max(low_s, 0.0) / (3600.0 * run.policy.change_half_h))
    return cost, gone + sum(contact.contact_id not in kept_contacts for contact in contacts)
