"""``passplan nightly``: the unattended run."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path
from typing import Annotated

import typer

from passplan.cli.faults import OVERDUE, end_with_warnings, reports_faults
from passplan.cli.terminal import StartOption, StrictOption, instant


@reports_faults
def command(
    config: Annotated[Path, typer.Argument(help="The nightly config (TOML).", show_default=False)],
    start: StartOption = None,
    status: Annotated[
        bool, typer.Option("--status", help="Only report the last run; exit 10 where no good one is recent.")
    ] = False,
    strict: StrictOption = False,
) -> None:
    """Plan, audit and write the night's plan unattended; ``latest`` always points to the last good one."""
    from passplan.operations.nightly import read_nightly, run_nightly
    from passplan.planning.steps import plan_run

    nightly = read_nightly(config)
    if status:
        _report_status(nightly.plans, nightly.watch_h)
        return
    record, out = run_nightly(nightly, plan_run, start=instant(start, "--start"))
    summary = record.summary
    gap = "" if summary["gap"] is None else f", gap {100 * summary['gap']:.2f} %"
    typer.echo(f"{out}: {summary['contacts']} contacts, {summary['volume_mb']:.1f} MB, {summary['status']}{gap}")
    notes = [f"{s['name']}: {s['sentence']}" for s in summary["shortfalls"]] + summary["warnings"]
    for note in notes:
        typer.echo(f"passplan: {note}", err=True)
    end_with_warnings(bool(notes), strict)


def _report_status(plans: Path, watch_h: float) -> None:
    from passplan.operations.status import hours_since_good, read_status

    status = read_status(plans)
    if status:
        ended = f"last run ended {status.get('ended_utc')} with exit code {status.get('exit_code')}"
        typer.echo(ended + (f": {status['message']}" if status.get("message") else ""))
    since_h = hours_since_good(status, datetime.now(UTC))
    if since_h is None or since_h > watch_h:
        last = "no good run yet" if since_h is None else f"last good run {since_h:.1f} h ago"
        typer.echo(f"passplan: {plans}: {last}; watched time is {watch_h:g} h", err=True)
        raise typer.Exit(OVERDUE)
    typer.echo(f"last good plan {status.get('last_good_plan')}, {since_h:.1f} h ago")
