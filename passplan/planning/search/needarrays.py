"""What each spacecraft alone is asked for, laid out for compiled code: wanted contacts as bits, and one recurrence."""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Flags, Floats, Integers
from passplan.planning.problem import Problem
from passplan.planning.rules.terms import Terms

# Wanted terms of one spacecraft are bits of one integer.
_MOST_WANTED = 60


def wanted(
    problem: Problem, terms: Terms, place: Integers, count: int,
) -> tuple[Integers, Floats, Integers, list[int]]:
    """Bits, points and last starts of wanted terms, and the numbers of those that are no matter of one spacecraft."""
    bits, points = np.zeros(count, dtype=np.int64), np.zeros((len(problem.fleet), _MOST_WANTED))
    until = np.full(points.shape, -1, dtype=np.int64)
    used = np.zeros(len(problem.fleet), dtype=np.int64)
    others = []
    for k, want in enumerate(terms.wanted):
        rows = place[want.options]
        rows = rows[rows >= 0]
        craft = np.unique(problem.options.spacecraft[want.options])
        if len(craft) != 1 or len(rows) == 0 or used[craft[0]] >= _MOST_WANTED:
            others.append(k)
        else:
            bits[rows] |= np.int64(1) << used[craft[0]]
            points[craft[0], used[craft[0]]] = want.points
            until[craft[0], used[craft[0]]] = problem.options.start_s[want.options].max()
            used[craft[0]] += 1
    return bits, points, until, others


def recurrences(
    problem: Problem, terms: Terms, place: Integers, count: int,
) -> tuple[Integers, Floats, Flags]:
    """The first recurrence of each spacecraft; options of the others are marked."""
    renews, recur = np.full(count, -1, dtype=np.int64), np.zeros((len(problem.fleet), 3))
    uncounted = np.zeros(count, dtype=bool)
    for need in terms.recurrences:
        craft = problem.fleet.names.index(need.name)
        kept = place[need.options] >= 0
        if need.request or recur[craft, 1] > 0.0 or np.any(need.start_s != problem.options.start_s[need.options]):
            uncounted[place[need.options[kept]]] = True
            continue
        renews[place[need.options[kept]]] = np.minimum(need.end_s[kept] + need.every_s, need.until_s)
        recur[craft] = need.from_s, need.until_s, 1.0 / need.every_s
    return renews, recur, uncounted
