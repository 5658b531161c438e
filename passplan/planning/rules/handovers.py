"""Contacts that follow a spacecraft over a span without a break: each begins well before the one before it ends.

A span [E, L) is followed with overlaps of N seconds exactly if every instant of [E, L - N) lies in [start, end - N) of
a contact: these parts leave no gap where each contact starts N before the one before it ends, and the last of them
reaches L - N where its contact reaches L. (Own derivation.) During the overlap the spacecraft is in both contacts and
sends in both, so that it needs two links.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from passplan.planning.hooks import Draft
from passplan.planning.problem import Problem, RequestNeed
from passplan.planning.rules.requests import fits, request_need
from passplan.planning.rules.terms import Recurrence, Terms, Wanted


@dataclass(frozen=True)
class HandoverNeed:
    """Contacts that would each meet ``request``, but for its span, follow each other over it with ``overlap_s``."""

    request: RequestNeed
    overlap_s: int


def handovers(problem: Problem) -> Terms:
    """One recurrence per request, over its part of the horizon; none where that is no longer than the overlap.

    A spacecraft that takes no part leaves a wanted term that nothing can meet.
    """
    options, wanted, recurrences = problem.options, [], []
    for need in problem.needs_of(HandoverNeed):
        asked = need.request
        if asked.spacecraft < 0:
            reason, none = "the spacecraft takes no part in this run", np.zeros(0, dtype=np.int64)
            wanted.append(Wanted(asked.name, asked.craft_name, none, asked.points, reason))
            continue
        from_s = max(0, asked.earliest_s)
        until_s = min(asked.latest_s, problem.horizon_s) - need.overlap_s
        if until_s <= from_s:
            continue
        anywhere = replace(asked, earliest_s=0, latest_s=problem.horizon_s)
        mine = np.flatnonzero(
            fits(options, anywhere) & (options.start_s < until_s) & (options.end_s - need.overlap_s > from_s))
        recurrences.append(Recurrence(
            asked.craft_name, mine, options.start_s[mine], options.end_s[mine], until_s - from_s, from_s, until_s,
            asked.name, need.overlap_s, asked.points))
    return Terms(wanted=tuple(wanted), recurrences=tuple(recurrences))


def handover_needs(draft: Draft) -> Iterator[HandoverNeed]:
    """One record per request for contacts that hand over to each other."""
    for request in draft.run.requests:
        if request.handover_overlap_s is not None:
            yield HandoverNeed(
                request_need(draft.run, draft.problem.fleet, request), request.handover_overlap_s)
