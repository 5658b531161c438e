"""Time on rented antennas that was declined, or that it is too late to ask for."""

from __future__ import annotations

import math
from collections.abc import Iterator

from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.planning.hooks import Block
from passplan.planning.horizon import seconds_of
from passplan.planning.spans import without

# Contacts are held at most so long before and after the horizon.
_MARGIN_S = 86_400


def rented_blocks(run: Run) -> Iterator[Block]:
    """One block for each booking that cannot be relied on, and for time without a booking that is too near."""
    now_s = seconds_of(run, run.now_utc)
    for name, antenna in run.antennas.items():
        if not antenna.rented:
            continue
        booked = []
        for row in (row for row in run.bookings if row.antenna == name):
            span = math.floor(seconds_of(run, row.start_utc)), math.ceil(seconds_of(run, row.end_utc))
            booked.append(span)
            if row.state == "declined":
                yield Block(name, None, *span, "declined", f"this time on {name} was declined")
            elif row.state != "granted" and row.ask_by_utc is not None and datetime64(row.ask_by_utc) < run.now_utc:
                detail = f"time on {name} had to be granted by {row.ask_by_utc:%Y-%m-%d %H:%M} UTC"
                yield Block(name, None, *span, "too_late_to_ask", detail)
        ahead_h = antenna.ask_before_h or 0.0
        near = -_MARGIN_S, math.ceil(now_s + 3_600.0 * ahead_h)
        for start_s, end_s in without(near, booked):
            yield Block(name, None, start_s, end_s, "too_late_to_ask",
                        f"time on {name} has to be asked for {ahead_h:g} h ahead")
