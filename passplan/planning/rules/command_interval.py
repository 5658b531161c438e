"""A command contact at least every so many hours, from the end of one to the start of the next."""

from __future__ import annotations

import numpy as np

from passplan.planning.problem import Problem
from passplan.planning.rules.terms import Recurrence, Terms


def command_interval(problem: Problem) -> Terms:
    """One recurrence per spacecraft that has the requirement.

    It is counted from the last command contact before the horizon to the horizon's end: an interval that
    is still open there has not been missed yet.
    """
    options = problem.options
    terms = []
    for need in problem.commands:
        mine = np.flatnonzero(options.command & (options.spacecraft == need.spacecraft))
        from_s = max(0, need.last_s + need.every_s)
        if from_s >= problem.horizon_s:
            continue
        name = problem.fleet.names[need.spacecraft]
        terms.append(Recurrence(
            name, mine, options.start_s[mine], options.end_s[mine], need.every_s, from_s,
            problem.horizon_s))
    return Terms(recurrences=tuple(terms))
