"""What a finished plan hands on: its tables and its summary, the same in memory and on disk."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import pandas as pd

from passplan.inputs.reader import ReadFile

WINDOW_COLUMNS = (
    "window_id", "spacecraft", "antenna", "site", "aos_utc", "los_utc", "duration_s", "peak_utc",
    "peak_elevation_deg", "aos_azimuth_deg", "los_azimuth_deg", "min_range_km", "clipped", "element_epoch_utc",
    "timing_sigma_s",
)
CONTACT_COLUMNS = (
    "contact_id", "window_id", "spacecraft", "antenna", "site", "service", "radio", "frequency_mhz", "polarisation",
    "start_utc", "end_utc", "duration_s", "usable_s", "modcod", "volume_mb", "min_margin_db", "peak_elevation_deg",
    "weight", "value", "cost", "origin", "change", "cut",
)
SEGMENT_COLUMNS = ("contact_id", "start_utc", "end_utc", "modcod", "rate_mbps", "data_class", "volume_mb")
STANDBY = "standby"
"""The ``origin`` of a contact that is held beside another one of its spacecraft, to take over should that fail."""
UNUSED_COLUMNS = ("window_id", "spacecraft", "antenna", "aos_utc", "los_utc", "reason", "detail")


def sending(segments: pd.DataFrame) -> pd.DataFrame:
    """The segments table with one row for each piece of sending: what it carries of several classes is added up."""
    piece = ["contact_id", "start_utc", "end_utc"]
    if not segments.duplicated(piece).any():
        return segments
    volume_mb = segments.groupby(piece, sort=False)["volume_mb"].sum()
    return segments.drop_duplicates(piece).reset_index(drop=True).assign(volume_mb=volume_mb.to_numpy())


@dataclass(frozen=True)
class PlanRecord:
    """A plan as it is reported, written and read back.

    ``summary`` is the content of ``plan.json``; the four tables have the columns above, times as
    ``datetime64`` in UTC. ``files`` are the inputs as read.
    """

    summary: dict[str, Any]
    windows: pd.DataFrame
    contacts: pd.DataFrame
    segments: pd.DataFrame
    unused: pd.DataFrame
    files: tuple[ReadFile, ...] = field(default=(), repr=False)
