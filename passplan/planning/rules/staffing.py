"""No contact, nor its preparing and releasing, while nobody is at the site."""

from __future__ import annotations

import math
from collections.abc import Iterator
from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo

from passplan.inputs.ground import Site
from passplan.inputs.run import Run
from passplan.inputs.site_rules import WEEKDAYS
from passplan.planning.hooks import Block
from passplan.planning.horizon import seconds_of

# Contacts are held at most so long before and after the horizon.
_MARGIN_S = 86_400


def staffing_blocks(run: Run) -> Iterator[Block]:
    """One block for each antenna and each span in which its site is not staffed."""
    for site in run.sites.values():
        if not site.staffed:
            continue
        gaps = unstaffed_spans(run, site)
        for antenna in (name for name, a in run.antennas.items() if a.site == site.name):
            for start_s, end_s in gaps:
                yield Block(antenna, None, start_s, end_s, "unstaffed", f"nobody is at {site.name} then")


def unstaffed_spans(run: Run, site: Site) -> list[tuple[int, int]]:
    """The half-open spans [s] without staff, from a day before the horizon to a day after it, in time order."""
    first: datetime = run.start_utc.astype("datetime64[s]").astype(datetime).replace(tzinfo=UTC)
    spans = []
    for shift in site.staffed:
        zone = ZoneInfo(site.time_zone) if shift.zone == "site" and site.time_zone else UTC
        midnight = first.astimezone(zone).replace(hour=0, minute=0, second=0, microsecond=0)
        length = shift.closes - shift.opens + (0 if shift.closes > shift.opens else 1_440)
        for day in range(-3, math.ceil(run.horizon_s / 86_400) + 3):
            # Wall clocks are added up before they become instants, so that a change of summer time is honoured.
            day_start = midnight.replace(tzinfo=None) + timedelta(days=day)
            if WEEKDAYS[day_start.weekday()] in shift.days:
                opens, closes = (
                    (day_start + timedelta(minutes=minutes)).replace(tzinfo=zone).astimezone(UTC)
                    for minutes in (shift.opens, shift.opens + length))
                spans.append((math.ceil(seconds_of(run, opens)), math.floor(seconds_of(run, closes))))
    gaps, reached = [], -_MARGIN_S
    for start_s, end_s in sorted(spans):
        if start_s > reached:
            gaps.append((reached, min(start_s, run.horizon_s + _MARGIN_S)))
        reached = max(reached, end_s)
    if reached < run.horizon_s + _MARGIN_S:
        gaps.append((reached, run.horizon_s + _MARGIN_S))
    return [(a, b) for a, b in gaps if a < b]
