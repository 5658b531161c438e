"""The command line: one small file for each command, gathered here.

The commands import the floors below inside their bodies: the solver and the sky take seconds to import, and
``--help``, ``--version`` and shell completion, which need neither, must answer at once.
"""

from __future__ import annotations

import sys
from typing import Annotated

import typer

from passplan._version import __version__
from passplan.cli import audit, check, export, link, nightly, plan, show, whatif, windows

app = typer.Typer(
    name="passplan",
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    context_settings={"help_option_names": ["-h", "--help"]},
    help="Plan the daily contacts between a fleet of satellites and its ground antennas, with a proven bound.",
    epilog="Exit codes: 0 done, 1 internal error, 2 invalid input, 3 element sets missing or too old, "
    "5 no usable plan in time, 6 audit failed, 7 could not write or lock, 8 warnings under --strict, "
    "10 no good nightly run within the watched time.",
)


def _print_version(wanted: bool) -> None:
    if wanted:
        typer.echo(f"passplan {__version__}")
        raise typer.Exit


@app.callback()
def _options(
    version: Annotated[
        bool, typer.Option("--version", callback=_print_version, is_eager=True, help="Show the version and leave.")
    ] = False,
) -> None:
    pass


app.command("check")(check.command)
app.command("windows")(windows.command)
app.command("link")(link.command)
app.command("plan")(plan.command)
app.command("audit")(audit.command)
app.command("show")(show.command)
app.command("export")(export.command)
app.command("whatif")(whatif.command)
app.command("nightly")(nightly.command)


def main() -> None:
    """Entry point. A terminal that cannot show a character gets a substitute rather than a crash."""
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
    app()
