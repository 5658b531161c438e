"""What each spacecraft holds through the day as a line of blocks, with the figures beside it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import pairwise
from typing import Any

import numpy as np
from rich.console import Group, RenderableType
from rich.text import Text

from passplan.planning.backlog import Backlog
from passplan.report.contact_table import plain_table
from passplan.report.words import LEAST_MB, megabytes

_BLOCKS = " ▁▂▃▄▅▆▇█"
LOST = "!"
# What a column of figures takes.
_FIGURE = 12


def backlog_chart(
    summary: Mapping[str, Any], stores: Mapping[str, Backlog], width: int, rows: int | None
) -> RenderableType:
    """One line per spacecraft; with ``rows`` only those that lose most or end fullest, in the plan's order."""
    names = list(summary["storage"])
    if rows is not None and len(names) > rows:
        worst = sorted(names, key=lambda name: _urgency(summary["storage"][name]), reverse=True)[:rows]
        names = [name for name in names if name in worst]
    wide = width >= 100
    figures = ["after", "generated", "delivered", "lost"] if wide else ["after", "delivered", "lost"]
    classes = {name: summary["storage"][name].get("classes", {}) for name in names}
    labels = [*names, *(f"  {label}" for own in classes.values() for label in own)]
    cells = max(width - max(map(len, labels), default=0) - _FIGURE * len(figures) - 4, 12)
    table = plain_table(("spacecraft", "left"), ("through the day", "left"), *((one, "right") for one in figures))
    for name in names:
        store = summary["storage"][name]
        table.add_row(Text(name), blocks(stores[name], cells), *_figures(store, figures))
        for label, own in classes[name].items() if len(classes[name]) > 1 else ():
            missed = own["missed_mb"]
            note = f"worth {own['weight']:g}" + (f", {megabytes(missed)} missed" if missed > LEAST_MB else "")
            table.add_row(Text(f"  {label}", style="dim"), Text(note, style="dim"), *_figures(own, figures))
    notes = [Text(f"blocks: the fill from start to end, █ is the whole storage, {LOST} data lost", style="dim")]
    hidden = len(summary["storage"]) - len(names)
    if hidden:
        notes.append(Text(f"... and {hidden} more that are less full; --full shows them all", style="dim"))
    return Group(table, *notes)


def _figures(store: Mapping[str, Any], names: Sequence[str]) -> list[str | Text]:
    """The figures of a spacecraft, or of one of its classes of data, in the order of the columns."""
    lost = Text(megabytes(store["lost_mb"]), style="bold red" if store["lost_mb"] > LEAST_MB else "dim")
    numbers = {"after": store["left_mb"], "generated": store["generated_mb"], "delivered": store["delivered_mb"]}
    return [lost if one == "lost" else megabytes(numbers[one]) for one in names]


def blocks(store: Backlog, cells: int) -> Text:
    """The highest fill within each cell as a block, ``!`` where data is lost."""
    horizon_s = float(store.time_s[-1])
    edges = np.linspace(0.0, horizon_s, cells + 1)
    row = Text()
    for low, high in pairwise(edges.tolist()):
        inside = store.fill_mb[(store.time_s >= low) & (store.time_s <= high)]
        highest = max([*store.at(np.array([low, high])).tolist(), *inside.tolist()])
        if any(first < high and last > low for first, last in store.losing_s):
            row.append(LOST, style="bold red")
        else:
            share = highest / store.capacity_mb if store.capacity_mb > 0.0 else 0.0
            row.append(_BLOCKS[min(int(np.ceil(8.0 * share - 1e-9)), 8)], style="cyan")
    return row


def _urgency(store: Mapping[str, float]) -> tuple[float, float]:
    return store["lost_mb"], store["left_mb"] / store["capacity_mb"] if store["capacity_mb"] else 0.0
