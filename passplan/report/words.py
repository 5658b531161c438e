"""Numbers and instants as people read them; the same in the terminal, on the page and in calendars."""

from __future__ import annotations

from typing import Any

import pandas as pd

STATUS_WORDS = {
    "optimal": "best to 0.001 %",
    "within_gap": "within the gap asked for",
    "stopped_by_limit": "stopped by the time limit",
    "greedy": "greedy, no better found in time",
    "empty": "no contact possible",
}

LEAST_MB = 0.05
"""Less than this is shown as nothing."""


def megabytes(volume_mb: float) -> str:
    """A volume in the unit that keeps it to four figures."""
    for unit, size in (("TB", 1e6), ("GB", 1e3)):
        if abs(volume_mb) >= size:
            return f"{volume_mb / size:.2f} {unit}"
    return f"{volume_mb:.1f} MB"


def rate(rate_mbps: float) -> str:
    """A rate with three figures."""
    if rate_mbps >= 1e3:
        return f"{rate_mbps / 1e3:.3g} Gbit/s"
    return f"{rate_mbps:.3g} Mbit/s" if rate_mbps >= 1.0 else f"{rate_mbps * 1e3:.3g} kbit/s"


def clock(instant: Any) -> str:
    """Hours and minutes of an instant."""
    return f"{_stamp(instant):%H:%M}"


def minute(instant: Any) -> str:
    """Date, hours and minutes of an instant."""
    return f"{_stamp(instant):%Y-%m-%d %H:%M}"


def _stamp(instant: Any) -> pd.Timestamp:
    return pd.Timestamp(instant.rstrip("Z") if isinstance(instant, str) else instant)
