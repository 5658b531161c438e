"""The terminal report: one plan from the headline to the cautions, readable from 80 columns on and without colour."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd
from rich.columns import Columns
from rich.console import Console, Group, RenderableType
from rich.padding import Padding
from rich.rule import Rule
from rich.table import Table
from rich.text import Text

from passplan.planning.backlog import backlogs
from passplan.planning.record import PlanRecord
from passplan.report.backlog_chart import backlog_chart
from passplan.report.batteries import battery_table
from passplan.report.cautions import CAUTIONS
from passplan.report.contact_table import LocalTime, contact_table, lost_table, plain_table, unused_table
from passplan.report.flux import flux_of_plan
from passplan.report.keys import spacecraft_keys
from passplan.report.selection import Selection, select
from passplan.report.standing import standing_lists, tier_lines
from passplan.report.timeline import CLOSED, SEEN, SEVERAL, antenna_row, hour_ruler, stretches
from passplan.report.weather import by_antenna, notices
from passplan.report.words import STATUS_WORDS, megabytes, minute

_SCREEN_ROWS = 8
_SCREEN_CRAFT = 16
_SCREEN_LINES = 12
_REVIEWED = np.timedelta64(24, "h")


def print_plan(
    record: PlanRecord, console: Console, *, full: bool = False, selection: Selection | None = None,
    local: LocalTime | None = None,
) -> None:
    """Print the report: one screen for the review, or everything, or everything of a selection.

    ``local`` adds a labelled column of a station's local time to the contacts; all other times are UTC.
    """
    stores = backlogs(record)
    part = select(record, selection) if selection else record
    detail = full or bool(selection)
    summary = part.summary
    console.print(_headline(summary))
    standing = [(title, [Text.assemble(("> ", "bold cyan"), line) for line in lines])
                for title, lines in standing_lists(summary)]
    for title, lines in (
        ("Requirements not met", _shortfalls(summary)), ("Warnings", _warnings(summary)), *standing
    ):
        if lines:
            _section(console, title, Group(*lines if detail else _first(lines)))
    if detail and notices(summary):
        _section(console, "Models outside their range", Group(*notices(summary)))
    if selection:
        shown = f"\nShown: {_spoken(selection)}; the figures above are those of the whole plan"
        console.print(Text(shown, style="bold"))
    else:
        _section(console, "Inputs", _health(summary))
    if summary.get("against"):
        _section(console, f"Against plan {summary['against']['plan_id']}", _changes(summary["against"], detail))
    _section(console, "Antennas through the day, UTC", _timeline(part, console.width, detail))
    rows, craft = (None, None) if detail else (_SCREEN_ROWS, _SCREEN_CRAFT)
    _section(console, "Contacts", contact_table(part.contacts, console.width, rows, local))
    _section(console, "Data aboard each spacecraft", backlog_chart(summary, stores, console.width, craft))
    if detail:
        _details(console, part, full=bool(selection))
    console.print()
    for caution in CAUTIONS:
        console.print(Padding(Text(f"• {caution}", style="dim"), (0, 1)))


def _details(console: Console, part: PlanRecord, *, full: bool) -> None:
    """What the first screen leaves out; ``full`` lists every unused window."""
    if (batteries := battery_table(part.summary)) is not None:
        _section(console, "State of charge", batteries)
    if part.summary.get("weather", {}).get("contacts") and len(part.contacts):
        _section(console, "Weather over an average year", by_antenna(part))
    if (flux := flux_of_plan(part)) is not None:
        _section(console, "Power flux density at the ground", flux)
    if len(part.contacts):
        _section(console, "Lowest margins", _margins(part, console.width))
    if part.summary.get("lost_value"):
        _section(console, "Data not brought down, and why", lost_table(part.summary))
    _section(console, "What was not used, and why", unused_table(part, full=full))


def _section(console: Console, title: str, body: RenderableType) -> None:
    console.print()
    console.print(Rule(Text(title, style="bold"), align="left", characters="─", style="dim"))
    console.print(body)


def _headline(summary: Mapping[str, Any]) -> RenderableType:
    start, end = summary["horizon_start_utc"], summary["horizon_end_utc"]
    title = Text.assemble(("DRAFT ", "bold yellow"), (summary["name"], "bold"), f"  plan {summary['plan_id']}")
    title.append(f"\n{minute(start)} to {minute(end)} UTC", style="dim")
    expected = summary.get("weather", {}).get("volume_basis") == "expected"
    facts = Text("  ").join(
        Text.assemble((label + " ", "dim"), (value, "bold")) for label, value in (
            ("contacts", f"{summary['contacts']}"),
            (f"delivered{' on average' if expected else ''}", megabytes(summary["volume_mb"])),
            ("lost aboard", megabytes(sum(s["lost_mb"] for s in summary["storage"].values()))),
            ("status", STATUS_WORDS.get(summary["status"], summary["status"])),
        )
    )
    return Group(title, facts, _tiers(summary))


def _shortfalls(summary: Mapping[str, Any]) -> list[Text]:
    return [Text.assemble(("! ", "bold red"), (f"{s['name']}: ", "bold"), s["sentence"]) for s in summary["shortfalls"]]


def _first(lines: list[Text]) -> list[Text]:
    """What the review needs of a long list."""
    hidden = len(lines) - _SCREEN_LINES
    if hidden <= 1:
        return lines
    return [*lines[:_SCREEN_LINES], Text(f"... and {hidden} more; --full shows them all", style="dim")]


def _tiers(summary: Mapping[str, Any]) -> RenderableType:
    """The tiers in the order they are solved."""
    table = plain_table(("tier", "left"), ("sought", "left"), ("reached", "right"), ("no plan can pass", "right"),
                        ("gap", "right"))
    for tier in tier_lines(summary):
        table.add_row(tier.name, Text(tier.sense, style="dim"), Text(tier.value, style="bold"), tier.bound, tier.gap)
    return table


def _warnings(summary: Mapping[str, Any]) -> list[Text]:
    return [Text.assemble(("~ ", "bold yellow"), warning) for warning in summary["warnings"]]


def _health(summary: Mapping[str, Any]) -> RenderableType:
    ages = [s["element_age_days"] for s in summary["spacecraft"].values() if s["element_age_days"] is not None]
    lines = [Text.assemble(
        (f"{len(summary['spacecraft'])}", "bold"), " spacecraft planned, ",
        (f"{len(summary['left_out'])}", "bold"), " left out; ",
        (f"{len(summary['antennas'])}", "bold"), " antennas; ",
        (f"{len(summary['inputs'])}", "bold"), " files read",
    )]
    if ages:
        lines.append(Text(f"Element sets {min(ages):.1f} to {max(ages):.1f} days old at the start"))
    if said := len(notices(summary)):
        models = f"{said} notice{'s' if said > 1 else ''} on models outside their range (show --full)"
        lines[-1] = Text.assemble(lines[-1], f"; {models}")
    sky = summary.get("geometry", {})
    if sky.get("largest_timing_sigma_s") is not None:
        lines.append(Text(
            f"AOS and LOS known to {sky['largest_timing_sigma_s']:.2f} s, "
            f"pointing to {sky['largest_off_pointing_deg']:.2f}° "
            f"(worst, 1 sigma); refraction {sky['refraction']}; {sky['lost_s']:.0f} s lost"
        ))
    lines += [Text.assemble((f"{name} left out: ", "bold"), why) for name, why in summary["left_out"].items()]
    return Group(*lines)


def _timeline(record: PlanRecord, width: int, detail: bool) -> RenderableType:
    """The antennas' rows for each stretch; of several days the review shows the first one."""
    summary = record.summary
    keys = spacecraft_keys(summary["spacecraft"])
    label = min(max((len(name) for name in summary["antennas"]), default=4), 20)
    start, end = (np.datetime64(summary[f"horizon_{edge}_utc"].rstrip("Z"), "ms") for edge in ("start", "end"))
    table = Table.grid(padding=(0, 1))
    table.add_column(width=label, no_wrap=True)
    table.add_column(no_wrap=True)
    by_contact = dict(tuple(record.contacts.groupby("antenna")))
    by_window = dict(tuple(record.windows.groupby("antenna")))
    rows = stretches(start, end, max(width - label - 2, 24))
    shown = rows if detail else [row for row in rows if row.start_utc - start < _REVIEWED]
    for stretch in shown:
        table.add_row(Text(str(stretch.start_utc)[5:10], style="dim"), hour_ruler(stretch))
        for name, antenna in summary["antennas"].items():
            row = antenna_row(
                stretch, by_contact.get(name, record.contacts[:0]), by_window.get(name, record.windows[:0]),
                antenna["closures"], keys,
            )
            table.add_row(name, row)
    until = min(shown[-1].end_utc, end)
    more = [Text(f"... and on to {minute(str(end))} UTC; --full shows it", style="dim")] if until < end else []
    marks = Text(f"{SEEN} in view, not used   {CLOSED} closed   {SEVERAL} several contacts", style="dim")
    if len(set(keys.values())) < len(keys):
        return Group(table, *more, marks)
    names = [Text.assemble((key, "bold cyan"), f" {name}") for name, key in keys.items()]
    return Group(table, *more, Columns(names, padding=(0, 2)), marks)


