"""Contacts that somebody asked for: any contact that fits the span, the service and the length will do."""

from __future__ import annotations

import math
from collections.abc import Collection, Iterator
from dataclasses import replace

import numpy as np

from passplan.inputs.calendar_records import Request
from passplan.inputs.run import Run
from passplan.planning.arrays import Flags
from passplan.planning.hooks import Standby, Wish
from passplan.planning.horizon import seconds_of
from passplan.planning.option_table import Options
from passplan.planning.problem import Fleet, Problem, RequestNeed, Service
from passplan.planning.rules.standby import NO_STANDBY, backed, one_standby
from passplan.planning.rules.terms import Terms, Wanted


def requests(problem: Problem) -> Terms:
    """One wanted term per request; a request that no option fits keeps an empty one, and is a shortfall.

    Of the contacts that hold a stand-by for it no more than one is used.
    """
    wanted, rows = [], []
    for need in problem.requests:
        reason = "the spacecraft takes no part in this run" if need.spacecraft < 0 else ""
        found = np.flatnonzero(fits(problem.options, need))
        if need.standbys is not None:
            rows.append(one_standby(need.name, found))
            if not len(found) and np.any(fits(problem.options, replace(need, standbys=None))):
                reason = NO_STANDBY
        wanted.append(Wanted(need.name, need.craft_name, found, need.points, reason))
    return Terms(wanted=tuple(wanted), rows=tuple(rows))


def request_need(run: Run, fleet: Fleet, request: Request) -> RequestNeed:
    """A request in the numbers of the problem and in whole seconds within its span."""
    craft = fleet.names.index(request.spacecraft) if request.spacecraft in fleet.names else -1
    return RequestNeed(
        request.name, request.spacecraft, craft, _numbers(run, requested_antennas(run, request)),
        offered_service(request), math.ceil(seconds_of(run, request.earliest_utc)),
        math.floor(seconds_of(run, request.latest_utc)), math.ceil(request.min_duration_s), request.fixed,
        request.points, _numbers(run, able_antennas(run, request)) if request.standby else None)


def _numbers(run: Run, antennas: Collection[str]) -> frozenset[int]:
    return frozenset(k for k, name in enumerate(run.antennas) if name in antennas)


def request_standbys(run: Run) -> Iterator[Standby]:
    """What a request with a stand-by must have to choose from."""
    for request in run.requests:
        if request.standby:
            yield Standby(
                request.spacecraft, requested_antennas(run, request), able_antennas(run, request),
                offered_service(request), math.ceil(seconds_of(run, request.earliest_utc)),
                math.floor(seconds_of(run, request.latest_utc)))


def request_wishes(run: Run) -> Iterator[Wish]:
    """A requested contact must be able to start at the earliest and to end at the latest instant."""
    for request in run.requests:
        yield Wish(
            request.spacecraft, None, math.ceil(seconds_of(run, request.earliest_utc)),
            math.floor(seconds_of(run, request.latest_utc)), request.handover_overlap_s or 0)


def requested_antennas(run: Run, request: Request) -> frozenset[str]:
    """The antennas that can serve a request."""
    return frozenset(
        name for name in able_antennas(run, request)
        if request.antenna in (None, name) and request.site in (None, run.antennas[name].site))


def able_antennas(run: Run, request: Request) -> frozenset[str]:
    """The antennas that can do what a request asks for, wherever they stand."""
    return frozenset(name for name, one in run.antennas.items() if one.ranging or request.service != "ranging")


def offered_service(request: Request) -> Service:
    """What the contact of a request offers: ranging sends and receives."""
    return "both" if request.service == "ranging" else request.service


def fits(options: Options, need: RequestNeed) -> Flags:
    """Which options meet a request, shape (m,)."""
    served = np.ones(len(options), dtype=bool)
    if need.service in ("downlink", "both"):
        served &= options.downlink
    if need.service in ("command", "both"):
        served &= options.command
    if need.standbys is not None:
        served &= backed(options, need.service, need.standbys)
    if need.fixed:
        served &= (options.start_s == need.earliest_s) & (options.end_s == need.latest_s)
    return np.asarray(
        served
        & (options.spacecraft == need.spacecraft)
        & np.isin(options.antenna, sorted(need.antennas))
        & (options.start_s >= need.earliest_s)
        & (options.end_s <= need.latest_s)
        & (options.end_s - options.start_s >= need.min_duration_s), dtype=bool)
