"""An antenna serves one contact at a time, with time to prepare before it and to release after it."""

from __future__ import annotations

import numpy as np

from passplan.planning.problem import Problem
from passplan.planning.rules.terms import Lane, Terms


def antenna_time(problem: Problem) -> Terms:
    """One lane per antenna with a single beam; a contact holds it from its ``prepare_s`` to its ``release_s``."""
    holds = problem.options.holds
    start_s, end_s = holds.start_s - holds.prepare_s, holds.end_s + holds.release_s
    lanes = []
    for k in np.flatnonzero(problem.antennas.beams == 1).tolist():
        mine = np.flatnonzero(holds.antenna == k)
        lanes.append(Lane(problem.antennas.names[k], "antenna_busy", holds.option[mine], start_s[mine], end_s[mine]))
    return Terms(lanes=tuple(lanes))
