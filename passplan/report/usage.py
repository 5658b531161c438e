"""How the antennas' time is used, and what the windows that stay unused could have carried, by cause."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from passplan.planning.lost_value import IN_CONTACT, NO_WINDOW
from passplan.planning.record import PlanRecord
from passplan.report.tracks import WindowTrack

REASON_WORDS = {
    "closure": "the antenna is closed",
    "too_short": "too short for a contact",
    "no_radio": "no radio fits the antenna",
    "no_margin": "no modcod holds its margin",
    "not_needed": "can only command, and nothing asks for it",
    "antenna_busy": "the antenna serves another spacecraft",
    "antenna_turning": "the antenna cannot turn there in time",
    "spacecraft_busy": "the spacecraft is served elsewhere",
    "nothing_aboard": "nothing more to bring down",
    "not_worth_it": "worth less than it costs",
    "interference": "would disturb another contact",
    "contact_gap": "too soon after or before another contact of the spacecraft",
    "cool_down": "the spacecraft's transmitter must cool down",
    "contacts_per_orbit": "the spacecraft has its contacts of that orbit",
    "contacts_per_day": "the spacecraft has its contacts of that day",
    "sending_per_contact": "the spacecraft would send for too long",
    "sending_per_orbit": "the spacecraft has sent enough in that orbit",
    "sending_per_span": "the spacecraft has sent enough in so many hours",
    "battery": "the spacecraft's battery would fall under its floor",
    "imaging": "the spacecraft takes images",
    "attitude": "the spacecraft cannot point at a station",
    "loaded": "the schedule aboard says otherwise",
    "forbidden": "forbidden by hand",
    "equipment_busy": "shared equipment is in use",
    "staff_busy": "the staff look after other contacts",
    "unstaffed": "nobody is at the site",
    "declined": "the rented antenna was declined",
    "too_late_to_ask": "too late to ask for the rented antenna",
    "backhaul_full": "more than the site's line takes in a day",
    "backhaul_busy": "faster than the site's line",
    "backhaul_closed": "the site's line is closed",
    "budget": "beyond the budget of the day",
    "standby": "held only while the antenna stands by for another",
    "left_out": "left out of the plan",
    IN_CONTACT: "within contacts: acquisition, keyholes, rate steps",
    NO_WINDOW: "no link in view in time",
}


@dataclass(frozen=True)
class AntennaUse:
    """Hours of one antenna over the horizon. ``seen_h`` counts time with any spacecraft in view, once."""

    antenna: str
    site: str
    contacts: int
    contact_h: float
    seen_h: float
    closed_h: float
    volume_mb: float


@dataclass(frozen=True)
class Cause:
    """Unused windows of one reason. ``could_carry_mb`` adds up what their links allow: a limit, not a loss."""

    reason: str
    words: str
    windows: int
    hours: float
    could_carry_mb: float


@dataclass(frozen=True)
class LostCause:
    """Data not brought down for one cause, in MB and in worth (MB times weight): lost aboard, and left at the end."""

    cause: str
    words: str
    lost_mb: float
    lost_value: float
    left_mb: float
    left_value: float


def lost_causes(summary: Mapping[str, Any]) -> list[LostCause]:
    """The summary's ``lost_value`` over all its spacecraft, the dearest cause first; empty for plans without one."""
    sums: dict[str, dict[str, float]] = {}
    for name in summary["spacecraft"]:
        for cause, share in summary.get("lost_value", {}).get(name, {}).items():
            total = sums.setdefault(cause, dict.fromkeys(share, 0.0))
            for key, figure in share.items():
                total[key] += figure
    found = [LostCause(cause, reason_words(cause), **total) for cause, total in sums.items()]
    return sorted(found, key=lambda one: (-one.lost_value, -one.left_value, one.cause))


def antenna_use(record: PlanRecord) -> list[AntennaUse]:
    """One row for each antenna of the plan, in its order."""
    horizon = tuple(pd.Timestamp(record.summary[f"horizon_{edge}_utc"].rstrip("Z")) for edge in ("start", "end"))
    volume = record.contacts.groupby("antenna")["volume_mb"].sum()
    rows = []
    for name, entry in record.summary["antennas"].items():
        own = record.windows[record.windows["antenna"] == name]
        closed = [
            (pd.Timestamp(c["start_utc"].rstrip("Z")), pd.Timestamp(c["end_utc"].rstrip("Z")))
            for c in entry["closures"]
        ]
        rows.append(
            AntennaUse(
                name,
                entry["site"],
                entry["contacts"],
                entry["contact_s"] / 3600.0,
                _covered_h(list(zip(own["aos_utc"], own["los_utc"], strict=True)), horizon),
                _covered_h(closed, horizon),
                float(volume.get(name, 0.0)),
            )
        )
    return rows


def causes(record: PlanRecord, tracks: Sequence[WindowTrack] | None = None) -> list[Cause]:
    """Unused windows by reason, the most capacity first; without ``tracks`` the capacity is NaN."""
    carry = {}
    if tracks is not None:
        for name, track in zip(record.windows["window_id"], tracks, strict=True):
            carry[name] = float(np.sum(track.rate_mbps[:-1] * np.diff(track.time_s))) / 8.0
    table = record.unused.assign(
        hours=(record.unused["los_utc"] - record.unused["aos_utc"]).dt.total_seconds() / 3600.0,
        carry_mb=record.unused["window_id"].map(carry).astype("float64") if carry else np.nan,
    )
    found = []
    for reason, own in table.groupby("reason"):
        found.append(
            Cause(
                str(reason),
                reason_words(reason),
                len(own),
                float(own["hours"].sum()),
                float(own["carry_mb"].sum(min_count=1)),
            )
        )
    return sorted(found, key=lambda cause: (-np.nan_to_num(cause.could_carry_mb), -cause.hours, cause.reason))


def reason_words(reason: Any) -> str:
    """A reason code in words; one that is not known yet keeps its own."""
    return REASON_WORDS.get(str(reason), str(reason).replace("_", " "))


def _covered_h(spans: list[tuple[pd.Timestamp, pd.Timestamp]], horizon: tuple[pd.Timestamp, ...]) -> float:
    """Hours that the spans cover within the horizon, overlaps counted once."""
    total, reached = 0.0, horizon[0]
    for start, end in sorted(spans):
        first, last = max(start, reached), min(end, horizon[1])
        if last > first:
            total += (last - first).total_seconds() / 3600.0
            reached = last
    return total
