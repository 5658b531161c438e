"""How long a spacecraft's transmitter may be on: in one contact, in one orbit, and in any span of so many hours.

Of a spacecraft with several links the seconds of all its transmitters add up.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from passplan.inputs.run import Run
from passplan.planning.arrays import Floats, Integers
from passplan.planning.hooks import Cap, Draft
from passplan.planning.on_air import OnAir
from passplan.planning.orbits import orbit_edges_s
from passplan.planning.problem import Problem
from passplan.planning.rules.spans import within_spans
from passplan.planning.rules.terms import Rows, Terms


@dataclass(frozen=True)
class OrbitSendingNeed:
    """The transmitter of ``spacecraft`` is on for at most ``most_s`` between two neighbours of ``edges_s``."""

    spacecraft: int
    edges_s: tuple[float, ...]
    most_s: float


@dataclass(frozen=True)
class SpanSendingNeed:
    """The transmitter of ``spacecraft`` is on for at most ``most_s`` in any ``span_s`` seconds."""

    spacecraft: int
    span_s: float
    most_s: float


def sending_caps(run: Run) -> Iterator[Cap]:
    """The limit on one contact goes to the making of options."""
    for name in run.orbits:
        most_s = run.spacecraft[name].sending_per_contact_s
        if most_s is not None:
            yield Cap(name, math.floor(most_s), "sending_per_contact",
                      f"{name} may send for {most_s:g} s in one contact, and no shorter contact is of use")


def sending_needs(draft: Draft) -> Iterator[OrbitSendingNeed | SpanSendingNeed]:
    """One record per spacecraft and limit. Sending before the horizon does not count."""
    for k, name in enumerate(draft.problem.fleet.names):
        craft = draft.run.spacecraft[name]
        if craft.sending_per_orbit_s is not None:
            yield OrbitSendingNeed(k, orbit_edges_s(draft.run, name), craft.sending_per_orbit_s)
        if craft.sending_per_span_s is not None:
            yield SpanSendingNeed(k, craft.sending_span_h * 3600.0, craft.sending_per_span_s)


def sending_time(problem: Problem) -> Terms:
    """Rows over orbits, and over every span that begins with a sending or ends with one.

    As a span moves, what is sent inside it changes in straight lines whose slope changes only where an edge of
    the span meets an edge of sending, and grows no further where its left edge meets a start or its right edge an
    end: it is most at one of these. (Own derivation.)
    """
    rows = [_in_orbits(problem, orbit) for orbit in problem.needs_of(OrbitSendingNeed)]
    rows += [_in_spans(problem, span) for span in problem.needs_of(SpanSendingNeed)]
    return Terms(rows=tuple(rows))


def _in_orbits(problem: Problem, need: OrbitSendingNeed) -> Rows:
    mine, start_s, end_s = _sending(problem, need.spacecraft)
    edges = np.array([-np.inf, *need.edges_s, np.inf])
    name = f"{problem.fleet.names[need.spacecraft]}'s allowance of {need.most_s:g} s of sending per orbit"
    return within_spans(
        "sending_per_orbit", name, mine, start_s, end_s, np.ones(len(mine)), edges[:-1], edges[1:],
        np.full(len(edges) - 1, need.most_s), int(problem.fleet.links[need.spacecraft]))


def _in_spans(problem: Problem, need: SpanSendingNeed) -> Rows:
    mine, start_s, end_s = _sending(problem, need.spacecraft)
    low_s = _span_starts(start_s, end_s, need.span_s)
    name = (f"{problem.fleet.names[need.spacecraft]}'s allowance of {need.most_s:g} s of sending in any "
            f"{need.span_s / 3600.0:g} h")
    return within_spans(
        "sending_per_span", name, mine, start_s, end_s, np.ones(len(mine)), low_s, low_s + need.span_s,
        np.full(len(low_s), need.most_s), int(problem.fleet.links[need.spacecraft]))


def _span_starts(start_s: Integers, end_s: Integers, span_s: float) -> Floats:
    """Where spans begin that have to be looked at; none that lies beyond all sending but for what another holds."""
    if len(start_s) == 0:
        return np.zeros(0)
    first, last = float(start_s.min()), float(end_s.max())
    low_s = np.unique(np.concatenate([start_s, end_s - span_s]))
    # A span that reaches beyond the last sending holds no more than one that just reaches it, and so in front.
    if last - first <= span_s:
        return np.array([first])
    return np.asarray(low_s[(low_s >= first) & (low_s <= last - span_s)])


def _sending(problem: Problem, spacecraft: int) -> tuple[Integers, Integers, Integers]:
    """Options of a spacecraft that send, with the seconds in which the transmitter is on."""
    on_air = problem.needs_of(OnAir)[0]
    mine = np.flatnonzero((problem.options.spacecraft == spacecraft) & (on_air.end_s > on_air.start_s))
    return mine, on_air.start_s[mine], on_air.end_s[mine]
