"""One element set, whatever file format it came in."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from sgp4.api import Satrec


@dataclass(frozen=True)
class ElementSet:
    """A mean element set for SGP4, with where it was read.

    ``catalogue_number`` is None for an object that has none yet (fresh from launch).
    ``epoch_utc`` is a ``datetime64[us]`` in UTC. ``place`` names the line, row or record in ``source``.
    """

    name: str
    catalogue_number: int | None
    international_designator: str
    epoch_utc: np.datetime64
    satrec: Satrec = field(repr=False, compare=False)
    source: Path = Path()
    place: str = ""

    def age_days(self, at_utc: np.datetime64) -> float:
        """Days from the epoch to ``at_utc``; negative when the epoch lies after it."""
        return float((at_utc - self.epoch_utc) / np.timedelta64(1, "us")) / 86_400e6
