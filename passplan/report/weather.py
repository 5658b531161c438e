"""What the terminal report says of weather: models outside their range, and volumes over the year."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import pandas as pd
from rich.console import Group, RenderableType
from rich.table import Table
from rich.text import Text

from passplan.planning.record import PlanRecord

_FIGURES = ("link_mb", "mean_mb", "p10_mb", "p50_mb", "p90_mb")


def notices(summary: Mapping[str, Any]) -> list[Text]:
    """One line for each notice of a plan."""
    return [Text(f"· {notice}", style="dim") for notice in summary.get("weather", {}).get("notices", ())]


def by_antenna(record: PlanRecord) -> RenderableType:
    """Volumes that the links of the downlink contacts carry, added up by antenna."""
    weather = record.summary["weather"]
    antenna_of = record.contacts.set_index("contact_id")["antenna"]
    shown = {name: entry for name, entry in weather["contacts"].items() if name in antenna_of.index}
    figures = pd.DataFrame.from_dict(shown, orient="index", columns=list(_FIGURES))
    owners = antenna_of.reindex(figures.index).astype(str).to_numpy()
    sums = figures.groupby(owners)[list(_FIGURES)].sum()
    counts = figures.groupby(owners).size().to_dict()
    percent = weather["unavailability_percent"]
    table = Table(box=None, padding=(0, 1), pad_edge=False, header_style="dim")
    headings = ("antenna", "contacts", f"GB held at {percent:g} %", "mean GB", "P10", "P50", "P90")
    for k, heading in enumerate(headings):
        table.add_column(heading, justify="right" if k else "left", no_wrap=True)
    for name, row in sums.iterrows():
        table.add_row(str(name), f"{counts[str(name)]}", *(f"{row[key] / 1e3:,.2f}" for key in _FIGURES))
    table.add_row("all", f"{len(figures)}", *(f"{sums[key].sum() / 1e3:,.2f}" for key in _FIGURES), style="bold")
    lines = [
        Text("What the links carry, whatever is aboard; P10 is not reached in a tenth of the year. Quantiles are "
             "those of each contact, added up.", style="dim"),
        Text(f"{weather['statement'][0].upper()}{weather['statement'][1:]}.", style="dim"),
    ]
    if weather.get("volume_basis") == "expected":
        lines.append(Text(
            "The plan counts means over the year: the rates of its segments are those of the modcods times what the "
            "whole contact carries on average over what it carries as planned.", style="dim"))
    if weather["rain_mm_per_h"]:
        stated = ", ".join(f"{name} {rate:g} mm/h" for name, rate in weather["rain_mm_per_h"].items())
        lines.append(Text(f"Rain stated for the day: {stated}", style="dim"))
    return Group(table, *lines)
