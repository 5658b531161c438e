"""The batteries of a plan: what they come down to, and when."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from rich.table import Table
from rich.text import Text

from passplan.report.words import minute


def battery_table(summary: Mapping[str, Any]) -> Table | None:
    """A row for each spacecraft of the summary that has a battery; None where none has."""
    rows = {name: entry for name, entry in summary.get("battery", {}).items() if name in summary["spacecraft"]}
    if not rows:
        return None
    table = Table(box=None, padding=(0, 2, 0, 0), header_style="dim")
    table.add_column("spacecraft", no_wrap=True)
    for title in ("lowest", "share", "at (UTC)", "floor", "at the end", "capacity"):
        table.add_column(title, justify="right", no_wrap=True)
    for name, entry in rows.items():
        under = entry["lowest_wh"] < entry["floor_wh"] * (1.0 - 1e-9)
        table.add_row(
            Text(name), Text(f"{entry['lowest_wh']:.1f} Wh", style="bold red" if under else "bold"),
            f"{100.0 * entry['lowest_wh'] / entry['capacity_wh']:.0f} %", minute(entry["lowest_utc"]),
            f"{entry['floor_wh']:.1f} Wh", f"{entry['left_wh']:.1f} Wh", f"{entry['capacity_wh']:.1f} Wh")
    return table
