r"""Unbroken stretches of time in which a sampled quality stays at or above a threshold.

Between samples the quality runs along straight lines:

    quality        .-o-.
    threshold ----/-----\------      one stretch, from crossing to crossing
                 o       o
    sample      i-1  i   i+1

The samples of many tracks lie end to end in flat arrays, so that all tracks are searched in one sweep
for each threshold.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True)
class Stretches:
    """Stretches of all tracks, sorted by track, then by rung, then by time.

    Track k owns the entries [``offsets[k]``, ``offsets[k + 1]``) of ``rung`` (index of the threshold) and
    of ``first_s`` and ``last_s``, in the time of the samples.
    """

    offsets: Ints
    rung: Ints
    first_s: Floats
    last_s: Floats

    def of(self, track: int) -> tuple[Ints, Floats, Floats]:
        """Rung, begin and end of the stretches of one track."""
        own = slice(self.offsets[track], self.offsets[track + 1])
        return self.rung[own], self.first_s[own], self.last_s[own]


def find_stretches(time_s: Floats, quality_db: Floats, offsets: Ints, thresholds_db: Floats) -> Stretches:
    """Every stretch of every track at or above each threshold.

    ``time_s`` and ``quality_db`` have shape (n,); track k owns samples [``offsets[k]``, ``offsets[k + 1]``),
    in rising time. ``thresholds_db`` has shape (m,). A NaN is below every threshold.
    """
    opens = np.zeros(time_s.size, bool)
    opens[offsets[:-1][np.diff(offsets) > 0]] = True
    closes = np.roll(opens, -1)
    track_of = np.repeat(np.arange(offsets.size - 1), np.diff(offsets))
    found = [_one_threshold(time_s, quality_db, opens, closes, float(level)) for level in thresholds_db]
    starts = np.concatenate([entry[0] for entry in found]) if found else np.zeros(0, np.int64)
    rung = np.repeat(np.arange(len(found)), [entry[0].size for entry in found])
    track = track_of[starts]
    order = np.lexsort((rung, track))
    bounds = np.searchsorted(track[order], np.arange(offsets.size))
    return Stretches(
        bounds.astype(np.int64),
        rung[order].astype(np.int64),
        np.concatenate([entry[1] for entry in found])[order] if found else np.zeros(0),
        np.concatenate([entry[2] for entry in found])[order] if found else np.zeros(0),
    )


def _one_threshold(
    time_s: Floats, quality_db: Floats, opens: NDArray[np.bool_], closes: NDArray[np.bool_], level_db: float
) -> tuple[Ints, Floats, Floats]:
    """First sample, begin and end of each stretch at or above one level."""
    above = quality_db >= level_db
    begins = np.flatnonzero(above & (opens | ~np.roll(above, 1)))
    ends = np.flatnonzero(above & (closes | ~np.roll(above, -1)))
    first = _crossing(time_s, quality_db, begins, np.where(opens[begins], 0, -1), level_db)
    last = _crossing(time_s, quality_db, ends, np.where(closes[ends], 0, 1), level_db)
    return begins, first, last


def _crossing(time_s: Floats, quality_db: Floats, inside: Ints, step: Ints, level_db: float) -> Floats:
    """Where the line from a sample at or above the level to its neighbour (``step`` away) meets the level."""
    outside = inside + step
    drop = quality_db[inside] - quality_db[outside]
    excess = quality_db[inside] - level_db
    # At a track's edge there is no neighbour, and next to a NaN no line: the sample itself is the bound.
    share = np.divide(excess, drop, out=np.zeros_like(drop), where=drop > 0.0)
    return np.asarray(time_s[inside] + share * (time_s[outside] - time_s[inside]))
