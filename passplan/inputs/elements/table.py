"""The table of element sets: what was read for the fleet, and the use made of each."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
import pandas as pd

COLUMNS = ("spacecraft", "catalogue_number", "name", "epoch_utc", "age_days", "use", "source", "place")


@dataclass(frozen=True)
class ElementRow:
    """One row: an element set, or an ephemeris file (no epoch and no age then)."""

    spacecraft: str
    catalogue_number: int | None
    name: str
    epoch_utc: np.datetime64
    age_days: float
    use: str
    source: str
    place: str


def elements_table(rows: Iterable[ElementRow]) -> pd.DataFrame:
    """The rows as a DataFrame with the columns of :data:`COLUMNS`.

    ``catalogue_number`` is a nullable integer, ``epoch_utc`` is ``datetime64[ms]`` in UTC (NaT for an
    ephemeris), ``age_days`` is the age at the horizon's start, negative for an epoch after it.
    """
    listed = list(rows)
    frame = pd.DataFrame(
        {column: [getattr(row, column) for row in listed] for column in COLUMNS}, columns=list(COLUMNS)
    )
    frame["catalogue_number"] = pd.array([row.catalogue_number for row in listed], dtype="Int64")
    frame["epoch_utc"] = np.array([row.epoch_utc for row in listed], dtype="datetime64[ms]")
    frame["age_days"] = frame["age_days"].astype("float64")
    return frame
