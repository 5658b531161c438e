"""The link budget in the terminal: every term of it, then margin and modcod along the pass."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pandas as pd
from rich.console import Console
from rich.table import Table
from rich.text import Text

from passplan.inputs.run import Run
from passplan.link.choice import DownlinkChoice
from passplan.link.expected import PlannedContact, expected_volumes
from passplan.link.lines import BudgetLine, budget_lines, link_along
from passplan.link.profiles import link_profiles
from passplan.planning.steps import losses_of, samples_of
from passplan.report.cautions import CAUTIONS
from passplan.report.directory import write_file
from passplan.report.link_chart import chart_columns, link_chart

_BAR_CELLS = 20


def print_budget(
    run: Run, spacecraft: str, antenna: str, at_utc: np.datetime64, window: pd.Series | None, console: Console
) -> None:
    """Print the budgets of every link of the pair at ``at_utc`` and, where ``window`` is given, along it."""
    console.print(Text.assemble(
        (f"{spacecraft} and {antenna}", "bold"), f"  {str(at_utc.astype('datetime64[s]')).replace('T', ' ')} UTC",
    ))
    lines = budget_lines(run, spacecraft, antenna, at_utc)
    if not lines:
        console.print("No radio of the spacecraft matches a receiver or transmitter of the antenna.")
        return
    for link in dict.fromkeys(line.link for line in lines):
        console.print()
        own = [line for line in lines if line.link == link]
        console.print(_terms(link, own))
        for line in own:
            if line.term == "notice":
                console.print(Text(f"· {line.source}", style="yellow"))
    if window is None:
        console.print()
        console.print("This instant lies in no window of the pair.", style="yellow")
    else:
        _print_along(run, spacecraft, antenna, window, console)
        _print_whole(run, window, console)
    console.print()
    for caution in CAUTIONS:
        console.print(Text(f"• {caution}", style="dim"))


def write_along(run: Run, spacecraft: str, antenna: str, window: pd.Series, out: Path) -> None:
    """Every term of every link of the pair along a window, a row for each second, as CSV.

    Raises :class:`~passplan.report.directory.DirectoryError` where the file cannot be written.
    """
    aos, los = (np.datetime64(window[key], "ms") for key in ("aos_utc", "los_utc"))
    seconds = np.arange(aos, los, np.timedelta64(1, "s"))
    write_file(link_along(run, spacecraft, antenna, np.append(seconds, los)), out)


def _terms(link: str, lines: list[BudgetLine]) -> Table:
    table = Table(box=None, padding=(0, 1), pad_edge=False, header_style="dim", title=link, title_justify="left",
                  title_style="bold")
    for heading, side in (("term", "left"), ("value", "right"), ("unit", "left"), ("source", "left")):
        table.add_column(heading, justify=side)  # type: ignore[arg-type]
    for line in lines:
        if line.term == "notice":
            continue
        value = line.value if isinstance(line.value, str) else f"{line.value:,.2f}"
        strong = "bold" if line.term in ("C/N0", "Es/N0", "Eb/N0", "margin", "net rate") else ""
        table.add_row(
            Text(line.term, style=strong), Text(value, style=strong), line.unit, Text(line.source, style="dim")
        )
    return table


def _print_along(run: Run, spacecraft: str, antenna: str, window: pd.Series, console: Console) -> None:
    """Margin, modcod and rate against time, for each link; before hysteresis, dwell and acquisition."""
    aos, los = (np.datetime64(window[key], "ms") for key in ("aos_utc", "los_utc"))
    length_ms = int((los - aos) / np.timedelta64(1, "ms"))
    shares = np.linspace(0.0, 1.0, chart_columns(console.width))
    along = link_along(run, spacecraft, antenna, aos + (shares * length_ms).astype("timedelta64[ms]"))
    for (direction, radio), group in along.groupby(["direction", "radio"], sort=False):
        console.print()
        console.print(Text(f"{direction} {radio} along {window['window_id']}", style="bold"))
        console.print(link_chart(group, run.policy.required_margin_db))


def _print_whole(run: Run, window: pd.Series, console: Console) -> None:
    """What a contact over the whole window would send, by the radio's rate control, and over the year."""
    table = window.to_frame().T.reset_index(drop=True)
    samples, losses = samples_of(run, table), losses_of(run, table)
    start_s, end_s = int(np.ceil(samples.time_s[0])), int(np.floor(samples.time_s[-1]))
    profile = link_profiles(run, table, samples, losses)[0].downlink
    choice = None if profile is None else profile.best(start_s, end_s)
    if choice is None:
        return
    control = getattr(run.radios[choice.radio], "rate_control", "")
    console.print()
    console.print(Text.assemble(
        ("The whole window as one contact", "bold"), f"   {control}: {choice.modcod}, {choice.volume_mb:,.1f} MB in "
        f"{choice.usable_s} s, least margin {choice.min_margin_db:.2f} dB",
    ))
    if len(choice.pieces) > 1:
        console.print(_steps(run, choice))
    if run.policy.unavailability_percent is not None:
        planned = PlannedContact(0, start_s, end_s, choice.radio, choice.modcod, choice.rate_mbps)
        over = expected_volumes(run, table, samples, [planned], losses)[0]
        console.print(
            f"Over an average year (statistics, not a forecast): mean {over.mean_mb:,.1f} MB, P10 {over.p10_mb:,.1f}, "
            f"P50 {over.p50_mb:,.1f}, P90 {over.p90_mb:,.1f}"
        )


def _steps(run: Run, choice: DownlinkChoice) -> Table:
    """The steps of a contact, with the rate as a bar."""
    table = Table(box=None, padding=(0, 1), pad_edge=False, header_style="dim")
    for heading, side in (("from UTC", "left"), ("s", "right"), ("modcod", "left"), ("Mbit/s", "right"), ("", "left")):
        table.add_column(heading, justify=side, no_wrap=True)  # type: ignore[arg-type]
    fastest = max(piece.rate_mbps for piece in choice.pieces)
    for piece in choice.pieces:
        begin = pd.Timestamp(run.start_utc + np.timedelta64(piece.start_s, "s"))
        bar = "▄" * max(round(_BAR_CELLS * piece.rate_mbps / fastest), 1)
        table.add_row(
            f"{begin:%H:%M:%S}", f"{piece.end_s - piece.start_s}", piece.modcod, f"{piece.rate_mbps:.3f}",
            Text(bar, style="cyan"),
        )
    return table
