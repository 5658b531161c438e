"""``passplan link``: the link budget line by line, and along a pass."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from passplan.cli.faults import reports_faults
from passplan.cli.terminal import StartOption, instant, progress, stdout
from passplan.inputs.errors import InputError, Problem, nearest
from passplan.inputs.load import load_run
from passplan.inputs.records import datetime64
from passplan.planning.steps import links_of, windows_of
from passplan.report.link_budget import instant_of_interest, print_budget


@reports_faults
def command(
    config: Annotated[Path, typer.Argument(help="The run config (TOML).", show_default=False)],
    spacecraft: Annotated[str, typer.Option("--spacecraft", help="The spacecraft.", show_default=False)],
    antenna: Annotated[str, typer.Option("--antenna", help="The antenna.", show_default=False)],
    at: Annotated[str | None, typer.Option("--at", metavar="UTC", help="The instant; without it the culmination of the highest window.")] = None,
    start: StartOption = None,
) -> None:
    """Show the link budget line by line at an instant, and margin and modcod along the pass."""
    run = load_run(config, start=instant(start, "--start"))
    for option, name, known in (("--spacecraft", spacecraft, run.orbits), ("--antenna", antenna, run.antennas)):
        if name not in known:
            raise InputError([Problem(option, "", name, f"not in this run; {nearest(name, known)}")])
    wanted = instant(at, "--at")
    with progress() as report:
        windows = windows_of(run, report, only=(spacecraft, antenna))
        window, moment = instant_of_interest(windows, None if wanted is None else datetime64(wanted))
        links = links_of(run, windows) if window is not None else []
    if moment is None:
        raise InputError([Problem("--at", "", at, f"{antenna} never sees {spacecraft} in this run; choose another pair")])
    print_budget(run, spacecraft, antenna, moment, windows, window, links, stdout())
