"""A spacecraft rests between contacts, and its transmitter cools down between those in which it sends."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from passplan.planning.hooks import Draft
from passplan.planning.problem import Problem
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
    """A lane that a contact holds until the gap behind it is over, and one for those that send."""
    options, lanes = problem.options, []
    for need in problem.needs_of(GapNeed):
        name, own = problem.fleet.names[need.spacecraft], options.spacecraft == need.spacecraft
        for what, kind, held, behind_s in (
            (f"{name}, with {need.gap_s} s between contacts,", "contact_gap", own, need.gap_s),
            (f"the transmitter of {name}, which cools down for {need.cool_down_s} s,", "cool_down",
             own & options.downlink, need.cool_down_s),
        ):
            mine = np.flatnonzero(held)
            if behind_s and len(mine):
                lanes.append(Lane(
                    what, kind, mine, options.start_s[mine], options.end_s[mine] + behind_s, owner=need.spacecraft))
    return Terms(lanes=tuple(lanes))
