"""No contact of a spacecraft while it takes images, or holds an attitude in which it cannot point at a station."""

from __future__ import annotations

import math
from collections.abc import Iterator

from passplan.inputs.run import Run
from passplan.planning.hooks import Block
from passplan.planning.horizon import seconds_of

_WHY = {"imaging": "takes images then", "attitude": "holds an attitude then in which it cannot point at a station"}


def slot_blocks(run: Run) -> Iterator[Block]:
    """One block per slot; an antenna may prepare and release meanwhile."""
    for slot in run.slots:
        note = f" ({slot.note})" if slot.note else ""
        yield Block(
            None, slot.spacecraft, math.floor(seconds_of(run, slot.start_utc)),
            math.ceil(seconds_of(run, slot.end_utc)), slot.kind, f"{slot.spacecraft} {_WHY[slot.kind]}{note}",
            setup=False)
