"""``passplan whatif``: compares variants of the network."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any

import typer

from passplan.cli.faults import reports_faults
from passplan.cli.terminal import progress, stdout


@reports_faults
def command(
    study_file: Annotated[
        Path, typer.Argument(metavar="STUDY", help="The study (TOML): a base run and its variants.", show_default=False)
    ],
    out: Annotated[Path | None, typer.Option("--out", help="Write the comparison to this new directory.")] = None,
    gap: Annotated[
        float | None, typer.Option("--gap", help="Stop each plan at this gap, in place of the policy's.")
    ] = None,
    time_limit_s: Annotated[float | None, typer.Option("--seconds", help="Time limit for each plan.")] = None,
) -> None:
    """Plan variants of the network over the same days and say which differences the proofs support."""
    from passplan.planning.steps import plan_run
    from passplan.report.directory import check_free
    from passplan.studies.result import print_comparison, write_comparison
    from passplan.studies.study import read_study
    from passplan.studies.whatif import run_study

    if out is not None:
        check_free(out)
    study = read_study(study_file)
    changes: dict[str, Any] = {"gap": gap, "time_limit_s": time_limit_s}
    with progress() as report:
        comparison = run_study(
            study, plan_run, policy={k: v for k, v in changes.items() if v is not None}, progress=report
        )
    console = stdout()
    print_comparison(study, comparison, console)
    if out is not None:
        write_comparison(study, comparison, out)
        console.print(f"\nComparison written to {out}", style="bold")
