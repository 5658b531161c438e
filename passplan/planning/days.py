"""The UTC days of a horizon, for limits that hold by the day."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from passplan.inputs.run import Run


@dataclass(frozen=True)
class Day:
    """One UTC day: its date as text, and where it starts and ends in seconds from the horizon's start."""

    date: str
    start_s: int
    end_s: int


def days_of(run: Run) -> Iterator[Day]:
    """Every UTC day that the horizon touches, whole, in order."""
    midnight = run.start_utc.astype("datetime64[D]")
    while midnight < run.end_utc:
        start_s = int((midnight - run.start_utc) / np.timedelta64(1, "s"))
        yield Day(str(midnight), start_s, start_s + 86_400)
        midnight += np.timedelta64(1, "D")
