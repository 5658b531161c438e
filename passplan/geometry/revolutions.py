"""When a spacecraft begins a new orbit: its passage of the ascending node."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from passplan.geometry.timescale import Floats, datetimes_ms, utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.run import OrbitSource

_STEP_S = 60.0
_HALVINGS = 16


def ascending_nodes(
    source: OrbitSource, start_utc: np.datetime64, end_utc: np.datetime64
) -> NDArray[np.datetime64]:
    """Instants (n,) of ``datetime64[ms]`` within (start, end] at which it crosses the equator northward.

    They follow from the trajectory itself, to a millisecond, so that an orbit is counted as it is flown. There are
    none where the orbit source has no answer, and none for an orbit that lies in the plane of the equator.
    """
    start_s, end_s = float(utc_seconds(start_utc)), float(utc_seconds(end_utc))
    times = np.linspace(start_s, end_s, max(int(np.ceil((end_s - start_s) / _STEP_S)) + 1, 2))
    height = _height_km(source, times)
    rising = np.flatnonzero((height[:-1] <= 0.0) & (height[1:] > 0.0))
    low, high = times[rising].copy(), times[rising + 1].copy()
    for _ in range(_HALVINGS if rising.size else 0):
        middle = 0.5 * (low + high)
        above = _height_km(source, middle) > 0.0
        low, high = np.where(above, low, middle), np.where(above, middle, high)
    return datetimes_ms(0.5 * (low + high))


def _height_km(source: OrbitSource, utc_s: Floats) -> Floats:
    """How far north of the equator's plane (n,); NaN where there is no answer."""
    return np.asarray(states_itrf(source, utc_s)[0][:, 2])
