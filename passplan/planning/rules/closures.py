"""No contact while its antenna is closed, nor its time to prepare and to release."""

from __future__ import annotations

import math
from collections.abc import Iterator

from passplan.inputs.run import Run
from passplan.planning.hooks import Block
from passplan.planning.horizon import seconds_of


def closure_blocks(run: Run) -> Iterator[Block]:
    """One block per closure of the calendars, tentative ones only where the policy keeps them free."""
    for closure in run.closures:
        if closure.tentative and run.policy.tentative_closures == "plan_through":
            continue
        yield Block(
            closure.antenna, None, math.floor(seconds_of(run, closure.start_utc)),
            math.ceil(seconds_of(run, closure.end_utc)), "closure",
            f"{closure.antenna} is {'tentatively ' if closure.tentative else ''}closed,"
            " or preparing or releasing beside a closure")