def _changes(against: Mapping[str, Any], detail: bool) -> RenderableType:
    counts = Text("   ").join(Text.assemble((str(n), "bold"), f" {name}") for name, n in against["counts"].items())
    if not detail:
        return counts
    gone = [
        Text.assemble("- ", (f"{minute(row['start_utc'])} {row['spacecraft']} on {row['antenna']}", "bold"),
                      f", {'instead ' + row['moved_to'] if row['moved_to'] else 'dropped'}")
        for row in against["dropped"]
    ]
    return Group(counts, *gone)


def _spoken(selection: Selection) -> str:
    return ", ".join(name for name in (selection.spacecraft, selection.antenna, selection.site) if name)


def _margins(record: PlanRecord, width: int) -> RenderableType:
    lowest = record.contacts.dropna(subset=["min_margin_db"]).nsmallest(5, "min_margin_db", keep="first")
    table = Table.grid(padding=(0, 2))
    for row in lowest.to_dict("records"):
        start = pd.Timestamp(row["start_utc"])
        table.add_row(
            Text(f"{row['min_margin_db']:.2f} dB", style="bold"), row["spacecraft"], row["antenna"],
            f"{start:%d %b %H:%M}", row["modcod"], *([Text(row["contact_id"], style="dim")] if width >= 100 else []),
        )
    return table
