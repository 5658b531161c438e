"""What is wrong with the user's input, said in one line each: file, key or row, value, what to do."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path


@dataclass(frozen=True)
class Problem:
    """One fault in one place of one input file.

    ``where`` is a dotted key (``spacecraft[3].weight``), a row (``row 12, column end_utc``) or a line
    (``line 7``); ``remedy`` is a short imperative sentence that says what to do.
    """

    file: str
    where: str
    value: object
    remedy: str

    def __str__(self) -> str:
        place = f"{self.file}: {self.where}" if self.where else self.file
        value = "" if self.value is None else f" = {_short(self.value)}"
        return f"{place}{value}: {self.remedy}"


class PassplanError(Exception):
    """A fault that the user can do something about; ``exit_code`` is what the command line ends with."""

    exit_code = 1


class InputError(PassplanError):
    """Every fault that was found, reported in one go."""

    exit_code = 2

    def __init__(self, problems: Iterable[Problem]) -> None:
        self.problems = tuple(problems)
        super().__init__("\n".join(map(str, self.problems)))


class Findings:
    """Collects faults and warnings while reading, so that several are reported in one go."""

    def __init__(self) -> None:
        self.problems: list[Problem] = []
        self.warnings: list[str] = []
        # Records that were faulty themselves: that their names are missing elsewhere is no news.
        self.unsound: set[str] = set()
        # A file of junk gives a fault per line, so looking for repeats must not take ever longer.
        self._lines_noted: set[str] = set()

    def problem(self, file: str | Path, where: str, value: object, remedy: str) -> None:
        """Note a fault; reading goes on, and :meth:`raise_if_any` reports it with the others."""
        found = Problem(str(file), where, value, remedy)
        if str(found) not in self._lines_noted:
            self._lines_noted.add(str(found))
            self.problems.append(found)

    def warn(self, message: str) -> None:
        """Note something the user should see but that does not stop the run."""
        if message not in self.warnings:
            self.warnings.append(message)

    def raise_if_any(self) -> None:
        """Raise :class:`InputError` if a fault was noted."""
        if self.problems:
            raise InputError(self.problems)


def nearest(word: str, known: Iterable[str]) -> str:
    """A remedy that names the known key or name nearest to ``word``."""
    names = sorted(known)
    close = difflib.get_close_matches(word.lower(), [n.lower() for n in names], n=1, cutoff=0.5)
    if close:
        return f"did you mean {next(n for n in names if n.lower() == close[0])!r}?"
    shown = ", ".join(names[:12]) + (", ..." if len(names) > 12 else "")
    return f"use one of: {shown}" if names else "nothing of that kind is defined"


def _short(value: object, width: int = 60) -> str:
    text = repr(value)
    return text if len(text) <= width else text[: width - 3] + "..."
