"""``passplan plan``: the main job."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Annotated, Any

import typer

from passplan.cli.faults import WARNED, end_with_warnings, reports_faults
from passplan.cli.terminal import StartOption, StrictOption, instant, progress, stdout


@reports_faults
def command(
    config: Annotated[Path, typer.Argument(help="The run config (TOML).", show_default=False)],
    out: Annotated[Path, typer.Option("--out", help="The plan directory to write; it appears whole or not at all.")],
    start: StartOption = None,
    gap: Annotated[
        float | None, typer.Option("--gap", help="Stop at this gap, in place of the policy's (0.01 = 1 %).")
    ] = None,
    time_limit_s: Annotated[
        float | None, typer.Option("--seconds", help="Time limit of the search, in place of the policy's.")
    ] = None,
    against: Annotated[
        Path | None,
        typer.Option("--against", metavar="DIR", help="An earlier plan: ids are taken over, changes are marked."),
    ] = None,
    full: Annotated[bool, typer.Option("--full", help="Print every contact.")] = False,
    spacecraft: Annotated[str | None, typer.Option("--spacecraft", help="Print only this spacecraft, in full.")] = None,
    antenna: Annotated[str | None, typer.Option("--antenna", help="Print only this antenna, in full.")] = None,
    site: Annotated[str | None, typer.Option("--site", help="Print only the antennas of this site, in full.")] = None,
    picture: Annotated[
        Path | None,
        typer.Option("--picture", metavar="FILE", help="Also draw the antennas' day to FILE (.svg or .png)."),
    ] = None,
    as_json: Annotated[bool, typer.Option("--json", help="Print the summary as JSON, for machines.")] = False,
    quiet: Annotated[bool, typer.Option("--quiet", help="Print no report.")] = False,
    replace: Annotated[bool, typer.Option("--replace", help="Replace a plan that is already at --out.")] = False,
    strict: StrictOption = False,
) -> None:
    """Plan the contacts of the horizon, audit the plan, report it, and write it to a directory as a draft."""
    from passplan.inputs.load import load_run
    from passplan.planning.interrupt import leave
    from passplan.planning.steps import plan_run
    from passplan.report.directory import check_free, read_plan, write_plan
    from passplan.report.export import Wanted, draw
    from passplan.report.selection import Selection
    from passplan.report.terminal import print_plan

    check_free(out, replace=replace)
    changes: dict[str, Any] = {"gap": gap, "time_limit_s": time_limit_s}
    earlier = None if against is None else read_plan(against)
    run = load_run(config, start=instant(start, "--start"), policy={k: v for k, v in changes.items() if v is not None})
    with progress(quiet) as report:
        record = plan_run(run, report, against=earlier)
    write_plan(record, out, replace=replace)
    if record.summary["stopped_by_hand"]:
        typer.echo("Stopped by hand: this is the best plan found until then.", err=True)
    if picture is not None:
        draw(Wanted(record, run, out), picture)
    if as_json:
        typer.echo(json.dumps(record.summary, indent=2, ensure_ascii=False))
    elif not quiet:
        console = stdout()
        print_plan(record, console, full=full, selection=Selection(spacecraft, antenna, site))
        console.print(f"\nPlan written to {out}", style="bold")
    warned = bool(record.summary["warnings"] or record.summary["shortfalls"])
    if record.summary["stopped_by_hand"]:
        leave(WARNED if warned and strict else 0)
    end_with_warnings(warned, strict)
