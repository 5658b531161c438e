"""States from element sets by SGP4, and the time at which SGP4 gives up on an object."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from sgp4.api import Satrec, SatrecArray

from passplan.geometry.frames import teme_to_itrf
from passplan.geometry.timescale import Floats, julian_day

_FAILURE_RESOLUTION_S = 1e-4


def sgp4_itrf(satrec: Satrec, utc_s: Floats) -> tuple[Floats, Floats]:
    """Earth-fixed position (n, 3) in km and velocity in km/s at ``utc_s`` (n,); NaN where SGP4 fails."""
    errors, positions, velocities = satrec.sgp4_array(*julian_day(utc_s))
    failed = errors != 0
    positions[failed] = np.nan
    velocities[failed] = np.nan
    return teme_to_itrf(positions, velocities, utc_s)


def sgp4_teme_many(satrecs: Sequence[Satrec], utc_s: Floats) -> tuple[Floats, np.ndarray]:
    """TEME positions (objects, times, 3) in km, and whether SGP4 failed there (objects, times)."""
    errors, positions, _ = SatrecArray(list(satrecs)).sgp4(*julian_day(utc_s))
    return positions, errors != 0


def sgp4_span(
    satrec: Satrec, epoch_s: float, start_s: float, end_s: float, step_s: float = 60.0
) -> tuple[float, float]:
    """The part of [start_s, end_s] that SGP4 reaches from the epoch without a failure; empty as (start_s, start_s).

    Once an object has decayed, SGP4 may return numbers again half an orbit later; they mean nothing. So
    the walk goes from the epoch outwards and stops at the first failure, found to 0.1 ms.
    """
    latest = _first_failure(satrec, min(max(epoch_s, start_s - 10 * 86_400.0), end_s), end_s, step_s)
    earliest = _first_failure(satrec, max(min(epoch_s, end_s + 10 * 86_400.0), start_s), start_s, -step_s)
    low, high = max(start_s, earliest), min(end_s, latest)
    return (low, high) if low < high else (start_s, start_s)


def _first_failure(satrec: Satrec, from_s: float, to_s: float, step_s: float) -> float:
    """The last good time on the way from ``from_s`` to ``to_s``."""
    count = max(2, int(np.ceil((to_s - from_s) / step_s)) + 1) if (to_s - from_s) * step_s > 0 else 1
    times = np.linspace(from_s, to_s, count) if count > 1 else np.array([from_s])
    failed = np.flatnonzero(satrec.sgp4_array(*julian_day(times))[0])
    if not failed.size:
        return to_s
    if failed[0] == 0:
        return from_s
    good, bad = float(times[failed[0] - 1]), float(times[failed[0]])
    while abs(bad - good) > _FAILURE_RESOLUTION_S:
        middle = 0.5 * (good + bad)
        jd, fraction = julian_day(np.array([middle]))
        if satrec.sgp4(float(jd[0]), float(fraction[0]))[0]:
            bad = middle
        else:
            good = middle
    return good
