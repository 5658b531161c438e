"""``passplan check``: reads everything and reports the health of the inputs."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from passplan.cli.faults import end_with_warnings, reports_faults
from passplan.cli.terminal import StartOption, StrictOption, instant, stdout


@reports_faults
def command(
    config: Annotated[Path, typer.Argument(help="The run config (TOML).", show_default=False)],
    start: StartOption = None,
    strict: StrictOption = False,
) -> None:
    """Read everything a run needs and report its health: element ages, duplicates, masks, radios and antennas."""
    from passplan.inputs.load import load_run
    from passplan.report.health import print_health

    run = load_run(config, start=instant(start, "--start"))
    warned = print_health(run, stdout())
    end_with_warnings(warned, strict)
