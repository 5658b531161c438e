"""A spacecraft rests between contacts, and its transmitter cools down between those in which it sends.

One with several links rests link by link, and has a transmitter for each.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from passplan.planning.hooks import Draft
from passplan.planning.problem import Problem
from passplan.planning.rules.rows import at_the_same_time
from passplan.planning.rules.terms import Lane, Terms


@dataclass(frozen=True)
class GapNeed:
    """Whole seconds that lie free after a contact of ``spacecraft``, and after one that sends before one that sends."""

    spacecraft: int
    gap_s: int
    cool_down_s: int


def gap_needs(draft: Draft) -> Iterator[GapNeed]:
    """One record per spacecraft that has such a limit; fractions of a second are rounded up."""
    for k, name in enumerate(draft.problem.fleet.names):
        craft = draft.run.spacecraft[name]
        if craft.contact_gap_s or craft.cool_down_s:
            yield GapNeed(k, math.ceil(craft.contact_gap_s), math.ceil(craft.cool_down_s))


def contact_gaps(problem: Problem) -> Terms:
    """A lane that a contact holds until the gap behind it is over, and one for those that send.

    With several links they are rows: links can be dealt out so that each rests exactly where no more contacts than
    there are links, each with the gap behind it, overlap.
    """
    options, lanes, rows = problem.options, [], []
    for need in problem.needs_of(GapNeed):
        name, own = problem.fleet.names[need.spacecraft], options.spacecraft == need.spacecraft
        for what, kind, held, behind_s in (
            (f"{name}, with {need.gap_s} s between contacts,", "contact_gap", own, need.gap_s),
            (f"the transmitter of {name}, which cools down for {need.cool_down_s} s,", "cool_down",
             own & options.downlink, need.cool_down_s),
        ):
            mine = np.flatnonzero(held)
            start_s, end_s = options.start_s[mine], options.end_s[mine] + behind_s
            links = int(problem.fleet.links[need.spacecraft])
            if behind_s and len(mine) and links == 1:
                lanes.append(Lane(what, kind, mine, start_s, end_s, owner=need.spacecraft))
            elif behind_s and len(mine):
                rows.append(at_the_same_time(kind, what, mine, start_s, end_s, float(links)))
    return Terms(lanes=tuple(lanes), rows=tuple(rows))
