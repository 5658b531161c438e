"""Between instants and the whole seconds from the horizon's start that planning counts in."""

from __future__ import annotations

from datetime import datetime

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike, NDArray

from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.planning.arrays import Floats


def seconds_of(run: Run, instant: datetime | np.datetime64) -> float:
    """Seconds from the horizon's start of one instant (zoned, or ``datetime64`` in UTC), to the millisecond."""
    at = datetime64(instant) if isinstance(instant, datetime) else instant
    return float((at - run.start_utc) / np.timedelta64(1, "ms")) / 1000.0


def column_seconds(run: Run, instants: pd.Series) -> Floats:
    """Seconds from the horizon's start of a column of instants, to the millisecond."""
    return np.asarray((instants.to_numpy() - run.start_utc) / np.timedelta64(1, "ms"), dtype=float) / 1000.0


def instants_of(run: Run, seconds: ArrayLike) -> NDArray[np.datetime64]:
    """``datetime64[ms]`` of whole seconds from the horizon's start."""
    return run.start_utc + np.asarray(seconds, dtype=np.int64).astype("timedelta64[s]").astype("timedelta64[ms]")
