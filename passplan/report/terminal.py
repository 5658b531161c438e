"""The terminal report: one plan from the headline to the cautions, readable at 100 columns and without colour."""

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

from passplan.planning.record import PlanRecord
from passplan.report.cautions import CAUTIONS
from passplan.report.keys import spacecraft_keys
from passplan.report.timeline import CLOSED, SEEN, SEVERAL, antenna_row, hour_ruler, stretches

_STATUS_WORDS = {
    "optimal": "proven best",
    "within_gap": "within the gap asked for",
    "stopped_by_limit": "stopped by the time limit",
    "greedy": "greedy, no better found in time",
    "empty": "no contact possible",
}


def print_plan(record: PlanRecord, console: Console, *, rows: int | None = 40) -> None:
    """Print the whole report; ``rows`` limits the contacts table (None: all of them)."""
    summary = record.summary
    console.print(_headline(summary))
    for title, lines in (("Shortfalls", _shortfalls(summary)), ("Warnings", _warnings(summary))):
        if lines:
            _section(console, title, Group(*lines))
    _section(console, "Inputs", _health(summary))
    _section(console, "Antennas through the day, UTC", _timeline(record, console.width))
    _section(console, "Contacts", _contacts(record, rows))
    _section(console, "Data aboard each spacecraft", _storage(summary))
    if len(record.contacts):
        _section(console, "Lowest margins", _margins(record))
    console.print()
    for caution in CAUTIONS:
        console.print(Padding(Text(f"• {caution}", style="dim"), (0, 1)))


def megabytes(volume_mb: float) -> str:
    """A volume in the unit that keeps it to four figures."""
    for unit, size in (("TB", 1e6), ("GB", 1e3)):
        if abs(volume_mb) >= size:
            return f"{volume_mb / size:.2f} {unit}"
    return f"{volume_mb:.1f} MB"


def _section(console: Console, title: str, body: RenderableType) -> None:
    console.print()
    console.print(Rule(Text(title, style="bold"), align="left", characters="─", style="dim"))
    console.print(body)


def _headline(summary: Mapping[str, Any]) -> RenderableType:
    start, end = summary["horizon_start_utc"], summary["horizon_end_utc"]
    title = Text.assemble(("DRAFT ", "bold yellow"), (summary["name"], "bold"), f"  plan {summary['plan_id']}")
    title.append(f"\n{_minute(start)} to {_minute(end)} UTC", style="dim")
    gap = summary["gap"]
    facts = Table.grid(padding=(0, 3))
    facts.add_row(
        *(Text.assemble((label + " ", "dim"), (value, "bold")) for label, value in (
            ("contacts", f"{summary['contacts']}"),
            ("brought down", megabytes(summary["volume_mb"])),
            ("lost aboard", megabytes(sum(s["lost_mb"] for s in summary["storage"].values()))),
        ))
    )
    proof = Text.assemble(
        ("value ", "dim"), (f"{summary['value']:,.1f}", "bold"),
        ("   no plan can exceed ", "dim"), (f"{summary['bound']:,.1f}", "bold"),
        ("   gap ", "dim"), ("none to close" if gap is None else f"{100 * gap:.2f} %", "bold"),
        (f"   {_STATUS_WORDS.get(summary['status'], summary['status'])}", "dim"),
    )
    return Group(title, facts, proof)


def _shortfalls(summary: Mapping[str, Any]) -> list[Text]:
    return [Text.assemble(("! ", "bold red"), (f"{s['name']}: ", "bold"), s["sentence"]) for s in summary["shortfalls"]]


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
    sky = summary.get("geometry", {})
    if sky.get("largest_timing_sigma_s") is not None:
        lines.append(Text(
            f"AOS and LOS known to {sky['largest_timing_sigma_s']:.2f} s, "
            f"pointing to {sky['largest_off_pointing_deg']:.2f}° "
            f"(1 sigma, worst); refraction {sky['refraction']}; {sky['lost_s']:.0f} s lost inside windows"
        ))
    lines += [Text.assemble((f"{name} left out: ", "bold"), why) for name, why in summary["left_out"].items()]
    return Group(*lines)


def _timeline(record: PlanRecord, width: int) -> RenderableType:
    summary = record.summary
    keys = spacecraft_keys(summary["spacecraft"])
    label = min(max((len(name) for name in summary["antennas"]), default=4), 20)
    start, end = (np.datetime64(summary[f"horizon_{edge}_utc"].rstrip("Z"), "ms") for edge in ("start", "end"))
    table = Table.grid(padding=(0, 1))
    table.add_column(width=label, no_wrap=True)
    table.add_column(no_wrap=True)
    by_contact = dict(tuple(record.contacts.groupby("antenna")))
    by_window = dict(tuple(record.windows.groupby("antenna")))
    for stretch in stretches(start, end, max(width - label - 2, 24)):
        table.add_row(Text(str(stretch.start_utc)[5:10], style="dim"), hour_ruler(stretch))
        for name, antenna in summary["antennas"].items():
            row = antenna_row(
                stretch, by_contact.get(name, record.contacts[:0]), by_window.get(name, record.windows[:0]),
                antenna["closures"], keys,
            )
            table.add_row(name, row)
    marks = Text(f"{SEEN} in view, not used   {CLOSED} closed   {SEVERAL} several contacts", style="dim")
    if len(set(keys.values())) < len(keys):
        return Group(table, marks)
    names = [Text.assemble((key, "bold cyan"), f" {name}") for name, key in keys.items()]
    return Group(table, Columns(names, padding=(0, 2)), marks)


