"""Independent parts of the network: spacecraft between which nothing can ever be in the way.

Two spacecraft belong together if options of both hold one lane at the same time, add to the same row, or serve the
same requirement; and so does, at one remove after another, everything that hangs together with them. Parts
are planned apart: their plans fit together, and their values and bounds add up.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace

import numpy as np

from passplan.planning.arrays import Flags, Integers, offsets_of
from passplan.planning.problem import Problem
from passplan.planning.rules.terms import AtLeast, Lane, Recurrence, Removal, Rows, Terms, Wanted

# Parts smaller than this are planned together: a solver takes them apart again, and starting it costs time.
_LEAST_OPTIONS = 1_500


@dataclass(frozen=True, eq=False)
class Part:
    """A part of a problem: ``options`` are the numbers of its options in the whole."""

    problem: Problem
    terms: Terms
    options: Integers


def independent_parts(problem: Problem, terms: Terms) -> list[Part]:
    """The parts of a problem, in the order of their first spacecraft; one part if everything hangs together.

    Together they have all options and all spacecraft; a spacecraft without options, and a requirement that no option
    serves, go to the first part.
    """
    count = len(problem.fleet)
    if len(problem.options) == 0 or count < 2:
        return [Part(problem, terms, np.arange(len(problem.options)))]
    label = _joined(count, _pairs(problem, terms))
    options = np.bincount(problem.options.spacecraft, minlength=count)
    part = _gathered(label, options)
    if part.max() == 0:
        return [Part(problem, terms, np.arange(len(problem.options)))]
    return [part_of(problem, terms, part == k, first=k == 0) for k in range(int(part.max()) + 1)]


def _joined(count: int, pairs: Iterable[tuple[Integers, Integers]]) -> Integers:
    """Numbers of spacecraft joined by pairs of them: the lowest of all that hang together."""
    above = list(range(count))

    def root(k: int) -> int:
        while above[k] != k:
            above[k] = above[above[k]]
            k = above[k]
        return k

    for one, other in pairs:
        for key in np.unique(one * count + other).tolist():
            a, b = root(key // count), root(key % count)
            above[max(a, b)] = min(a, b)
    return np.array([root(k) for k in range(count)], dtype=np.int64)


def _pairs(problem: Problem, terms: Terms) -> Iterable[tuple[Integers, Integers]]:
    """Pairs of spacecraft that belong together for one reason, as two arrays; enough of them to join all that do."""
    craft = problem.options.spacecraft
    for lane in terms.lanes:
        # Those that hold the lane without a break hang together, each with the next.
        order = np.argsort(lane.start_s, kind="stable")
        mine, reached = craft[lane.options[order]], np.maximum.accumulate(lane.end_s[order])
        meets = lane.start_s[order][1:] < reached[:-1]
        yield mine[:-1][meets], mine[1:][meets]
    for rows in terms.rows:
        mine = craft[rows.options]
        within = np.diff(np.repeat(np.arange(len(rows)), np.diff(rows.offset))) == 0
        yield mine[:-1][within], mine[1:][within]
    for served in [*(w.options for w in terms.wanted), *(g.options for g in terms.guarantees)]:
        yield craft[served][:-1], craft[served][1:]


def _gathered(label: Integers, options: Integers) -> Integers:
    """Part numbers of spacecraft: components in the order of their first spacecraft, small ones put together."""
    part = np.zeros(len(label), dtype=np.int64)
    order = np.unique(label, return_index=True)
    number, held = -1, _LEAST_OPTIONS
    for component in order[0][np.argsort(order[1], kind="stable")].tolist():
        mine = label == component
        if held >= _LEAST_OPTIONS and options[mine].sum() > 0:
            number, held = number + 1, 0
        part[mine] = max(number, 0)
        held += int(options[mine].sum())
    return part


def part_of(problem: Problem, terms: Terms, crafts: Flags, *, first: bool) -> Part:
    """The options of some spacecraft, with what is ``first`` of its own; the other spacecraft hold nothing.

    Of requirements that others could serve too, only these options are left.
    """
    kept = np.flatnonzero(crafts[problem.options.spacecraft])
    place = np.full(len(problem.options), -1, dtype=np.int64)
    place[kept] = np.arange(len(kept))
    fleet = problem.fleet
    zero = np.where(crafts, 1.0, 0.0)
    part = replace(
        problem, options=problem.options.take(kept), too_tight=np.zeros((0, 2), dtype=np.int64),
        extra_price=problem.extra_price[kept] if len(problem.extra_price) else problem.extra_price,
        base_worth=problem.base_worth if first else 0.0,
        fleet=replace(fleet, weight=fleet.weight * zero, generation_mb_per_s=fleet.generation_mb_per_s * zero,
                      start_fill_mb=fleet.start_fill_mb * zero, links=np.where(crafts, fleet.links, 1),
                      streams=tuple(own if crafts[k] else () for k, own in enumerate(fleet.streams))))
    return Part(part, _terms(problem, terms, place, crafts, first=first), kept)


def _terms(problem: Problem, terms: Terms, place: Integers, crafts: Flags, *, first: bool) -> Terms:
    def here(options: Integers) -> bool:
        return bool(np.any(place[options] >= 0)) if len(options) else first

    lanes: list[Lane] = []
    for lane in terms.lanes:
        mine = place[lane.options] >= 0
        if np.any(mine):
            lanes.append(replace(
                lane, options=place[lane.options[mine]], start_s=lane.start_s[mine], end_s=lane.end_s[mine]))
    recurrences: list[Recurrence] = []
    for need in terms.recurrences:
        if here(need.options) if len(need.options) else crafts[problem.fleet.names.index(need.name)]:
            recurrences.append(replace(need, options=place[need.options]))
    wanted: list[Wanted] = [
        replace(w, options=place[w.options][place[w.options] >= 0]) for w in terms.wanted if here(w.options)]
    removals: list[Removal] = [
        replace(r, options=place[r.options][place[r.options] >= 0]) for r in terms.removals]
    return Terms(
        removals=tuple(removals), lanes=tuple(lanes), rows=tuple(_rows(rows, place) for rows in terms.rows),
        wanted=tuple(wanted), recurrences=tuple(recurrences),
        guarantees=tuple(_guarantee(g, place) for g in terms.guarantees if here(g.options)))


def _guarantee(promise: AtLeast, place: Integers) -> AtLeast:
    mine = place[promise.options] >= 0
    return replace(promise, options=place[promise.options[mine]], amounts=promise.amounts[mine])


def _rows(rows: Rows, place: Integers) -> Rows:
    """The rows that have an option here, with these options."""
    row = np.repeat(np.arange(len(rows)), np.diff(rows.offset))
    mine = place[rows.options] >= 0
    kept = np.unique(row[mine])
    counts = np.bincount(row[mine], minlength=len(rows))[kept]
    return replace(
        rows, names=tuple(rows.names[r] for r in kept.tolist()), offset=offsets_of(counts.astype(np.int64)),
        options=place[rows.options[mine]], amounts=rows.amounts[mine], limit=rows.limit[kept])
