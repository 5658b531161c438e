"""A plan that goes through tentative closures lists every contact that touches one."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import Any

import numpy as np

from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.planning.audit.faults import Fault
from passplan.planning.audit.occupancy import held
from passplan.planning.audit.rows import Contact


def check_tentative(run: Run, contacts: Sequence[Contact], summary: Mapping[str, Any]) -> Iterator[Fault]:
    """The summary's ``tentative`` against the closures; what must be kept free is checked with the hard ones."""
    listed = {(str(entry.get("contact_id")), str(entry.get("start_utc"))) for entry in summary.get("tentative", [])}
    touching = set()
    for contact in contacts:
        from_s, until_s = held(run, contact)
        for closure in run.closures:
            if not closure.tentative or closure.antenna != contact.antenna:
                continue
            a, b = (float((datetime64(instant) - run.start_utc) / np.timedelta64(1, "ms")) / 1e3
                    for instant in (closure.start_utc, closure.end_utc))
            # A plan rounds setup times up and closures outward, so that either answer is right within a second.
            sure = from_s < b and a < until_s
            near = from_s < b + 1.0 and a < until_s + 1.0
            name = contact.contact_id, f"{closure.start_utc:%Y-%m-%dT%H:%M:%S}Z"
            if near:
                touching.add(name)
            if sure and name not in listed and run.policy.tentative_closures == "plan_through":
                yield Fault("tentative", contact.place, "touches a tentative closure, and the plan does not say so")
    for contact_id, start in sorted(listed - touching):
        yield Fault("tentative", f"contact {contact_id}", f"touches no tentative closure from {start}")
