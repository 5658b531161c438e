"""What each spacecraft holds aboard through the horizon, instant by instant."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from passplan.planning.joint_sending import joint_sending
from passplan.planning.record import PlanRecord, sending

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Backlog:
    """The fill as straight lines between (``time_s``, ``fill_mb``), and the spans in which data is lost."""

    time_s: Floats
    fill_mb: Floats
    capacity_mb: float
    losing_s: tuple[tuple[float, float], ...]

    def at(self, time_s: Floats) -> Floats:
        """The fill at any times within the horizon."""
        return np.interp(time_s, self.time_s, self.fill_mb)


def backlogs(record: PlanRecord) -> dict[str, Backlog]:
    """The backlog of every planned spacecraft, from the summary's storage figures and the segments."""
    start, end = (pd.Timestamp(record.summary[f"horizon_{edge}_utc"].rstrip("Z")) for edge in ("start", "end"))
    horizon_s = (end - start).total_seconds()
    names = record.contacts.set_index("contact_id")["spacecraft"]
    sent: dict[str, list[tuple[float, float, float]]] = defaultdict(list)
    pieces = sending(record.segments).sort_values("start_utc", kind="stable")
    edges = [(pieces[f"{edge}_utc"] - start).dt.total_seconds() for edge in ("start", "end")]
    for name, *piece in zip(pieces["contact_id"].map(names), *edges, pieces["rate_mbps"] / 8.0, strict=True):
        sent[name].append((piece[0], piece[1], piece[2]))
    return {
        name: _stated(store) if "fill" in store else follow(
            store["start_mb"], store["generated_mb"] / horizon_s if horizon_s > 0 else 0.0, store["capacity_mb"],
            sent.get(name, ()), horizon_s)
        for name, store in record.summary["storage"].items()
    }


def _stated(store: Mapping[str, Any]) -> Backlog:
    """Where generation changes or there are several classes, the plan states the fill itself."""
    time_s, fill_mb = np.array(store["fill"], dtype=float).T
    losing = tuple((first, last) for first, last in store["losing_s"] if last - first > 0.5)
    return Backlog(time_s, fill_mb, store["capacity_mb"], losing)


def follow(
    start_mb: float, generation_mb_per_s: float, capacity_mb: float, sent: Iterable[tuple[float, float, float]],
    horizon_s: float,
) -> Backlog:
    """One storage through pieces of sending (start_s, end_s, rate_mb_per_s); those that overlap add up.

    Between events it gains what is generated and sends at one rate; there are kinks where it runs empty or full.
    """
    capacity, fill, clock = capacity_mb, start_mb, 0.0
    points, losing = [(0.0, fill)], []
    pieces = joint_sending(list(sent)).pieces
    events = [event for start_s, end_s, rate in pieces for event in ((start_s, 0.0), (end_s, rate))]
    for until, rate in (*events, (horizon_s, 0.0)):
        slope, length = generation_mb_per_s - rate, max(until - clock, 0.0)
        edge = capacity if slope > 0.0 else 0.0
        turn = (edge - fill) / slope if slope else length
        if 0.0 <= turn < length:
            points.append((clock + turn, edge))
            # Less than a millisecond is rounding of the tables' times.
            if slope > 0.0 and length - turn > 1e-3:
                losing.append((clock + turn, until))
            fill = edge
        else:
            fill = min(max(fill + slope * length, 0.0), capacity)
        clock = max(until, clock)
        points.append((clock, fill))
    time_s, fill_mb = np.array(points).T
    return Backlog(time_s, fill_mb, capacity, tuple(losing))
