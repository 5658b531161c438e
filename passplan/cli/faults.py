"""Turns what went wrong into clear lines on standard error and the exit code that belongs to it."""

from __future__ import annotations

import functools
import traceback
from collections.abc import Callable
from typing import ParamSpec, TypeVar

import typer

from passplan.inputs.errors import PassplanError

INTERNAL, AUDIT, WARNED, OVERDUE = 1, 6, 8, 10

P = ParamSpec("P")
R = TypeVar("R")


def reports_faults(command: Callable[P, R]) -> Callable[P, R]:
    """A command whose faults end in lines on standard error and an exit code, never in a bare traceback."""

    @functools.wraps(command)
    def guarded(*args: P.args, **kwargs: P.kwargs) -> R:
        try:
            return command(*args, **kwargs)
        except (typer.Exit, typer.Abort, KeyboardInterrupt):
            raise
        except PassplanError as fault:
            for line in str(fault).splitlines():
                typer.echo(f"passplan: {line}", err=True)
            raise typer.Exit(fault.exit_code) from fault
        except Exception as fault:
            typer.echo(traceback.format_exc(), err=True)
            typer.echo(f"passplan: internal error: {fault!r}; please report it with the lines above", err=True)
            raise typer.Exit(INTERNAL) from fault

    return guarded


def end_with_warnings(warned: bool, strict: bool) -> None:
    """Exit code 8 where there were warnings and the user asked to be strict."""
    if warned and strict:
        typer.echo("passplan: done, with warnings (--strict)", err=True)
        raise typer.Exit(WARNED)
