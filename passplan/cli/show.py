"""``passplan show``: the report of a plan directory again."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Annotated

import typer

from passplan.cli.faults import reports_faults
from passplan.cli.terminal import stdout


@reports_faults
def command(
    directory: Annotated[Path, typer.Argument(help="A directory that passplan plan wrote.", show_default=False)],
    full: Annotated[
        bool, typer.Option("--full", help="Print every contact, the causes of unused windows, lowest margins.")
    ] = False,
    spacecraft: Annotated[str | None, typer.Option("--spacecraft", help="Only this spacecraft, in full.")] = None,
    antenna: Annotated[str | None, typer.Option("--antenna", help="Only this antenna, in full.")] = None,
    site: Annotated[str | None, typer.Option("--site", help="Only the antennas of this site, in full.")] = None,
    local: Annotated[
        str | None, typer.Option("--local", metavar="SITE", help="Add a column with this site's local time.")
    ] = None,
    picture: Annotated[
        Path | None,
        typer.Option("--picture", metavar="FILE", help="Also draw the antennas' day to FILE (.svg or .png)."),
    ] = None,
    as_json: Annotated[bool, typer.Option("--json", help="Print the plan as JSON, for machines.")] = False,
) -> None:
    """Print the report of a plan again: one screen, everything, or one spacecraft, antenna or site."""
    from passplan.report.contact_table import LocalTime
    from passplan.report.directory import read_plan, stored_run
    from passplan.report.export import Wanted, draw
    from passplan.report.selection import Selection, select
    from passplan.report.table_files import rows_of
    from passplan.report.terminal import print_plan
    from passplan.report.zones import local_time

    record = read_plan(directory)
    selection = Selection(spacecraft, antenna, site)
    if as_json:
        part = select(record, selection)
        document = (
            part.summary
            if not selection
            else {**part.summary, "contacts": rows_of(part.contacts), "unused": rows_of(part.unused)}
        )
        typer.echo(json.dumps(document, indent=2, ensure_ascii=False))
        return
    run = stored_run(directory, record) if local or picture else None
    clock: LocalTime | None = local_time(run, local) if run is not None and local else None
    print_plan(record, stdout(), full=full, selection=selection, local=clock)
    if picture is not None and run is not None:
        draw(Wanted(select(record, selection), run, directory), picture)
        stdout().print(f"\nPicture written to {picture}", style="bold")
