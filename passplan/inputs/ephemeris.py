"""An orbit ephemeris message (OEM) as read: states in their own frame and time, converted in geometry."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True)
class EphemerisSegment:
    """One segment of an OEM (CCSDS 502.0-B), in the frame and time system that the message states.

    ``epochs`` has shape (n,) and holds seconds since 2000-01-01T00:00:00 of ``time_system`` (float64);
    ``positions_km`` and ``velocities_km_s`` have shape (n, 3). The segment answers for times from
    ``usable_start`` to ``usable_stop`` (same seconds) and never outside them.
    """

    frame: str
    time_system: str
    epochs: NDArray[np.float64]
    positions_km: NDArray[np.float64]
    velocities_km_s: NDArray[np.float64]
    usable_start: float
    usable_stop: float
    interpolation: str
    interpolation_degree: int


@dataclass(frozen=True)
class Ephemeris:
    """The segments of one object's OEM, in time order, with the file they came from."""

    object_name: str
    object_id: str
    segments: tuple[EphemerisSegment, ...]
    source: Path
