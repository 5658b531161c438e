"""The health of a run's inputs: what ``passplan check`` prints."""

from __future__ import annotations

import numpy as np
import pandas as pd
from rich.console import Console
from rich.table import Table
from rich.text import Text

from passplan.inputs.calendar_records import Closure
from passplan.inputs.fleet import DownlinkRadio
from passplan.inputs.ground import Antenna
from passplan.inputs.matching import matching_loss_db
from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.report.flux import flux_of_run, flux_warning

_USE_STYLES = {"chosen": "", "listed": "dim"}


def print_health(run: Run, console: Console) -> bool:
    """Print spacecraft with their orbits, antennas with whom they serve, flux densities, closures, requests, warnings.

    True where there was something to warn of.
    """
    console.print(Text.assemble((run.name, "bold"), f"  {_instant(run.start_utc)} to {_instant(run.end_utc)}"))
    console.print(_spacecraft(run))
    others = run.elements[run.elements["use"] != "chosen"] if len(run.elements) else run.elements
    if len(others):
        console.print(_other_sets(others))
    console.print(_antennas(run))
    over, flux = flux_of_run(run)
    console.print(flux)
    within = [c for c in run.closures if _closed_h(run, c) > 0.0]
    console.print(Text.assemble(
        (str(len(within)), "bold"), " closures within the horizon, ", (str(len(run.requests)), "bold"), " requests, ",
        (str(len(run.files)), "bold"), " files read",
    ))
    for name, why in run.left_out.items():
        console.print(Text.assemble(("! ", "bold red"), (f"{name} left out: ", "bold"), why))
    warnings = [*run.warnings, *(flux_warning(entry) for entry in over)]
    for warning in warnings:
        console.print(Text.assemble(("~ ", "bold yellow"), warning))
    if not run.left_out and not warnings:
        console.print("No warnings.")
    return bool(warnings or run.left_out)


def _plain_table(*headings: tuple[str, str]) -> Table:
    table = Table(box=None, padding=(0, 1), pad_edge=False, header_style="dim")
    for heading, side in headings:
        table.add_column(heading, justify=side, no_wrap=side == "right")  # type: ignore[arg-type]
    return table


def _spacecraft(run: Run) -> Table:
    table = _plain_table(("spacecraft", "left"), ("number", "right"), ("orbit from", "left"), ("epoch", "left"),
                         ("age d", "right"), ("radios", "left"), ("antennas", "right"))
    chosen = run.elements[run.elements["use"] == "chosen"].set_index("spacecraft") if len(run.elements) else None
    for name, craft in run.spacecraft.items():
        number = "" if craft.catalogue_number is None else str(craft.catalogue_number)
        source, epoch, age = "left out", "", ""
        if name in run.orbits:
            source = "ephemeris"
            if chosen is not None and name in chosen.index:
                row = chosen.loc[name]
                source, epoch = "element set", _instant(np.datetime64(row["epoch_utc"]))
                age = f"{row['age_days']:.2f}"
        served = sum(_serves(run, antenna, name) for antenna in run.antennas.values())
        table.add_row(name, number, source, epoch, age, ", ".join(craft.radios), str(served))
    return table


def _other_sets(others: pd.DataFrame) -> Table:
    table = _plain_table(
        ("not used for", "left"), ("epoch", "left"), ("age d", "right"), ("why", "left"), ("from", "left")
    )
    for row in others.to_dict("records"):
        table.add_row(
            row["spacecraft"], _instant(np.datetime64(row["epoch_utc"])), f"{row['age_days']:.2f}",
            Text(row["use"], style=_USE_STYLES.get(row["use"], "yellow")), f"{row['source']} {row['place']}",
        )
    return table


def _antennas(run: Run) -> Table:
    table = _plain_table(
        ("antenna", "left"), ("site", "left"), ("mask", "left"), ("hears", "left"), ("commands", "left"),
        ("serves", "right"), ("closed h", "right"),
    )
    for name, antenna in run.antennas.items():
        served = sum(_serves(run, antenna, craft) for craft in run.spacecraft)
        closed = [c for c in run.closures if c.antenna == name]
        hours = sum(_closed_h(run, c) for c in closed)
        table.add_row(
            name, antenna.site, _mask(antenna), ", ".join(antenna.receivers) or "-",
            ", ".join(antenna.transmitters) or "receive only", str(served), f"{hours:.1f}" if closed else "",
        )
    return table


def _mask(antenna: Antenna) -> str:
    if not antenna.mask:
        return f"{antenna.min_elevation_deg:g}°"
    heights = [max(height, antenna.min_elevation_deg) for _, height in antenna.mask]
    return f"{min(heights):g} to {max(heights):g}°, {len(antenna.mask)} points"


def _serves(run: Run, antenna: Antenna, spacecraft: str) -> bool:
    """Whether the antenna has a receiver for one of the spacecraft's downlinks, or a transmitter for its commands."""
    for radio in (run.radios[name] for name in run.spacecraft[spacecraft].radios):
        names, known = ((antenna.receivers, run.receivers) if isinstance(radio, DownlinkRadio)
                        else (antenna.transmitters, run.transmitters))
        if any(matching_loss_db(radio, known[name]) is not None for name in names):
            return True
    return False


def _closed_h(run: Run, closure: Closure) -> float:
    """Hours of the horizon that a closure takes."""
    start, end = max(datetime64(closure.start_utc), run.start_utc), min(datetime64(closure.end_utc), run.end_utc)
    return max(float((end - start) / np.timedelta64(1, "h")), 0.0)


def _instant(instant: np.datetime64) -> str:
    return str(instant.astype("datetime64[s]")).replace("T", " ")
