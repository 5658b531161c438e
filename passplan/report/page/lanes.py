"""Every ribbon of the page: one for each antenna, one for each spacecraft with its storage below it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from passplan.planning.backlog import Backlog
from passplan.planning.record import PlanRecord
from passplan.report.page.ribbons import UNIT_S, Mark, Ribbon, Span, joined, levels, outline
from passplan.report.page.scale import scale_for
from passplan.report.rows import Row, grouped, rows
from passplan.report.tracks import WindowTrack
from passplan.report.words import clock, megabytes

# Labels closer than this share of the width (at the narrowest drawing, 1 100 px a day) would touch.
_APART_OF_A_DAY = 1.0
_MIDNIGHT = pd.Timestamp("2000-01-01")


@dataclass(frozen=True)
class Names:
    """The numbers and keys by which the page speaks of spacecraft, antennas and sites."""

    spacecraft: dict[str, int]
    antennas: dict[str, int]
    sites: dict[str, int]
    craft_keys: Mapping[str, str]

    @classmethod
    def of(cls, record: PlanRecord, craft_keys: Mapping[str, str]) -> Names:
        antennas = record.summary["antennas"]
        sites = dict.fromkeys(entry["site"] for entry in antennas.values())
        return cls(
            {name: i for i, name in enumerate(record.summary["spacecraft"])},
            {name: i for i, name in enumerate(antennas)},
            {name: i for i, name in enumerate(sites)},
            craft_keys,
        )


@dataclass(frozen=True)
class Day:
    """The horizon as an axis."""

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

    def span(self, start_utc: Any, end_utc: Any) -> tuple[float, float]:
        """Left edge and width in per cent, cut to the horizon."""
        first, last = (min(max(self.seconds(t), 0.0), self.horizon_s) for t in (start_utc, end_utc))
        return round(100.0 * first / self.horizon_s, 3), round(100.0 * (last - first) / self.horizon_s, 3)


def antenna_ribbons(record: PlanRecord, tracks: Sequence[WindowTrack], names: Names) -> dict[str, Ribbon]:
    """A ribbon for each antenna; outlines and marks belong to spacecraft."""
    return _ribbons(record, tracks, names, "antenna", "spacecraft")


def spacecraft_ribbons(record: PlanRecord, tracks: Sequence[WindowTrack], names: Names) -> dict[str, Ribbon]:
    """A ribbon for each spacecraft; outlines and marks belong to antennas."""
    return _ribbons(record, tracks, names, "spacecraft", "antenna")


def _ribbons(
    record: PlanRecord, tracks: Sequence[WindowTrack], names: Names, own: str, partner: str
) -> dict[str, Ribbon]:
    day = Day.of(record)
    owners = names.antennas if own == "antenna" else names.spacecraft
    numbers = names.antennas if partner == "antenna" else names.spacecraft
    by_window = dict(zip(record.windows["window_id"], tracks, strict=True))
    windows, contacts = grouped(rows(record.windows), own), grouped(rows(record.contacts), own)
    sent = grouped(rows(record.segments), "contact_id")
    found = {}
    for name in owners:
        tops: dict[str, float] = {}
        for window in windows.get(name, ()):
            top = float(by_window[window["window_id"]].rate_mbps.max(initial=0.0))
            tops[window[partner]] = max(tops.get(window[partner], 0.0), top)
        scale = scale_for(tops.values())
        ribbon = Ribbon(scale)
        ribbon.sky = joined(
            (numbers[window[partner]], outline(by_window[window["window_id"]], scale))
            for window in windows.get(name, ())
        )
        ribbon.used = joined(
            (
                numbers[row[partner]],
                outline(
                    by_window[row["window_id"]], scale, day.seconds(piece["start_utc"]), day.seconds(piece["end_utc"])
                ),
            )
            for row in contacts.get(name, ())
            if row["window_id"] in by_window
            for piece in sent.get(row["contact_id"], ())
        )
        ribbon.marks = _marks(contacts.get(name, []), day, names, partner)
        if own == "antenna":
            ribbon.spans = _closures(record.summary["antennas"][name]["closures"], day)
        ribbon.spans += _frozen(record.summary, day)
        found[name] = ribbon
    return found


def _marks(contacts: Sequence[Row], day: Day, names: Names, partner: str) -> list[Mark]:
    placed = [day.span(row["start_utc"], row["end_utc"]) for row in contacts]
    apart = _APART_OF_A_DAY * 86_400.0 / max(day.horizon_s, 86_400.0)
    heights = levels((left + width / 2 for left, width in placed), apart)
    marks = []
    for row, (left, width), level in zip(contacts, placed, heights, strict=True):
        key = names.craft_keys[row[partner]] if partner == "spacecraft" else str(names.antennas[row[partner]] + 1)
        brings = megabytes(row["volume_mb"]) if row["service"] != "command" else "command only"
        when = f"{clock(row['start_utc'])} to {clock(row['end_utc'])} UTC"
        label = f"{row['spacecraft']} on {row['antenna']}, {when}, {brings}"
        marks.append(Mark(row["number"], left, width, key, level, label, row["origin"], row["change"]))
    return marks


def _closures(closures: Sequence[Mapping[str, Any]], day: Day) -> list[Span]:
    spans = []
    for closure in closures:
        left, width = day.span(closure["start_utc"], closure["end_utc"])
        if width > 0.0:
            label = (
                f"{closure['kind']} {clock(closure['start_utc'])} to {clock(closure['end_utc'])} UTC {closure['note']}"
            )
            spans.append(Span(left, width, "closed", label.strip()))
    return spans


def _frozen(summary: Mapping[str, Any], day: Day) -> list[Span]:
    """The time up to which published contacts may no longer change, where the plan states one."""
    until = summary.get("frozen_until_utc")
    if not until:
        return []
    left, width = day.span(summary["horizon_start_utc"], until)
    return [Span(left, width, "frozen", f"frozen until {clock(until)} UTC")] if width > 0.0 else []


def storage_path(backlog: Backlog) -> tuple[str, str]:
    """The fill as the ``d`` of a closed path (height 100 is the capacity), and the spans of loss as another."""
    top = backlog.capacity_mb or 1.0
    x = np.rint(backlog.time_s / UNIT_S).astype(np.int64)
    y = 100 - np.rint(100.0 * np.minimum(backlog.fill_mb / top, 1.0)).astype(np.int64)
    points = [f"{a} {b}" for a, b in zip(x.tolist(), y.tolist(), strict=True)]
    area = f"M{x[0]} 100L" + "L".join(dict.fromkeys(points)) + f"L{x[-1]} 100Z"
    lost = "".join(
        f"M{round(a / UNIT_S)} 0H{max(round(b / UNIT_S), round(a / UNIT_S) + 1)}V16H{round(a / UNIT_S)}Z"
        for a, b in backlog.losing_s
    )
    return area, lost


def hours_of(day: Day) -> list[tuple[float, str]]:
    """Places of full hours in per cent of the width with their labels, as many as a screen holds."""
    step = next(n for n in (1, 2, 3, 6, 12, 24, 48, 96, 192) if day.horizon_s / 3600.0 / n <= 24.5)
    instant = day.start_utc.ceil("h")
    marks = []
    while day.seconds(instant) < day.horizon_s:
        if (instant - _MIDNIGHT) % pd.Timedelta(hours=step) == pd.Timedelta(0):
            # A date is wide: it stands in for 00 only where the labels lie far enough apart.
            text = f"{instant:%d %b}" if instant.hour == 0 and step >= 3 else f"{instant:%H}"
            marks.append((round(100.0 * day.seconds(instant) / day.horizon_s, 3), text))
        instant += pd.Timedelta(hours=1)
    return marks
