"""``passplan link``: the link budget line by line, and along a pass."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from passplan.cli.faults import reports_faults
from passplan.cli.terminal import StartOption, instant, progress, stdout
from passplan.inputs.errors import InputError, Problem, nearest


@reports_faults
def command(
    config: Annotated[Path, typer.Argument(help="The run config (TOML).", show_default=False)],
    spacecraft: Annotated[str, typer.Option("--spacecraft", help="The spacecraft.", show_default=False)],
    antenna: Annotated[str, typer.Option("--antenna", help="The antenna.", show_default=False)],
    at: Annotated[
        str | None, typer.Option("--at", metavar="UTC", help="The instant; else the highest culmination.")
    ] = None,
    csv: Annotated[
        Path | None,
        typer.Option("--csv", metavar="FILE", help="Also write every term along the pass, a row each second, to FILE."),
    ] = None,
    start: StartOption = None,
) -> None:
    """Show the link budget line by line at an instant, and margin and modcod along the pass."""
    import numpy as np
    import pandas as pd

    from passplan.inputs.load import load_run
    from passplan.inputs.records import datetime64
    from passplan.planning.steps import windows_of
    from passplan.report.link_budget import print_budget, write_along

    run = load_run(config, start=instant(start, "--start"))
    for option, name, known in (("--spacecraft", spacecraft, run.orbits), ("--antenna", antenna, run.antennas)):
        if name not in known:
            raise InputError([Problem(option, "", name, f"not in this run; {nearest(name, known)}")])
    wanted = instant(at, "--at")
    with progress() as report:
        windows = windows_of(run, report, only=(spacecraft, antenna))
    if windows.empty and wanted is None:
        raise InputError([Problem("--antenna", "", antenna, f"never sees {spacecraft} in this run; choose another")])
    window: pd.Series | None
    if wanted is None:
        window = windows.iloc[int(windows["peak_elevation_deg"].to_numpy().argmax())]
        moment = np.datetime64(window["peak_utc"], "ms")
    else:
        moment = datetime64(wanted)
        inside = windows[(windows["aos_utc"] <= moment) & (windows["los_utc"] > moment)]
        window = inside.iloc[0] if len(inside) else None
    if csv is not None:
        if window is None:
            raise InputError([Problem("--at", "", at, "lies in no window of the pair; there is no pass to write")])
        write_along(run, spacecraft, antenna, window, csv)
    print_budget(run, spacecraft, antenna, moment, window, stdout())
