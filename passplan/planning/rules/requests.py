"""Contacts that somebody asked for: any contact that fits the span, the service and the length will do."""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np

from passplan.inputs.run import Run
from passplan.planning.hooks import Wish
from passplan.planning.horizon import seconds_of
from passplan.planning.problem import Flags, Options, Problem, RequestNeed
from passplan.planning.rules.terms import Terms, Wanted


def requests(problem: Problem) -> Terms:
    """One wanted term per request; a request that no option fits keeps an empty one, and is a shortfall."""
    wanted = []
    for need in problem.requests:
        reason = "the spacecraft takes no part in this run" if need.spacecraft < 0 else ""
        wanted.append(Wanted(
            need.name, need.craft_name, np.flatnonzero(fits(problem.options, need)), need.points, reason))
    return Terms(wanted=tuple(wanted))


def request_wishes(run: Run) -> Iterator[Wish]:
    """A requested contact must be able to start at the earliest and to end at the latest instant."""
    for request in run.requests:
        yield Wish(
            request.spacecraft, None, math.ceil(seconds_of(run, request.earliest_utc)),
            math.floor(seconds_of(run, request.latest_utc)))


def fits(options: Options, need: RequestNeed) -> Flags:
    """Which options meet a request, shape (m,)."""
    served = np.ones(len(options), dtype=bool)
    if need.service in ("downlink", "both"):
        served &= options.downlink
    if need.service in ("command", "both"):
        served &= options.command
    if need.fixed:
        served &= (options.start_s == need.earliest_s) & (options.end_s == need.latest_s)
    return np.asarray(
        served
        & (options.spacecraft == need.spacecraft)
        & np.isin(options.antenna, sorted(need.antennas))
        & (options.start_s >= need.earliest_s)
        & (options.end_s <= need.latest_s)
        & (options.end_s - options.start_s >= need.min_duration_s), dtype=bool)
