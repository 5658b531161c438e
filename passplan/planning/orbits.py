"""The orbits and the UTC days of a horizon, as limits of spacecraft count them."""

from __future__ import annotations

import numpy as np

from passplan.geometry.revolutions import ascending_nodes
from passplan.inputs.run import Run


def orbit_edges_s(run: Run, spacecraft: str) -> tuple[float, ...]:
    """Seconds from the horizon's start at which a new orbit begins: the ascending nodes within it.

    What lies before the first and after the last counts as an orbit of its own; without a node (an orbit in the
    plane of the equator) the whole horizon does.
    """
    nodes = ascending_nodes(run.orbits[spacecraft], run.start_utc, run.end_utc)
    return tuple(((nodes - run.start_utc) / np.timedelta64(1, "ms") / 1e3).tolist())


def day_edges_s(run: Run) -> tuple[float, ...]:
    """Seconds from the horizon's start of the midnights (UTC) within it."""
    first, last = run.start_utc.astype("datetime64[D]"), run.end_utc.astype("datetime64[D]")
    midnights = np.arange(first + 1, last + 1).astype("datetime64[ms]")
    return tuple(((midnights - run.start_utc) / np.timedelta64(1, "s")).tolist())
