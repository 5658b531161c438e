"""Turns what went wrong into one clear line and the exit code that belongs to it."""

from __future__ import annotations

import functools
import traceback
from collections.abc import Callable
from typing import ParamSpec, TypeVar

import typer

from passplan.inputs.elements.resolve import ElementsError
from passplan.inputs.errors import InputError
from passplan.operations.nightly import BusyError
from passplan.planning.steps import AuditFailedError
from passplan.report.directory import DirectoryError

INTERNAL, INPUT, ELEMENTS, AUDIT, WRITING, WARNED, OVERDUE = 1, 2, 3, 6, 7, 8, 10

P = ParamSpec("P")
R = TypeVar("R")


def exit_code(fault: BaseException) -> int:
    """The exit code of a fault; what is not foreseen is an internal error."""
    for kinds, code in (
        (InputError, INPUT),
        (ElementsError, ELEMENTS),
        (AuditFailedError, AUDIT),
        ((DirectoryError, BusyError), WRITING),
    ):
        if isinstance(fault, kinds):
            return code
    return INTERNAL


def reports_faults(command: Callable[P, R]) -> Callable[P, R]:
    """A command whose faults end in a line on standard error and an exit code, never in a raw traceback."""

    @functools.wraps(command)
    def guarded(*args: P.args, **kwargs: P.kwargs) -> R:
        try:
            return command(*args, **kwargs)
        except (typer.Exit, typer.Abort, KeyboardInterrupt):
            raise
        except Exception as fault:
            code = exit_code(fault)
            if code == INTERNAL:
                typer.echo(traceback.format_exc(), err=True)
                typer.echo(f"passplan: internal error: {fault!r}; please report it with the lines above", err=True)
            else:
                for line in str(fault).splitlines():
                    typer.echo(f"passplan: {line}", err=True)
            raise typer.Exit(code) from fault

    return guarded


def end_with_warnings(warned: bool, strict: bool) -> None:
    """Exit code 8 where there were warnings and the user asked to be strict."""
    if warned and strict:
        typer.echo("passplan: done, with warnings (--strict)", err=True)
        raise typer.Exit(WARNED)
