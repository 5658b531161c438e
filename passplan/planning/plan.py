"""The planning floor's front door: from a run, its windows and their links to a plan with its tables."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from passplan.inputs.calendar_records import Request
from passplan.inputs.records import datetime64
from passplan.inputs.run import Run
from passplan.link.choice import WindowLink
from passplan.planning.clock import Clock
from passplan.planning.options import OptionSet, find_options, window_arrays
from passplan.planning.portfolio import Progress, find_plan
from passplan.planning.problem import Antennas, CommandNeed, Fleet, Limits, Problem, RequestNeed
from passplan.planning.result import PlanResult
from passplan.planning.tables import contacts_table, segments_table, unused_table


@dataclass(frozen=True, eq=False)
class Plan:
    """A plan as tables (columns as the design fixes them) with the result and the problem behind it."""

    contacts: pd.DataFrame
    segments: pd.DataFrame
    unused: pd.DataFrame
    result: PlanResult
    problem: Problem


def make_plan(
    run: Run, windows: pd.DataFrame, links: Sequence[WindowLink], progress: Progress | None = None,
) -> Plan:
    """Plan the contacts of a run.

    ``windows`` is the table of the geometry floor and ``links`` the links of its rows, in order. The
    policy's time limit covers everything from here to the chosen contacts. ``progress(value, bound, gap)``
    is called as they move.
    """
    policy = run.policy
    clock = Clock(policy.time_limit_s)
    with clock.stage("options"):
        problem, option_set = build_problem(run, windows, links)
    limits = Limits(policy.gap, policy.time_limit_s, policy.threads, policy.seed)
    result = find_plan(problem, limits, clock=clock, progress=progress)
    contacts = contacts_table(run, windows, problem, option_set, result)
    return Plan(
        contacts, segments_table(run, problem, option_set, result, contacts),
        unused_table(run, windows, problem, option_set, result), result, problem)


def build_problem(run: Run, windows: pd.DataFrame, links: Sequence[WindowLink]) -> tuple[Problem, OptionSet]:
    """The problem of a run, and its options with the link choices behind them."""
    craft = list(run.spacecraft.values())
    fleet = Fleet(
        names=tuple(run.spacecraft), weight=np.array([c.weight for c in craft], dtype=float),
        generation_mb_per_s=np.array([c.generation_mb_per_s for c in craft], dtype=float),
        capacity_mb=np.array([c.storage_mb for c in craft], dtype=float),
        start_fill_mb=np.array([c.start_fill_mb for c in craft], dtype=float))
    antennas = Antennas(
        names=tuple(run.antennas),
        prepare_s=np.array([math.ceil(a.prepare_s) for a in run.antennas.values()], dtype=np.int64),
        release_s=np.array([math.ceil(a.release_s) for a in run.antennas.values()], dtype=np.int64))
    arrays = window_arrays(run, windows)
    option_set = find_options(run, arrays, antennas, links)
    problem = Problem(
        horizon_s=run.horizon_s, fleet=fleet, antennas=antennas, windows=arrays, options=option_set.options,
        requests=tuple(_request_need(run, request) for request in run.requests), commands=_command_needs(run),
        spill_cost_per_mb=run.policy.spill_cost_per_mb, worth_per_money=run.policy.worth_per_money)
    return problem, option_set


def _request_need(run: Run, request: Request) -> RequestNeed:
    antennas = frozenset(
        k for k, (name, antenna) in enumerate(run.antennas.items())
        if request.antenna in (None, name) and request.site in (None, antenna.site))
    earliest_s, latest_s = (
        float((datetime64(t) - run.start_utc) / np.timedelta64(1, "ms")) / 1000.0
        for t in (request.earliest_utc, request.latest_utc))
    return RequestNeed(
        request.name, list(run.spacecraft).index(request.spacecraft), antennas, request.service,
        math.ceil(earliest_s), math.floor(latest_s), math.ceil(request.min_duration_s))


def _command_needs(run: Run) -> tuple[CommandNeed, ...]:
    """The intervals of all spacecraft that take part; one that was left out cannot be commanded anyway."""
    needs = []
    for k, (name, craft) in enumerate(run.spacecraft.items()):
        every_h = craft.command_every_h or run.policy.command_every_h
        if every_h is None or name in run.left_out:
            continue
        last_s = 0
        if craft.last_command_utc is not None:
            last_s = int(math.floor(
                float((datetime64(craft.last_command_utc) - run.start_utc) / np.timedelta64(1, "ms")) / 1000.0))
        needs.append(CommandNeed(k, round(every_h * 3600.0), last_s))
    return tuple(needs)
