"""An antenna serves one contact at a time, with time to prepare before it and to release after it."""

from __future__ import annotations

import numpy as np

from passplan.planning.problem import Integers, Problem
from passplan.planning.rules.terms import Lane, Terms


def antenna_time(problem: Problem) -> Terms:
    """One lane per antenna with a single beam."""
    start_s, end_s = held_s(problem)
    lanes = []
    for k in np.flatnonzero(problem.antennas.beams == 1).tolist():
        mine = np.flatnonzero(problem.options.antenna == k)
        lanes.append(Lane(problem.antennas.names[k], "antenna_busy", mine, start_s[mine], end_s[mine]))
    return Terms(lanes=tuple(lanes))


def held_s(problem: Problem) -> tuple[Integers, Integers]:
    """When each option holds its antenna: from ``prepare_s`` before its start to ``release_s`` after its end."""
    options, antennas = problem.options, problem.antennas
    return (options.start_s - antennas.prepare_s[options.antenna],
            options.end_s + antennas.release_s[options.antenna])
