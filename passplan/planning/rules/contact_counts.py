"""So many contacts of a spacecraft in one orbit, and on one day; a contact counts where it starts."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from passplan.planning.arrays import Integers
from passplan.planning.hooks import Draft
from passplan.planning.orbits import day_edges_s, orbit_edges_s
from passplan.planning.problem import Problem
from passplan.planning.rules.rows import Row, rows_of
from passplan.planning.rules.terms import Lane, Terms


@dataclass(frozen=True)
class CountNeed:
    """At most ``most`` contacts of ``spacecraft`` start between two neighbours of ``edges_s``; ``per`` is a word."""

    spacecraft: int
    per: str
    edges_s: tuple[float, ...]
    most: int


def count_needs(draft: Draft) -> Iterator[CountNeed]:
    """One record per spacecraft and limit. Contacts before the horizon do not count."""
    for k, name in enumerate(draft.problem.fleet.names):
        craft = draft.run.spacecraft[name]
        if craft.contacts_per_orbit is not None:
            yield CountNeed(k, "orbit", orbit_edges_s(draft.run, name), craft.contacts_per_orbit)
        if craft.contacts_per_day is not None:
            yield CountNeed(k, "day", day_edges_s(draft.run), craft.contacts_per_day)


def contact_counts(problem: Problem) -> Terms:
    """One row per orbit or day in which more contacts could be had than are allowed.

    Where a spacecraft with one link is allowed one, it is a lane that a contact holds for the orbit or day.
    """
    single = [need for need in problem.needs_of(CountNeed) if _is_single(problem, need)]
    return Terms(
        lanes=tuple(_lane(problem, need) for need in single),
        rows=tuple(rows_of(f"contacts_per_{need.per}", _rows(problem, need))
                   for need in problem.needs_of(CountNeed) if not _is_single(problem, need)))


def _is_single(problem: Problem, need: CountNeed) -> bool:
    return need.most == 1 and int(problem.fleet.links[need.spacecraft]) == 1


def _lane(problem: Problem, need: CountNeed) -> Lane:
    own, part = _parts(problem, need)
    return Lane(_name(problem, need), f"contacts_per_{need.per}", own, part, part + 1, need.spacecraft)


def _rows(problem: Problem, need: CountNeed) -> Iterator[Row]:
    options = problem.options
    own, part = _parts(problem, need)
    for k in np.unique(part).tolist():
        mine = own[part == k]
        most = int(problem.fleet.links[need.spacecraft]) * _most_apart(options.start_s[mine], options.end_s[mine])
        if most > need.most:
            yield _name(problem, need), mine, np.ones(len(mine)), need.most


def _parts(problem: Problem, need: CountNeed) -> tuple[Integers, Integers]:
    """The spacecraft's options, and the number of the orbit or day in which each counts."""
    own = np.flatnonzero(problem.options.spacecraft == need.spacecraft)
    return own, np.searchsorted(np.array(need.edges_s), problem.options.start_s[own], side="right")


def _name(problem: Problem, need: CountNeed) -> str:
    return f"{problem.fleet.names[need.spacecraft]}'s allowance of contacts per {need.per}, {need.most},"


def _most_apart(start_s: Integers, end_s: Integers) -> int:
    """How many of the intervals one link can use at most without overlap: always the one that ends first."""
    count, reached = 0, -np.inf
    for k in np.argsort(end_s, kind="stable").tolist():
        if start_s[k] >= reached:
            count, reached = count + 1, float(end_s[k])
    return count
