"""An antenna needs time to turn from where one contact ends to where the next one starts."""

from __future__ import annotations

import numpy as np

from passplan.planning.problem import Problem
from passplan.planning.rules.terms import Lane, Terms


def slew_time(problem: Problem) -> Terms:
    """One lane for each option that has others too close behind it.

    How long it takes depends on both contacts, and on their order, so no interval that a contact holds
    could say it. The lane's times are a code instead: the earlier option holds all of it, each later one
    a second of its own, so that the earlier one excludes each later one, and these do not exclude each other.
    """
    lanes = []
    earlier, later = problem.too_tight[:, 0], problem.too_tight[:, 1]
    for first in np.unique(earlier).tolist():
        behind = np.unique(later[earlier == first])
        origin = int(problem.options.end_s[first])
        start_s = origin + np.arange(len(behind))
        held = problem.options.holds.antenna[problem.options.holds.option == first]
        name = " or ".join(problem.antennas.names[k] for k in held.tolist())
        lanes.append(Lane(
            name, "antenna_turning", np.concatenate([[first], behind]), np.concatenate([[origin], start_s]),
            np.concatenate([[origin + len(behind)], start_s + 1])))
    return Terms(lanes=tuple(lanes))
