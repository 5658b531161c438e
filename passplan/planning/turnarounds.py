"""Pairs of contacts that an antenna cannot turn between in time, from the end of the first to the start of the next."""

from __future__ import annotations

import numpy as np
import pandas as pd

from passplan.geometry.slew import Stance, turnaround_s
from passplan.geometry.stances import stances
from passplan.inputs.run import Run
from passplan.planning.arrays import Integers
from passplan.planning.option_table import Options
from passplan.planning.problem import Antennas


def too_tight(run: Run, windows: pd.DataFrame, antennas: Antennas, options: Options) -> Integers:
    """Pairs (k, 2) of options that hold one antenna, the earlier first, and leave it less time than it needs to turn.

    Only pairs that the time to prepare and to release lets through; both may go on while the antenna turns.
    """
    pairs, holds = [np.zeros((0, 2), dtype=np.int64)], options.holds
    for k, name in enumerate(antennas.names):
        mount, mine = run.mount_of(name), np.flatnonzero(holds.antenna == k)
        if mount is None or not mount.moves or len(mine) < 2:
            continue
        mine = mine[np.argsort(holds.start_s[mine], kind="stable")]
        begins, ends = (
            stances(windows, run.orbits, run.sites, mount, run.start_utc, holds.window[mine], at[mine].astype(float),
                    refraction=run.policy.refraction != "off")
            for at in (holds.start_s, holds.end_s))
        prepare_s, release_s = holds.prepare_s[mine], holds.release_s[mine]
        # No turn takes longer than that between the furthest of all angles.
        lower, upper = (
            np.concatenate([getattr(stance, axis) for stance in (begins, ends)]) for axis in ("lower_deg", "upper_deg"))
        tied = mount.model_copy(update={"lower_from_deg": -720.0})
        longest_s = float(turnaround_s(tied, Stance(lower.min(), upper.min()), Stance(lower.max(), upper.max())))
        if longest_s <= prepare_s.min() + release_s.min():
            continue
        starts = holds.start_s[mine]
        for at, end_s in enumerate(holds.end_s[mine].tolist()):
            low, high = np.searchsorted(starts, [end_s + release_s[at], end_s + longest_s])
            after = np.arange(low, high)
            after = after[starts[after] - prepare_s[after] >= end_s + release_s[at]]
            needed_s = turnaround_s(mount, Stance(ends.lower_deg[at], ends.upper_deg[at]),
                                    Stance(begins.lower_deg[after], begins.upper_deg[after]))
            late = after[starts[after] - end_s < needed_s]
            pairs.append(np.column_stack([np.full(len(late), holds.option[mine[at]]), holds.option[mine[late]]]))
    return np.concatenate(pairs).astype(np.int64)
