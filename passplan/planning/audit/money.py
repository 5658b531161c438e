"""What contacts cost, and the budget of a day."""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Iterator, Sequence

import numpy as np

from passplan.inputs.run import Run
from passplan.planning.audit.faults import Fault
from passplan.planning.audit.rows import Contact

_ROUNDING = 1e-9


def cost_of(run: Run, contact: Contact) -> float:
    """The charge for one contact, from its times and the antenna's prices."""
    antenna = run.antennas[contact.antenna]
    minutes = (contact.end_s - contact.start_s) / 60.0
    if antenna.billed_s is not None:
        minutes = math.ceil(round(minutes * 60.0 / antenna.billed_s, 9)) * antenna.billed_s / 60.0
    charge = antenna.price_per_contact + minutes * antenna.price_per_minute
    return charge if charge > antenna.minimum_charge else antenna.minimum_charge


def check_budget(run: Run, contacts: Sequence[Contact]) -> Iterator[Fault]:
    """Contacts that start on one UTC day cost no more than a day's budget."""
    budget = run.policy.budget_per_day
    if budget is None:
        return
    spent: dict[str, float] = defaultdict(float)
    for contact in contacts:
        start = run.start_utc + np.timedelta64(math.floor(contact.start_s * 1e3), "ms")
        spent[str(start.astype("datetime64[D]"))] += cost_of(run, contact)
    for day, money in sorted(spent.items()):
        if money > budget * (1.0 + _ROUNDING) + 1e-9:
            yield Fault("budget", "plan", f"the contacts of {day} cost {money:.6g}, the budget of a day is {budget:g}")
