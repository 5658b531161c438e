"""``passplan windows``: when each antenna can follow each spacecraft."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from passplan.cli.faults import end_with_warnings, reports_faults
from passplan.cli.terminal import StartOption, StrictOption, instant, progress, stdout
from passplan.inputs.errors import InputError, Problem, nearest


@reports_faults
def command(
    config: Annotated[Path, typer.Argument(help="The run config (TOML).", show_default=False)],
    out: Annotated[Path | None, typer.Option("--out", help="Write the windows table to this CSV file.")] = None,
    spacecraft: Annotated[str | None, typer.Option("--spacecraft", help="Only this spacecraft.")] = None,
    antenna: Annotated[str | None, typer.Option("--antenna", help="Only this antenna.")] = None,
    full: Annotated[bool, typer.Option("--full", help="Print every row.")] = False,
    start: StartOption = None,
    strict: StrictOption = False,
) -> None:
    """Find the windows in which each antenna can follow each spacecraft."""
    from passplan.inputs.load import load_run
    from passplan.planning.steps import windows_of
    from passplan.report.directory import write_file
    from passplan.report.tables import print_windows

    run = load_run(config, start=instant(start, "--start"))
    for option, name, known in (("--spacecraft", spacecraft, run.spacecraft), ("--antenna", antenna, run.antennas)):
        if name is not None and name not in known:
            raise InputError([Problem(option, "", name, f"not in this run; {nearest(name, known)}")])
    with progress() as report:
        table = windows_of(run, report)
    for column, name in (("spacecraft", spacecraft), ("antenna", antenna)):
        if name is not None:
            table = table[table[column] == name]
    if out is not None:
        write_file(table, out)
        stdout().print(f"{len(table)} windows written to {out}")
    else:
        print_windows(table, stdout(), rows=None if full else 40)
    typer.echo(f"passplan: refraction {run.policy.refraction}, light time off", err=True)
    for warning in run.warnings:
        typer.echo(f"passplan: {warning}", err=True)
    end_with_warnings(bool(run.warnings or run.left_out), strict)
