"""The few kinds of thing a rule can ask for.

A rule is one module with one function ``terms(problem) -> Terms``. It speaks only in these kinds; the
model turns each kind into rows, the bound prices it, and the search keeps it feasible, so that none of
them knows a rule by name:

===========  =======================================  ==============================  =====================
kind         says                                     model                           search
===========  =======================================  ==============================  =====================
Removal      these options cannot be used             never in the model              never a candidate
Lane         at most one option at a time             one row per maximal clique      busy intervals; prices
Rows         amounts add up to at most a limit        the rows                        running loads; prices
Wanted       one of these options, or a shortfall     covering row with slack         bit of a label (1)
Recurrence   covered time, or a shortfall             counting rows with slack        last end in a label
AtLeast      amounts add up to a need, or shortfall   covering row with slack         totals; rewards
===========  =======================================  ==============================  =====================

(1) Where several spacecraft could meet it: totals and rewards, as of what they owe together.

Shortfalls are counted in points and are minimised before any value is looked at (tier 1).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, Protocol

import numpy as np

from passplan.planning.arrays import Floats, Integers
from passplan.planning.problem import Problem

WantedKind = Literal["request", "pin", "frozen", "loaded", "emergency"]


@dataclass(frozen=True, eq=False)
class Removal:
    """Options that a rule takes out, with a reason code of the ``unused`` table and a sentence."""

    options: Integers
    reason: str
    detail: str


@dataclass(frozen=True, eq=False)
class Lane:
    """A resource for one at a time: option ``options[k]`` holds it in ``[start_s[k], end_s[k])``.

    ``kind`` is the reason code that is given when the lane stands in the way. ``owner`` is the spacecraft
    whose own sequence of contacts the lane is, or -1 where spacecraft compete for it.
    """

    name: str
    kind: str
    options: Integers
    start_s: Integers
    end_s: Integers
    owner: int = -1


@dataclass(frozen=True, eq=False)
class Rows:
    """Linear limits in bulk: in row r the amounts of the chosen options add up to at most ``limit[r]``.

    Row r has the entries ``offset[r] : offset[r + 1]`` of ``options`` and ``amounts`` (each option once per row);
    neither amounts nor limits are negative. ``kind`` is the reason code that is given when a row stands in the
    way, and ``names[r]`` says in a few words what is used up. See ``rules/rows.py`` for ways to make them.
    """

    kind: str
    names: tuple[str, ...]
    offset: Integers
    options: Integers
    amounts: Floats
    limit: Floats

    def __post_init__(self) -> None:
        if len(self.offset) != len(self.names) + 1 or len(self.limit) != len(self.names):
            raise ValueError("rows need a name and a limit each, and one offset more")
        if np.any(self.amounts < 0.0) or np.any(self.limit < 0.0):
            raise ValueError("amounts and limits of rows must not be negative")

    def __len__(self) -> int:
        return len(self.names)


@dataclass(frozen=True, eq=False)
class Wanted:
    """At least one of ``options``, all of the spacecraft ``owner``, or a shortfall of ``points``.

    ``reason`` says why there are no options, if the rule knows. ``kind`` says who wants it.
    """

    name: str
    owner: str
    options: Integers
    points: float = 1.0
    reason: str = ""
    kind: WantedKind = "request"


@dataclass(frozen=True, eq=False)
class Recurrence:
    """Every instant of ``[from_s, until_s)`` lies in ``[start_s, end_s + every_s)`` of a chosen option.

    All are of the spacecraft ``name``. Each second that no chosen option covers is ``1 / every_s`` points of shortfall,
    so that a whole missed interval weighs as much as a missed request.

    A ``request`` for contacts that hand over to each other wants the instants in ``[start_s, end_s - overlap_s)``
    instead, and missing them all, ``every_s`` seconds, weighs ``points``: where such parts of contacts follow each
    other without a gap, each contact starts ``overlap_s`` before the one before it ends.
    """

    name: str
    options: Integers
    start_s: Integers
    end_s: Integers
    every_s: int
    from_s: int
    until_s: int
    request: str = ""
    overlap_s: int = 0
    points: float = 1.0

    @property
    def reach_s(self) -> int:
        """For how long after its end an option covers, which may be negative."""
        return -self.overlap_s if self.request else self.every_s


@dataclass(frozen=True, eq=False)
class AtLeast:
    """The amounts of the chosen options add up to at least ``need``; what is missing is a shortfall.

    ``points`` is what missing all of it weighs; missing a part weighs in proportion. ``kind`` is that of the
    shortfall, ``unit`` what is counted. Amounts are not negative, ``need`` is positive.
    """

    kind: str
    name: str
    unit: str
    options: Integers
    amounts: Floats
    need: float
    points: float = 1.0


@dataclass(frozen=True, eq=False)
class Terms:
    """What one rule, or all of them together, asks for."""

    removals: tuple[Removal, ...] = ()
    lanes: tuple[Lane, ...] = ()
    rows: tuple[Rows, ...] = ()
    wanted: tuple[Wanted, ...] = ()
    recurrences: tuple[Recurrence, ...] = ()
    guarantees: tuple[AtLeast, ...] = ()

    def __add__(self, other: Terms) -> Terms:
        return Terms(
            self.removals + other.removals, self.lanes + other.lanes, self.rows + other.rows,
            self.wanted + other.wanted, self.recurrences + other.recurrences, self.guarantees + other.guarantees)


class Rule(Protocol):
    """One operational rule."""

    def __call__(self, problem: Problem) -> Terms:
        """What the rule asks for in this problem."""
        ...
