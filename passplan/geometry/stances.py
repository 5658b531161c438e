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
from passplan.geometry.travel import choose_branch, roomiest_turns_deg, runs_unwrapped_deg
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
    rows, place = np.unique(window, return_inverse=True)
    samples = sample_windows(windows.iloc[rows], orbits, sites, start_utc, _STEP_S, refraction=refraction)
    first, last = samples.offsets[:-1], samples.offsets[1:]
    lower, upper = axis_angles_deg(mount, samples.azimuth_deg, samples.elevation_deg)
    track = runs_unwrapped_deg(lower, samples.offsets)
    turn, spare = roomiest_turns_deg(mount, np.minimum.reduceat(track, first), np.maximum.reduceat(track, first))
    for k in np.flatnonzero(spare < 0.0).tolist():
        own = slice(first[k], last[k])
        turn[k] = choose_branch(mount, samples.time_s[own], track[own]).turn_deg
    # Samples lie evenly from AOS on; only the last step is shorter.
    step = np.floor((time_s - samples.time_s[first[place]]) / _STEP_S).astype(np.int64)
    left = np.clip(first[place] + step, first[place], last[place] - 2)
    share = (time_s - samples.time_s[left]) / (samples.time_s[left + 1] - samples.time_s[left])
    share = np.clip(share, 0.0, 1.0)
    between = [angle[left] + share * (angle[left + 1] - angle[left]) for angle in (track, upper)]
    return Stance(between[0] + turn[place], between[1])
