"""Two contacts that would disturb each other are not both in the plan."""

from __future__ import annotations

import numpy as np

from passplan.planning.problem import Problem
from passplan.planning.rules.terms import Lane, Terms


def interference(problem: Problem) -> Terms:
    """One lane for each conflict, held by what overlaps its time: the victim on its antenna, the other anywhere.

    Contacts of the victim overlap in no lane of their own anyway, and neither do those of the other, so
    that "one at a time" says here that not both at once.
    """
    options, lanes = problem.options, []
    for conflict in problem.conflicts:
        victim = (options.spacecraft == conflict.victim) & (options.antenna == conflict.antenna)
        other = options.spacecraft == conflict.interferer
        inside = (options.start_s < conflict.end_s) & (options.end_s > conflict.start_s)
        mine = np.flatnonzero((victim | other) & options.downlink & inside)
        if np.any(victim[mine]) and np.any(other[mine]):
            lanes.append(Lane(
                conflict.name, "interference", mine, np.maximum(options.start_s[mine], conflict.start_s),
                np.minimum(options.end_s[mine], conflict.end_s)))
    return Terms(lanes=tuple(lanes))
