"""The time axis of the page and the picture: the horizon, and the bands of a day each that it is drawn in."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import pandas as pd

from passplan.planning.record import PlanRecord

_DAY_S = 86_400.0
# Up to here one band is still easier to read than two.
_ONE_BAND_S = 1.5 * _DAY_S
_MIDNIGHT = pd.Timestamp("2000-01-01")


@dataclass(frozen=True)
class Day:
    """The horizon, counted in seconds from its start."""

    start_utc: pd.Timestamp
    horizon_s: float

    @classmethod
    def of(cls, record: PlanRecord) -> Day:
        start, end = (pd.Timestamp(record.summary[f"horizon_{edge}_utc"].rstrip("Z")) for edge in ("start", "end"))
        return cls(start, (end - start).total_seconds())

    def seconds(self, instant: Any) -> float:
        if isinstance(instant, str):
            instant = instant.rstrip("Z")
        return float((pd.Timestamp(instant) - self.start_utc).total_seconds())

    def bands(self) -> list[Band]:
        """The horizon in one piece, or, where it is longer than a day and a half, in bands of 24 h."""
        if self.horizon_s <= _ONE_BAND_S:
            return [Band(self, 0.0, self.horizon_s)]
        count = int(-(-self.horizon_s // _DAY_S))
        return [Band(self, k * _DAY_S, _DAY_S) for k in range(count)]


@dataclass(frozen=True)
class Band:
    """A part of the horizon as an axis: ``length_s`` from ``first_s`` on. The last one may reach beyond the horizon."""

    day: Day
    first_s: float
    length_s: float

    @property
    def last_s(self) -> float:
        return self.first_s + self.length_s

    @property
    def start_utc(self) -> pd.Timestamp:
        return self.day.start_utc + pd.Timedelta(seconds=self.first_s)

    def touches(self, start_utc: Any, end_utc: Any) -> bool:
        """Whether any of ``[start_utc, end_utc)`` lies in the band."""
        return self.day.seconds(start_utc) < self.last_s and self.day.seconds(end_utc) > self.first_s

    def span(self, start_utc: Any, end_utc: Any) -> tuple[float, float]:
        """Left edge and width in per cent, cut to the band and the horizon."""
        until = min(self.last_s, self.day.horizon_s)
        first, last = (min(max(self.day.seconds(t), self.first_s), until) for t in (start_utc, end_utc))
        share = 100.0 / self.length_s
        return round(share * (first - self.first_s), 3), round(share * (last - first), 3)

    def hours(self) -> list[tuple[float, str]]:
        """Places of full hours in per cent of the width with their labels, as many as a screen holds."""
        step = next(n for n in (1, 2, 3, 6, 12) if self.length_s / 3600.0 / n <= 24.5)
        instant = self.start_utc.ceil("h")
        marks = []
        while (since_s := self.day.seconds(instant) - self.first_s) < self.length_s:
            if (instant - _MIDNIGHT) % pd.Timedelta(hours=step) == pd.Timedelta(0):
                # A date is wide: it stands in for 00 only where the labels lie far enough apart.
                text = f"{instant:%d %b}" if instant.hour == 0 and step >= 3 else f"{instant:%H}"
                marks.append((round(100.0 * since_s / self.length_s, 3), text))
            instant += pd.Timedelta(hours=1)
        return marks
