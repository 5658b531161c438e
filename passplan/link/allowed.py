"""What the links of a window allow at each instant, whatever a radio's rate control makes of it."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from passplan.link.choice import Track
from passplan.link.stretches import Floats


def allowed_mbps(tracks: Sequence[Track], time_s: Floats, margin_db: float) -> Floats:
    """The fastest rate over all tracks at each time (n,) that leaves ``margin_db``; 0 where none does."""
    best = np.zeros(time_s.size)
    for track in tracks:
        quality_db = np.interp(time_s, track.time_s, track.quality_db) - margin_db
        for rung in track.chain.rungs:
            best = np.where(quality_db >= rung.required_db, np.maximum(best, rung.rate_mbps), best)
    return best
