"""``passplan audit``: checks a plan directory by a path that shares nothing with the planner."""

from __future__ import annotations

from datetime import datetime
from pathlib import Path
from typing import Annotated

import typer

from passplan.cli.faults import AUDIT, reports_faults
from passplan.cli.terminal import stdout


@reports_faults
def command(
    config: Annotated[Path, typer.Argument(help="The run config the plan was made from.", show_default=False)],
    directory: Annotated[Path, typer.Argument(help="The plan directory to check.", show_default=False)],
) -> None:
    """Check every contact of a plan against the inputs, by an independent path."""
    from passplan.inputs.load import load_run
    from passplan.planning.audit import audit_plan
    from passplan.report.directory import changed_inputs, read_plan

    record = read_plan(directory)
    summary = record.summary
    run = load_run(config, start=datetime.fromisoformat(summary["horizon_start_utc"]))
    console = stdout()
    for line in changed_inputs(record, run.files):
        console.print(f"~ {line}", style="yellow", markup=False)
    faults = audit_plan(run, record.contacts, record.segments, summary)
    for fault in faults:
        console.print(f"! {fault}", style="bold red", markup=False)
    if faults:
        console.print(f"plan {summary['plan_id']}: {len(faults)} faults")
        raise typer.Exit(AUDIT)
    console.print(f"plan {summary['plan_id']}: {len(record.contacts)} contacts checked, no fault found")
