"""The consoles that commands print to, and the progress of long stages."""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from datetime import datetime
from typing import Annotated

import typer
from rich.console import Console
from rich.progress import BarColumn, Progress, SpinnerColumn, TextColumn, TimeElapsedColumn

from passplan.inputs.errors import InputError, Problem
from passplan.inputs.records import parse_instant

Report = Callable[[str, int, int], None]
_PIPED_WIDTH = 100

StartOption = Annotated[
    str | None, typer.Option("--start", metavar="UTC", help="Start of the horizon, in place of the config's.")
]
StrictOption = Annotated[bool, typer.Option("--strict", help="Exit with 8 where there are warnings.")]


def stdout() -> Console:
    """Standard output. Rich leaves colour out when it is piped or NO_COLOR is set."""
    return _console(sys.stdout.isatty(), stderr=False)


def instant(text: str | None, option: str) -> datetime | None:
    """An instant from an option, with its zone; raises InputError in one line."""
    if text is None:
        return None
    try:
        return parse_instant(text)
    except ValueError as fault:
        raise InputError([Problem(option, "", text, str(fault))]) from None


@contextmanager
def progress(quiet: bool = False) -> Iterator[Report]:
    """A bar on standard error for the stage at work; silent where nobody is watching."""
    console = _console(sys.stderr.isatty(), stderr=True)
    if quiet or not console.is_terminal:
        yield lambda _stage, _done, _total: None
        return
    columns = (SpinnerColumn(), TextColumn("{task.description}"), BarColumn(), TimeElapsedColumn())
    with Progress(*columns, console=console, transient=True) as bar:
        task = bar.add_task("reading", total=None)

        def report(stage: str, done: int, total: int) -> None:
            bar.update(task, description=stage, completed=done, total=total or None)

        yield report


def _console(is_terminal: bool, *, stderr: bool) -> Console:
    width = None if is_terminal or "COLUMNS" in os.environ else _PIPED_WIDTH
    return Console(stderr=stderr, width=width, highlight=False)
