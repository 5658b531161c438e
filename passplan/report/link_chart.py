"""Margin, rate and modcod of one link against time, drawn with block characters; readable without colour.

    dB margin
     8 ┤                ▂▅█▅▂           filled: a modcod holds the margin that the policy asks
     6 ┤             ▃▆███████▆▃        ░: the most robust one does not
    ≥3 ┤┄┄░░░▂▅██████████████████▅▂░    ┄: what is asked
     2 ┤  ░░░█████████████████████████░
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from rich.console import Group, RenderableType
from rich.padding import Padding
from rich.text import Text

Floats = NDArray[np.float64]

_AXIS = 9
_EIGHTHS = " ▁▂▃▄▅▆▇█"
_MARGIN_ROWS, _RATE_ROWS = 6, 5
_TICK_CELLS = 12
_MOST_STEPS = 16
# Heights of a row that a reader can add up.
_STEPS = (1.0, 2.0, 2.5, 3.0, 4.0, 5.0, 6.0, 8.0, 10.0)


def chart_columns(width: int) -> int:
    """How many samples a chart of ``width`` characters shows, one a column."""
    return max(min(width, 140) - _AXIS - 1, 20)


def link_chart(along: pd.DataFrame, required_db: float) -> RenderableType:
    """The chart of one link from evenly spaced rows of :func:`~passplan.link.lines.link_along`, one a column."""
    margin = along["margin_db"].to_numpy(np.float64)
    rate = along["rate_mbps"].to_numpy(np.float64)
    words = "margin of the fastest modcod that holds; ░ none holds, ┄ the margin asked"
    lines: list[RenderableType] = [_heading("dB", words)]
    lines += _panel(np.maximum(margin, 0.0), _MARGIN_ROWS, "cyan", holds=rate > 0.0, asked=required_db)
    if along["direction"].iloc[0] == "downlink":
        lines += [_heading("Mbit/s", "net rate, and its modcod"), *_panel(rate, _RATE_ROWS, "green")]
        modcods = along["modcod"].tolist()
        few = sum(a != b for a, b in pairwise(modcods)) < _MOST_STEPS
        lines += [_names(modcods), *_time_axis(along), _steps(along)] if few else [*_time_axis(along), _many(modcods)]
    else:
        lines += _time_axis(along)
    return Group(*lines)


def _many(modcods: Sequence[str]) -> Text:
    """In a word, where there are more steps than anybody wants to read."""
    steps = sum(a != b for a, b in pairwise(modcods))
    known = len({name for name in modcods if name})
    return Text(f"{'':{_AXIS}}{steps} changes between {known} modcods; --csv has them all", style="dim")


def _heading(unit: str, words: str) -> Text:
    return Text.assemble((f"{unit:>{_AXIS - 2}} ", "bold"), (f" {words}", "dim"))


def _panel(
    values: Floats, rows: int, style: str, holds: NDArray[np.bool_] | None = None, asked: float | None = None
) -> list[Text]:
    """An area under ``values``, rows from the top; a row is labelled with its upper edge."""
    step = _row_step(max(float(np.max(values, initial=0.0)), asked or 0.0), rows)
    good = np.ones(values.size, bool) if holds is None else holds
    lines = []
    for row in range(rows, 0, -1):
        marked = asked is not None and (row - 1) * step < max(asked, 1e-9) <= row * step
        label = f"≥{asked:g}" if marked else f"{row * step:g}"
        line = Text(f"{label:>{_AXIS - 2}} ┤", style="bold" if marked else "dim")
        for value, fine in zip(values.tolist(), good.tolist(), strict=True):
            eighths = min(max(round(8.0 * (value / step - (row - 1))), 0), 8)
            if eighths == 0:
                line.append("┄" if marked else " ", style="dim")
            else:
                line.append(_EIGHTHS[eighths] if fine else "░", style=style if fine else "red")
        lines.append(line)
    return lines


def _row_step(most: float, rows: int) -> float:
    """The least round height of a row with which ``rows`` of them reach ``most``."""
    least = max(most / rows, 1e-3)
    power = 10.0 ** np.floor(np.log10(least))
    return float(next(power * step for step in _STEPS if power * step >= least * (1.0 - 1e-9)))


def _names(modcods: Sequence[str]) -> Text:
    """The modcod under each column: named where there is room, parted where it changes."""
    line = Text(" " * _AXIS)
    edges = [0, *(k for k in range(1, len(modcods)) if modcods[k] != modcods[k - 1]), len(modcods)]
    for first, after in pairwise(edges):
        room, name = after - first - 1, modcods[first] or "none"
        line.append("│" + (name if len(name) <= room else "").ljust(room), style="dim" if name == "none" else "")
    return line


def _steps(along: pd.DataFrame) -> RenderableType:
    """Every modcod of the line above with the time from which it is the fastest that holds."""
    found, before = [], None
    for row in along.to_dict("records"):
        if row["modcod"] != before:
            before = row["modcod"]
            step = f"{before or 'none'} {pd.Timestamp(row['utc']).round('s'):%H:%M:%S}"
            found.append(step.replace(" ", "\N{NO-BREAK SPACE}"))
    return Padding(Text(" · ".join(found), style="dim"), (0, 0, 0, _AXIS))


def _time_axis(along: pd.DataFrame) -> list[Text]:
    """Ticks with the time and the elevation there."""
    count = len(along)
    ticks = list(range(0, count - 8, _TICK_CELLS))
    ruler = "".join("┴" if k in ticks else "─" for k in range(count))
    rows = [Text(f"{'':>{_AXIS - 1}}└{ruler}", style="dim")]
    times, heights = [pd.Timestamp(t) for t in along["utc"]], along["elevation_deg"].to_numpy()
    clock, rise = [f"{times[k].round('s'):%H:%M:%S}" for k in ticks], [f"{heights[k]:.0f}°" for k in ticks]
    for label, texts in (("UTC", clock), ("elev.", rise)):
        body = "".join(text.ljust(_TICK_CELLS) for text in texts)
        rows.append(Text.assemble((f"{label:>{_AXIS - 2}}  ", "dim"), body[:count].rstrip()))
    return rows