def _contacts(record: PlanRecord, rows: int | None) -> RenderableType:
    contacts = record.contacts.sort_values(["start_utc", "antenna"], kind="stable")
    shown = contacts if rows is None else contacts.head(rows)
    table = Table(box=None, padding=(0, 1), pad_edge=False, header_style="dim")
    for heading, side in (("start", "left"), ("min", "right"), ("antenna", "left"), ("spacecraft", "left"),
                          ("service", "left"), ("modcod", "left"), ("MB", "right"), ("margin dB", "right"),
                          ("peak", "right"), ("", "left")):
        table.add_column(heading, justify=side, no_wrap=True)  # type: ignore[arg-type]
    day = None
    for row in shown.to_dict("records"):
        start = pd.Timestamp(row["start_utc"])
        if start.date() != day and day is not None:
            table.add_row(Text(f"{start:%d %b}", style="dim"))
        day = start.date()
        table.add_row(
            f"{start:%H:%M:%S}", f"{row['duration_s'] / 60:.1f}", row["antenna"], row["spacecraft"], row["service"],
            row["modcod"], f"{row['volume_mb']:,.1f}", _margin(row["min_margin_db"]),
            f"{row['peak_elevation_deg']:.0f}°", Text(_note(row), style="dim"),
        )
    hidden = len(contacts) - len(shown)
    if not len(contacts):
        return Text("none")
    more = Text(f"... and {hidden} more; --full shows them all, contacts.csv holds them", style="dim")
    return Group(table, *([more] if hidden else []))


def _note(row: Mapping[Any, Any]) -> str:
    parts = [] if row["origin"] == "planned" else [row["origin"]]
    # Most contacts leave out time in which nothing can be sent; only what another contact took is worth a word.
    if "busy" in row["cut"]:
        parts.append("cut short")
    if row["cost"]:
        parts.append(f"cost {row['cost']:,.0f}")
    return ", ".join(parts)


def _margin(margin_db: float) -> str:
    return "" if pd.isna(margin_db) else f"{margin_db:.1f}"


def _storage(summary: Mapping[str, Any]) -> RenderableType:
    table = Table(box=None, padding=(0, 1), pad_edge=False, header_style="dim")
    for heading in ("spacecraft", "aboard before", "", "after", "generated", "delivered", "lost"):
        table.add_column(heading, justify="left" if heading in ("spacecraft", "") else "right", no_wrap=True)
    for name, store in summary["storage"].items():
        lost = Text(megabytes(store["lost_mb"]), style="bold red" if store["lost_mb"] > 0.05 else "dim")
        table.add_row(
            name, megabytes(store["start_mb"]), _fill_bar(store), megabytes(store["left_mb"]),
            megabytes(store["generated_mb"]), megabytes(store["delivered_mb"]), lost,
        )
    return Group(table, Text("bar: the whole storage; █ full after the day, │ where it stood before", style="dim"))


def _fill_bar(store: Mapping[str, float], width: int = 16) -> Text:
    """Storage as a bar: ``█`` up to the fill at the end, ``│`` marks the fill at the start."""
    capacity = store["capacity_mb"]
    if capacity <= 0.0:
        return Text("no storage".ljust(width), style="dim")
    after = round(width * min(store["left_mb"] / capacity, 1.0))
    before = min(round(width * min(store["start_mb"] / capacity, 1.0)), width - 1)
    cells = ["█"] * after + ["░"] * (width - after)
    bar = Text("".join(cells), style="cyan")
    bar.plain = bar.plain[:before] + "│" + bar.plain[before + 1 :]
    return bar


def _margins(record: PlanRecord) -> RenderableType:
    lowest = record.contacts.dropna(subset=["min_margin_db"]).nsmallest(5, "min_margin_db", keep="first")
    table = Table.grid(padding=(0, 2))
    for row in lowest.to_dict("records"):
        start = pd.Timestamp(row["start_utc"])
        table.add_row(
            Text(f"{row['min_margin_db']:.2f} dB", style="bold"), row["spacecraft"], row["antenna"],
            f"{start:%d %b %H:%M}", row["modcod"], Text(row["contact_id"], style="dim"),
        )
    return table


def _minute(text: str) -> str:
    return text[:16].replace("T", " ")
