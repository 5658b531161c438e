"""An antenna with several beams serves as many contacts at a time as it has beams."""

from __future__ import annotations

import numpy as np

from passplan.planning.problem import Problem
from passplan.planning.rules.rows import at_the_same_time
from passplan.planning.rules.terms import Terms


def beams(problem: Problem) -> Terms:
    """Rows for each antenna with more than one beam; each contact prepares and releases a beam of its own.

    Which beam serves which contact is left open: intervals of which no more than N overlap can always be given
    N beams so that none serves two at a time (greedily, in the order of their starts).
    """
    holds = problem.options.holds
    start_s, end_s = holds.start_s - holds.prepare_s, holds.end_s + holds.release_s
    rows = []
    for k in np.flatnonzero(problem.antennas.beams > 1).tolist():
        mine = np.flatnonzero(holds.antenna == k)
        name, most = problem.antennas.names[k], float(problem.antennas.beams[k])
        rows.append(at_the_same_time("antenna_busy", name, holds.option[mine], start_s[mine], end_s[mine], most))
    return Terms(rows=tuple(rows))
