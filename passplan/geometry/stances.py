"""The axis angles of a mount at instants inside windows, with the turns of its cables."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.geometry.axes import axis_angles_deg
from passplan.geometry.pointing import sample_windows
from passplan.geometry.slew import Stance
from passplan.geometry.timescale import Floats
from passplan.geometry.travel import choose_branch, unwrapped_deg
from passplan.inputs.ground import Site
from passplan.inputs.mounts import Mount
from passplan.inputs.run import OrbitSource

_STEP_S = 5.0


def stances(
    windows: pd.DataFrame, orbits: Mapping[str, OrbitSource], sites: Mapping[str, Site], mount: Mount,
    start_utc: np.datetime64, window: NDArray[np.int64], time_s: Floats, *, refraction: bool = False,
) -> Stance:
    """Axis angles at ``time_s`` (m,) from ``start_utc``, each inside the row ``window`` (m,) of ``windows``.

    All windows are of antennas on ``mount``. The branch of each pass is the one that
    :func:`~passplan.geometry.travel.choose_branch` takes for it; between samples angles run straight.
    """
    lower, upper = np.full(time_s.size, np.nan), np.full(time_s.size, np.nan)
    rows, place = np.unique(window, return_inverse=True)
    samples = sample_windows(windows.iloc[rows], orbits, sites, start_utc, _STEP_S, refraction=refraction)
    angles = axis_angles_deg(mount, samples.azimuth_deg, samples.elevation_deg)
    order = np.argsort(place, kind="stable")
    edges = np.searchsorted(place[order], np.arange(rows.size + 1))
    for k in range(rows.size):
        own, mine = slice(samples.offsets[k], samples.offsets[k + 1]), order[edges[k] : edges[k + 1]]
        track = unwrapped_deg(angles[0][own])
        turn = choose_branch(mount, samples.time_s[own], track).turn_deg
        lower[mine] = np.interp(time_s[mine], samples.time_s[own], track + turn)
        upper[mine] = np.interp(time_s[mine], samples.time_s[own], angles[1][own])
    return Stance(lower, upper)
