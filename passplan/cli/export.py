"""``passplan export``: the files of a plan for calendars, spreadsheets, notebooks, antenna controllers and slides."""

from __future__ import annotations

from enum import StrEnum
from pathlib import Path
from typing import Annotated

import typer

from passplan.cli.faults import reports_faults
from passplan.cli.terminal import instant

# Named here as well as in report/export.py (a test compares them), so that --help needs none of the floors below.
Kind = StrEnum("Kind", ["csv", "parquet", "calendar", "pointing", "oem", "json", "page", "svg", "png", "all"])


@reports_faults
def command(
    directory: Annotated[Path, typer.Argument(help="A directory that passplan plan wrote.", show_default=False)],
    kind: Annotated[
        Kind, typer.Option("--as", help="What to write; all writes every kind that can be had.", show_default=False)
    ],
    out: Annotated[
        Path | None, typer.Option("--out", help="Where to write; without it, into the plan directory.")
    ] = None,
    step_s: Annotated[
        float, typer.Option("--step", min=0.1, max=600.0, help="Seconds between the rows of pointing tables.")
    ] = 1.0,
    expires: Annotated[
        str | None, typer.Option("--expires", metavar="UTC", help="Pointing tables are not issued again after this.")
    ] = None,
) -> None:
    """Write a plan as calendars, pointing tables, ephemerides, tables, pictures or its page."""
    from passplan.inputs.errors import InputError, Problem
    from passplan.report.directory import read_plan, stored_run
    from passplan.report.export import KINDS, Wanted, export
    from passplan.report.table_files import MissingLibraryError

    until = instant(expires, "--expires")
    if until is not None and kind not in ("pointing", "all"):
        raise InputError([Problem("--expires", "", expires, "only pointing tables expire; add --as pointing")])
    record = read_plan(directory)
    wanted = Wanted(record, stored_run(directory, record), directory, step_s, until)
    if kind != "all":
        typer.echo(f"{kind}: {export(kind, wanted, out)}")
        return
    for one in KINDS:
        try:
            typer.echo(f"{one}: {export(one, wanted, None if out is None else out / one)}")
        except MissingLibraryError as fault:
            typer.echo(f"passplan: {one} left out: {fault}", err=True)
