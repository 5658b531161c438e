"""Every ribbon of the page: one for each antenna, one for each spacecraft with its storage below it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from passplan.planning.backlog import Backlog
from passplan.planning.record import STANDBY, PlanRecord, sending
from passplan.report.page.axis import Band
from passplan.report.page.ribbons import (
    UNIT_S,
    Mark,
    Ribbon,
    Share,
    Span,
    joined,
    levels,
    outline,
    shared_heights,
)
from passplan.report.page.scale import RateScale, scale_for
from passplan.report.rows import Row, grouped, rows
from passplan.report.tracks import WindowTrack
from passplan.report.words import clock, megabytes

# Labels closer than this share of the width (per cent; at the narrowest drawing, 1 100 px) would touch.
_APART_PERCENT = 1.0


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


def antenna_ribbons(
    record: PlanRecord, tracks: Sequence[WindowTrack], names: Names, band: Band
) -> dict[str, Ribbon]:
    """A ribbon for each antenna through one band; outlines and marks belong to spacecraft."""
    return _ribbons(record, tracks, names, band, ("antenna", "spacecraft"))


def spacecraft_ribbons(
    record: PlanRecord, tracks: Sequence[WindowTrack], names: Names, band: Band
) -> dict[str, Ribbon]:
    """A ribbon for each spacecraft through one band; outlines and marks belong to antennas."""
    return _ribbons(record, tracks, names, band, ("spacecraft", "antenna"))


def _ribbons(
    record: PlanRecord, tracks: Sequence[WindowTrack], names: Names, band: Band, sides: tuple[str, str]
) -> dict[str, Ribbon]:
    own, partner = sides
    owners = names.antennas if own == "antenna" else names.spacecraft
    numbers = names.antennas if partner == "antenna" else names.spacecraft
    by_window = dict(zip(record.windows["window_id"], tracks, strict=True))
    windows, contacts = grouped(rows(record.windows), own), grouped(rows(record.contacts), own)
    sent = grouped(rows(sending(record.segments)), "contact_id")
    found = {}
    for name in owners:
        tops: dict[str, float] = {}
        for window in windows.get(name, ()):
            top = float(by_window[window["window_id"]].rate_mbps.max(initial=0.0))
            tops[window[partner]] = max(tops.get(window[partner], 0.0), top)
        ribbon = Ribbon(scale_for(tops.values()))
        ribbon.sky = joined(
            (numbers[window[partner]],
             outline(by_window[window["window_id"]], ribbon.scale, band.first_s, band.last_s))
            for window in windows.get(name, ())
            if band.touches(window["aos_utc"], window["los_utc"])
        )
        mine = [row for row in contacts.get(name, ()) if band.touches(row["start_utc"], row["end_utc"])]
        shares = shared_heights([(band.day.seconds(r["start_utc"]), band.day.seconds(r["end_utc"])) for r in mine])
        ribbon.used = joined(
            (numbers[row[partner]], _used(by_window[row["window_id"]], ribbon.scale, band, piece, share))
            for row, share in zip(mine, shares, strict=True)
            if row["window_id"] in by_window
            for piece in sent.get(row["contact_id"], ())
            if band.touches(piece["start_utc"], piece["end_utc"])
        )
        ribbon.marks = _marks(mine, shares, band, names, partner)
        if own == "antenna":
            ribbon.spans = _closures(record.summary["antennas"][name]["closures"], band)
        ribbon.spans += _frozen(record.summary, band)
        found[name] = ribbon
    return found


def _used(track: WindowTrack, scale: RateScale, band: Band, piece: Row, share: Share) -> str:
    first_s, last_s = (band.day.seconds(piece[f"{edge}_utc"]) for edge in ("start", "end"))
    return outline(track, scale, max(first_s, band.first_s), min(last_s, band.last_s), share)


def _marks(contacts: Sequence[Row], shares: Sequence[Share], band: Band, names: Names, partner: str) -> list[Mark]:
    placed = [band.span(row["start_utc"], row["end_utc"]) for row in contacts]
    heights = levels((left + width / 2 for left, width in placed), _APART_PERCENT)
    marks = []
    for row, (left, width), level, share in zip(contacts, placed, heights, shares, strict=True):
        key = names.craft_keys[row[partner]] if partner == "spacecraft" else str(names.antennas[row[partner]] + 1)
        brings = megabytes(row["volume_mb"]) if row["service"] != "command" else "command only"
        brings = "stands by" if row["origin"] == STANDBY else brings
        when = f"{clock(row['start_utc'])} to {clock(row['end_utc'])} UTC"
        label = f"{row['spacecraft']} on {row['antenna']}, {when}, {brings}"
        marks.append(Mark(row["number"], left, width, key, level, label, row["origin"], row["change"], share))
    return marks


def _closures(closures: Sequence[Mapping[str, Any]], band: Band) -> list[Span]:
    spans = []
    for closure in closures:
        left, width = band.span(closure["start_utc"], closure["end_utc"])
        if width > 0.0:
            label = (
                f"{closure['kind']} {clock(closure['start_utc'])} to {clock(closure['end_utc'])} UTC {closure['note']}"
            )
            spans.append(Span(left, width, "closed", label.strip()))
    return spans


def _frozen(summary: Mapping[str, Any], band: Band) -> list[Span]:
    """The time up to which published contacts may no longer change, where the plan states one."""
    until = summary.get("frozen_until_utc")
    if not until:
        return []
    left, width = band.span(summary["horizon_start_utc"], until)
    return [Span(left, width, "frozen", f"frozen until {clock(until)} UTC")] if width > 0.0 else []


def storage_path(backlog: Backlog, band: Band) -> tuple[str, str]:
    """The fill as the ``d`` of a closed path (height 100 is the capacity), and the spans of loss as another."""
    top = backlog.capacity_mb or 1.0
    first_s, last_s = band.first_s, min(band.last_s, float(backlog.time_s[-1]))
    inside = (backlog.time_s > first_s) & (backlog.time_s < last_s)
    time_s = np.concatenate([[first_s], backlog.time_s[inside], [last_s]])
    fill_mb = np.concatenate([backlog.at(time_s[:1]), backlog.fill_mb[inside], backlog.at(time_s[-1:])])
    x = np.rint(time_s / UNIT_S).astype(np.int64)
    y = 100 - np.rint(100.0 * np.minimum(fill_mb / top, 1.0)).astype(np.int64)
    points = [f"{a} {b}" for a, b in zip(x.tolist(), y.tolist(), strict=True)]
    area = f"M{x[0]} 100L" + "L".join(dict.fromkeys(points)) + f"L{x[-1]} 100Z"
    lost = "".join(
        f"M{round(a / UNIT_S)} 0H{max(round(b / UNIT_S), round(a / UNIT_S) + 1)}V16H{round(a / UNIT_S)}Z"
        for a, b in ((max(a, first_s), min(b, last_s)) for a, b in backlog.losing_s)
        if b > a
    )
    return area, lost
