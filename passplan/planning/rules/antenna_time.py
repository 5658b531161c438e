"""An antenna serves one contact at a time, with time to prepare before it and to release after it."""

from __future__ import annotations

import numpy as np

from passplan.planning.problem import Problem
from passplan.planning.rules.terms import Lane, Terms


def antenna_time(problem: Problem) -> Terms:
    """One lane per antenna; a contact holds it from ``prepare_s`` before its start to ``release_s`` after its end."""
    options = problem.options
    start_s, end_s = options.start_s - options.prepare_s, options.end_s + options.release_s
    lanes = []
    for k, name in enumerate(problem.antennas.names):
        mine = np.flatnonzero(options.antenna == k)
        lanes.append(Lane(name, "antenna_busy", mine, start_s[mine], end_s[mine]))
    return Terms(lanes=tuple(lanes))
