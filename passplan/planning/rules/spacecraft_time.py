"""A spacecraft has one contact at a time, or as many as it has links, each on an antenna of its own."""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Integers
from passplan.planning.problem import Problem
from passplan.planning.rules.rows import at_the_same_time
from passplan.planning.rules.terms import Lane, Terms


def spacecraft_time(problem: Problem) -> Terms:
    """One lane per spacecraft, held for the contact itself; with several links, rows, and a lane for each antenna.

    An antenna with a single beam has its own lane, so that only one with several can meet a spacecraft twice.
    """
    options, fleet = problem.options, problem.fleet
    lanes, rows = [], []

    def lane(name: str, mine: Integers, owner: int) -> Lane:
        return Lane(name, "spacecraft_busy", mine, options.start_s[mine], options.end_s[mine], owner)

    for k, name in enumerate(fleet.names):
        mine = np.flatnonzero(options.spacecraft == k)
        if fleet.links[k] == 1:
            lanes.append(lane(name, mine, k))
            continue
        rows.append(at_the_same_time(
            "spacecraft_busy", name, mine, options.start_s[mine], options.end_s[mine], float(fleet.links[k])))
        for antenna in np.unique(options.antenna[mine][problem.antennas.beams[options.antenna[mine]] > 1]).tolist():
            there = mine[options.antenna[mine] == antenna]
            lanes.append(lane(f"{name} on {problem.antennas.names[antenna]}", there, k))
    return Terms(lanes=tuple(lanes), rows=tuple(rows))
