"""Schedules that are loaded aboard: until when they hold, and whether a plan brings up the next one in time."""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np
import pandas as pd

from passplan.inputs.run import Run
from passplan.planning.horizon import column_seconds, seconds_of
from passplan.planning.record import STANDBY


def loaded_until_s(run: Run, name: str) -> int:
    """Until when the schedule aboard a spacecraft holds [s]; 0 or less where there is none."""
    stated = run.spacecraft[name].loaded_until_utc
    ends = [c.end_utc for c in run.loaded if c.spacecraft == name] if stated is None else [stated]
    return max((math.ceil(seconds_of(run, end)) for end in ends), default=0)


def schedule_warnings(run: Run, contacts: pd.DataFrame) -> Iterator[str]:
    """A sentence for each spacecraft that would send by a new schedule before any contact could bring it up."""
    contacts = contacts[contacts["origin"] != STANDBY]
    start_s, end_s = column_seconds(run, contacts["start_utc"]), column_seconds(run, contacts["end_utc"])
    for name in run.orbits:
        until_s = loaded_until_s(run, name)
        mine = (contacts["spacecraft"] == name).to_numpy()
        new = mine & (contacts["service"] != "command").to_numpy() & (start_s >= until_s)
        if until_s <= 0 or not new.any():
            continue
        first = int(np.flatnonzero(new)[np.argmin(start_s[new])])
        commands = mine & (contacts["service"] != "downlink").to_numpy() & (end_s <= start_s[first])
        if not commands.any():
            at = f"{contacts['start_utc'].iloc[first]:%Y-%m-%d %H:%M}"
            yield (f"{name}: from {at} UTC on the plan needs a new schedule aboard, and no command contact "
                   "of the plan comes before; pin one, or say in loaded_until_utc from when it will be there")
