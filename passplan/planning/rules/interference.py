"""Contacts that would disturb each other are not in the plan together."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from passplan.planning.arrays import Flags
from passplan.planning.problem import Conflict, Crowd, Problem
from passplan.planning.rules.rows import Row, at_the_same_time, rows_of
from passplan.planning.rules.terms import Lane, Rows, Terms


def interference(problem: Problem) -> Terms:
    """One lane for each pair, and for each crowd one row at every instant at which somebody new joins it.

    A lane is held by what overlaps its time: the victim on its antenna, the other anywhere. Contacts of the
    victim overlap in no lane of their own anyway, and neither do those of the other, so that "one at a time" says
    here that not both at once. Where the other has several links its contacts may overlap: then it is a row.
    """
    lanes, pairs = [], []
    for conflict in problem.conflicts:
        lane = _lane(problem, conflict)
        if lane is not None and problem.fleet.links[conflict.interferer] == 1:
            lanes.append(lane)
        elif lane is not None:
            pairs.append(_pair(problem, conflict, lane))
    rows: dict[tuple[int, ...], list[Row]] = {}
    for crowd in problem.crowds:
        for row in _rows(problem, crowd):
            others = rows.setdefault(tuple(np.asarray(row[1]).tolist()), [])
            # The same contacts a little later: only what binds more, for at least one of them, says anything new.
            if not any(np.all(np.asarray(other[2]) >= row[2]) and other[3] <= row[3] for other in others):
                others.append(row)
    crowded = rows_of("interference", [row for same in rows.values() for row in same])
    return Terms(lanes=tuple(lanes), rows=(*pairs, crowded))


def _lane(problem: Problem, conflict: Conflict) -> Lane | None:
    options = problem.options
    victim = _heard(problem, conflict)
    other = options.downlink & (options.spacecraft == conflict.interferer)
    inside = (options.start_s < conflict.end_s) & (options.end_s > conflict.start_s)
    mine = np.flatnonzero((victim | other) & inside)
    if not np.any(victim[mine]) or not np.any(other[mine]):
        return None
    return Lane(
        conflict.name, "interference", mine, np.maximum(options.start_s[mine], conflict.start_s),
        np.minimum(options.end_s[mine], conflict.end_s))


def _pair(problem: Problem, conflict: Conflict, lane: Lane) -> Rows:
    """Beside the victim none of the other's contacts, without it as many at once as the other has links."""
    links = float(problem.fleet.links[conflict.interferer])
    amounts = np.where(_heard(problem, conflict)[lane.options], links, 1.0)
    return at_the_same_time(lane.kind, lane.name, lane.options, lane.start_s, lane.end_s, links, amounts)


def _rows(problem: Problem, crowd: Crowd) -> Iterator[Row]:
    """At an instant each spacecraft has one contact, so that the row is exact where the shares stay the same:

        sum of shares + (all shares - 1) x victim  <=  all shares

    Without the victim anything goes; with it, what is sent must not exceed 1. Each contact of a spacecraft with several
    links has its part of the share.
    """
    options = problem.options
    share = np.zeros(len(problem.fleet))
    share[list(crowd.interferers)] = crowd.shares
    victim = _heard(problem, crowd)
    each = share / problem.fleet.links
    amounts = np.where(options.downlink & ~victim, each[options.spacecraft], 0.0)
    inside = (options.start_s < crowd.end_s) & (options.end_s > crowd.start_s) & (victim | (amounts > 0.0))
    mine = np.flatnonzero(inside)
    if not np.any(victim[mine]):
        return
    for instant in np.unique(np.maximum(options.start_s[mine], crowd.start_s)).tolist():
        now = mine[(options.start_s[mine] <= instant) & (options.end_s[mine] > instant)]
        present = np.unique(options.spacecraft[now[~victim[now]]])
        total = float(share[present].sum())
        if total > 1.0 and np.any(victim[now]):
            yield crowd.name, now, np.where(victim[now], total - 1.0, amounts[now]), total


def _heard(problem: Problem, conflict: Conflict | Crowd) -> Flags:
    options = problem.options
    return np.asarray(
        options.downlink & (options.spacecraft == conflict.victim) & (options.antenna == conflict.antenna))
