"""The windows table in the terminal."""

from __future__ import annotations

import pandas as pd
from rich.console import Console
from rich.table import Table
from rich.text import Text


def print_windows(windows: pd.DataFrame, console: Console, *, rows: int | None = 40) -> None:
    """Print the first ``rows`` windows (None: all), with how many there are."""
    table = Table(box=None, padding=(0, 1), pad_edge=False, header_style="dim")
    for heading, side in (("window", "left"), ("AOS, UTC", "left"), ("LOS", "left"), ("min", "right"),
                          ("peak", "right"), ("azimuths", "left"), ("km", "right"),
                          ("lost s", "right"), ("± s", "right"), ("± deg", "right"), ("cut", "left")):
        table.add_column(heading, justify=side, no_wrap=True)  # type: ignore[arg-type]
    shown = windows if rows is None else windows.head(rows)
    for row in shown.to_dict("records"):
        aos, los = pd.Timestamp(row["aos_utc"]), pd.Timestamp(row["los_utc"])
        table.add_row(
            row["window_id"], f"{aos:%d %b %H:%M:%S}", f"{los:%H:%M:%S}", f"{row['duration_s'] / 60:.1f}",
            f"{row['peak_elevation_deg']:.1f}°", f"{row['aos_azimuth_deg']:.0f}° → {row['los_azimuth_deg']:.0f}°",
            f"{row['min_range_km']:,.0f}", f"{row['lost_s']:.1f}" if row["lost_s"] else "",
            f"{row['timing_sigma_s']:.2f}", f"{row['off_pointing_deg']:.2f}",
            "" if row["clipped"] == "none" else f"horizon {row['clipped']}",
        )
    console.print(table)
    hidden = len(windows) - len(shown)
    if hidden:
        console.print(Text(f"... and {hidden} more; --full prints them all, --out FILE writes them", style="dim"))
    pairs = len(windows[["spacecraft", "antenna"]].drop_duplicates())
    console.print(f"{len(windows)} windows, {pairs} pairs of spacecraft and antenna")
