"""A spacecraft has one contact at a time."""

from __future__ import annotations

import numpy as np

from passplan.planning.problem import Problem
from passplan.planning.rules.terms import Lane, Terms


def spacecraft_time(problem: Problem) -> Terms:
    """One lane per spacecraft, held for the contact itself."""
    options = problem.options
    lanes = []
    for k, name in enumerate(problem.fleet.names):
        mine = np.flatnonzero(options.spacecraft == k)
        lanes.append(Lane(name, "spacecraft_busy", mine, options.start_s[mine], options.end_s[mine], owner=k))
    return Terms(lanes=tuple(lanes))
