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
    full: Annotated[bool, typer.Option("--full", help="Print every contact.")] = False,
    as_json: Annotated[bool, typer.Option("--json", help="Print the summary as JSON, for machines.")] = False,
) -> None:
    """Print the report of a plan again."""
    from passplan.report.directory import read_plan
    from passplan.report.terminal import print_plan

    record = read_plan(directory)
    if as_json:
        typer.echo(json.dumps(record.summary, indent=2, ensure_ascii=False))
    else:
        print_plan(record, stdout(), rows=None if full else 40)
