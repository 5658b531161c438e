"""Contacts and unused windows as terminal tables that fit 80 columns and use more where there is more."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any
from zoneinfo import ZoneInfo

import pandas as pd
from rich.console import Group, RenderableType
from rich.table import Table
from rich.text import Text

from passplan.planning.record import PlanRecord
from passplan.report.usage import causes, lost_causes, reason_words
from passplan.report.words import LEAST_MB, megabytes

_UNUSED_ROWS = 40


@dataclass(frozen=True)
class LocalTime:
    """A station's local time: its name for the heading, and its IANA time zone."""

    site: str
    zone: str

    def text(self, instant: pd.Timestamp) -> str:
        return f"{instant.tz_localize('UTC').tz_convert(ZoneInfo(self.zone)):%d %b %H:%M %Z}"


def plain_table(*headings: tuple[str, str]) -> Table:
    """A table without lines; each heading with its side."""
    table = Table(box=None, padding=(0, 1), pad_edge=False, header_style="dim")
    for heading, side in headings:
        table.add_column(heading, justify=side, no_wrap=True)  # type: ignore[arg-type]
    return table


def contact_table(
    contacts: pd.DataFrame, width: int, rows: int | None, local: LocalTime | None = None
) -> RenderableType:
    """Contacts in time order, the first ``rows`` of them; narrow terminals show fewer columns, wide ones more."""
    if not len(contacts):
        return Text("none")
    ordered = contacts.sort_values(["start_utc", "antenna"], kind="stable")
    shown = ordered if rows is None else ordered.head(rows)
    columns = _columns(width, local)
    table = plain_table(*((heading, side) for heading, side, _ in columns))
    day = None
    for row in shown.to_dict("records"):
        start = pd.Timestamp(row["start_utc"])
        if start.date() != day and day is not None:
            table.add_row(Text(f"{start:%d %b}", style="dim"))
        day = start.date()
        table.add_row(
            *(Text(_cell(heading, row, local), style="dim" if heading == "" else "") for heading, _, _ in columns)
        )
    hidden = len(contacts) - len(shown)
    more = Text(f"... and {hidden} more; --full shows them all, contacts.csv holds them", style="dim")
    return Group(table, *([more] if hidden else []))


def lost_table(summary: Mapping[str, Any]) -> RenderableType:
    """Data not brought down, by cause."""
    found = lost_causes(summary)
    table = plain_table(("cause", "left"), ("lost aboard", "right"), ("worth", "right"), ("left at the end", "right"),
                        ("worth", "right"))
    table.columns[0].no_wrap = False
    for one in found:
        lost = ("", "") if one.lost_mb < LEAST_MB else (megabytes(one.lost_mb), f"{one.lost_value:,.0f}")
        table.add_row(one.words, *lost, megabytes(one.left_mb), f"{one.left_value:,.0f}")
    sums = [sum(getattr(one, key) for one in found) for key in ("lost_mb", "lost_value", "left_mb", "left_value")]
    table.add_row("all", megabytes(sums[0]), f"{sums[1]:,.0f}", megabytes(sums[2]), f"{sums[3]:,.0f}", style="bold")
    hint = "Each MB is charged to the first link that could still have saved it, and to why that link is not used."
    return Group(table, Text(hint, style="dim"))


def unused_table(record: PlanRecord, *, full: bool) -> RenderableType:
    """Unused windows by cause; with ``full`` one by one below that."""
    found = causes(record)
    if not found:
        return Text("every window is used")
    table = plain_table(("cause", "left"), ("windows", "right"), ("hours", "right"))
    for cause in found:
        table.add_row(cause.words, str(cause.windows), f"{cause.hours:.1f}")
    if not full:
        return table
    each = Table(box=None, padding=(0, 1), pad_edge=False, header_style="dim")
    for heading in ("from, UTC", "antenna", "spacecraft", "why"):
        each.add_column(heading, no_wrap=heading != "why")
    for row in record.unused.head(_UNUSED_ROWS).to_dict("records"):
        why = Text.assemble(f"{reason_words(row['reason'])}: ", (row["detail"], "dim"))
        each.add_row(f"{pd.Timestamp(row['aos_utc']):%d %b %H:%M}", Text(row["antenna"]), Text(row["spacecraft"]), why)
    hidden = len(record.unused) - _UNUSED_ROWS
    more = [Text(f"... and {hidden} more in unused.csv", style="dim")] if hidden > 0 else []
    return Group(table, Text(""), each, *more)


def _columns(width: int, local: LocalTime | None) -> list[tuple[str, str, int]]:
    """Heading, side and the least terminal width from which a column is shown."""
    every = [
        ("start", "left", 0),
        ("min", "right", 0),
        ("antenna", "left", 0),
        ("spacecraft", "left", 0),
        ("service", "left", 0),
        ("radio", "left", 140),
        ("modcod", "left", 100),
        ("MB", "right", 0),
        ("margin dB", "right", 0),
        ("peak", "right", 0),
        ("contact", "left", 140),
        ("", "left", 100),
    ]
    # A local time takes the room of modcod and notes.
    room = width if local is None else width - 24
    fitting = [column for column in every if room >= column[2] or not column[2]]
    if local is not None:
        fitting.insert(1, (f"at {local.site}", "left", 0))
    return fitting


def _cell(heading: str, row: Mapping[Any, Any], local: LocalTime | None) -> str:
    start = pd.Timestamp(row["start_utc"])
    if heading.startswith("at ") and local is not None:
        return local.text(start)
    cells = {
        "start": lambda: f"{start:%H:%M:%S}",
        "min": lambda: f"{row['duration_s'] / 60:.1f}",
        "MB": lambda: "" if row["service"] == "command" else f"{row['volume_mb']:,.1f}",
        "margin dB": lambda: "" if pd.isna(row["min_margin_db"]) else f"{row['min_margin_db']:.1f}",
        "peak": lambda: f"{row['peak_elevation_deg']:.0f}°",
        "contact": lambda: str(row["contact_id"]),
        "": lambda: _note(row),
    }
    return cells[heading]() if heading in cells else str(row[heading])


def _note(row: Mapping[Any, Any]) -> str:
    parts = [] if row["origin"] == "planned" else [str(row["origin"])]
    if row["change"] in ("retimed", "moved"):
        parts.append(str(row["change"]))
    # Most contacts leave out time in which nothing can be sent; only what another contact took is worth a word.
    if "busy" in row["cut"]:
        parts.append("cut short")
    if row["cost"]:
        parts.append(f"cost {row['cost']:,.0f}")
    return ", ".join(parts)
