"""A day of each antenna in text: who is heard when, what else was in view, and when the antenna is closed.

Every cell stands for a stretch of time and shows the strongest thing in it: a contact (the key of its
spacecraft, or ``+`` for several), a closure, a window that is not used, or nothing. The letters carry
the meaning, so the picture reads the same without colour.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from rich.text import Text

CLOSED, SEEN, SEVERAL = "×", "·", "+"
_STYLES = {CLOSED: "red dim", SEEN: "dim", SEVERAL: "bold reverse", " ": ""}
_HOUR = np.timedelta64(3_600_000, "ms")


@dataclass(frozen=True)
class Stretch:
    """One row of a timeline: a start, and how long one of its ``cells`` lasts (``timedelta64[ms]``)."""

    start_utc: np.datetime64
    cell: np.timedelta64
    cells: int

    @property
    def end_utc(self) -> np.datetime64:
        return self.start_utc + self.cell * self.cells

    def span(self, start_utc: Any, end_utc: Any) -> slice:
        """The cells that ``[start_utc, end_utc)`` touches; empty where it lies outside."""
        cells = (np.array([start_utc, end_utc], "datetime64[ms]") - self.start_utc) / self.cell
        first, last = cells.tolist()
        low = min(max(int(np.floor(first)), 0), self.cells)
        return slice(low, max(min(int(np.ceil(last)), self.cells), low))


def stretches(start_utc: np.datetime64, end_utc: np.datetime64, cells: int) -> list[Stretch]:
    """Rows of equal length that cover the horizon, each at most as long as keeps contacts apart in ``cells``.

    A row covers 12 h in up to 120 cells and 24 h in more, or the whole horizon where that is shorter.
    """
    longest = (12 if cells < 120 else 24) * _HOUR
    length = end_utc - start_utc
    rows = int(np.ceil(length / longest))
    each = np.timedelta64(int(np.ceil(length / np.timedelta64(1, "ms") / rows / cells)), "ms")
    return [Stretch(start_utc + i * cells * each, each, cells) for i in range(rows)]


def antenna_row(
    stretch: Stretch, contacts: pd.DataFrame, windows: pd.DataFrame, closures: list[Mapping[str, Any]],
    keys: Mapping[str, str],
) -> Text:
    """One antenna over one stretch; the tables hold that antenna's rows only."""
    cells = np.full(stretch.cells, " ", dtype=object)
    for start, end in zip(windows["aos_utc"], windows["los_utc"], strict=True):
        cells[stretch.span(start, end)] = SEEN
    for closure in closures:
        cells[stretch.span(closure["start_utc"].rstrip("Z"), closure["end_utc"].rstrip("Z"))] = CLOSED
    taken: dict[int, str] = {}
    for start, end, name in zip(contacts["start_utc"], contacts["end_utc"], contacts["spacecraft"], strict=True):
        span = stretch.span(start, end)
        for i in range(span.start, span.stop):
            taken[i] = keys[name] if taken.get(i, keys[name]) == keys[name] else SEVERAL
    for i, mark in taken.items():
        cells[i] = mark
    row = Text()
    for mark in cells:
        row.append(mark, style=_STYLES.get(mark, "bold cyan"))
    return row


def hour_ruler(stretch: Stretch) -> Text:
    """Hours along a stretch, as far apart as their labels need."""
    per_hour = float(_HOUR / stretch.cell)
    step = next((n for n in (1, 2, 3, 6, 12, 24) if n * per_hour >= 5), 24)
    ruler = np.full(stretch.cells, " ", dtype=object)
    hour = stretch.start_utc.astype("datetime64[h]")
    while hour < stretch.end_utc:
        at = round((hour - stretch.start_utc) / stretch.cell)
        of_day = int((hour - hour.astype("datetime64[D]")) / np.timedelta64(1, "h"))
        label = f"{of_day:02d}h"
        if of_day % step == 0 and 0 <= at <= stretch.cells - len(label):
            ruler[at : at + len(label)] = list(label)
        hour += np.timedelta64(1, "h")
    return Text("".join(ruler), style="dim")
