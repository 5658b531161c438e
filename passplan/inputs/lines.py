"""Text as numbered lines, and a lid on how many faults of one file are listed."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from passplan.inputs.errors import Findings

_MOST_FAULTS = 50


def numbered_lines(text: str) -> Iterator[tuple[int, str]]:
    """The lines of ``text`` with their numbers from 1, whatever the line endings.

    ``str.splitlines`` would also split at form feeds and at some Unicode marks, and the numbers would
    no longer be those that an editor shows.
    """
    unified = text.replace("\r\n", "\n").replace("\r", "\n")
    return enumerate(unified.split("\n"), start=1)


@contextmanager
def few_faults(file: str | Path, findings: Findings, most: int = _MOST_FAULTS) -> Iterator[Findings]:
    """Findings of one file: at most ``most`` of its faults are passed on, then one line says how many more.

    A file of another kind under the right name has a fault in every line; a million of them would hide
    the faults of the other files.
    """
    own = Findings()
    yield own
    for problem in own.problems[:most]:
        findings.problem(problem.file, problem.where, problem.value, problem.remedy)
    left = len(own.problems) - most
    if left > 0:
        findings.problem(file, "", None, f"{left} more faults here are not listed; correct these first")
    for warning in own.warnings:
        findings.warn(warning)


def shortened(text: str, width: int = 80) -> str:
    """``text`` in one line and cut to ``width`` characters, so that a hostile one does not end up in a message."""
    shown = "".join(c if c.isprintable() else " " for c in text[:width])
    return " ".join(shown.split()) + ("..." if len(text) > width else "")
