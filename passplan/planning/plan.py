"""The planning floor's front door: from a run, its windows and their links to a plan with its tables."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from passplan.inputs.run import Run
from passplan.link.choice import WindowLink
from passplan.link.conflicts import Interference, InterferenceCrowd, InterferencePair
from passplan.planning.change_cost import with_changes
from passplan.planning.clock import Clock
from passplan.planning.contradictions import Contradiction, RulesConflictError, find_contradictions
from passplan.planning.fair_share import with_fair_floor
from passplan.planning.fleet import fleet_of
from passplan.planning.hooks import Draft
from passplan.planning.horizon import seconds_of
from passplan.planning.options import OptionSet, find_options, window_arrays
from passplan.planning.portfolio import Progress, find_plan
from passplan.planning.problem import Antennas, CommandNeed, Conflict, Crowd, Fleet, Limits, Problem
from passplan.planning.result import PlanResult
from passplan.planning.rules import BLOCKS, CAPS, NEEDS, SILENCES, STANDBYS, WISHES, all_terms
from passplan.planning.rules.requests import request_need
from passplan.planning.tables import contacts_table, segments_table
from passplan.planning.turnarounds import too_tight
from passplan.planning.unused import unused_table

Report = Callable[[str, int, int], None]
_CONTRADICTIONS_S = 10.0
_FAIRNESS_SHARE = 0.25
# Of the time limit, at most this part goes into more than one option for each window.
_OPTIONS_SHARE = 0.3


@dataclass(frozen=True, eq=False)
class Plan:
    """A plan as tables (columns as the design fixes them) with the result and the problem behind it.

    ``planned_s`` is how long it took to choose the contacts: what the time limit is for.
    """

    contacts: pd.DataFrame
    segments: pd.DataFrame
    unused: pd.DataFrame
    result: PlanResult
    problem: Problem
    planned_s: float
    contradictions: tuple[Contradiction, ...] = ()
    fair_floor: float | None = None


def make_plan(
    run: Run, windows: pd.DataFrame, links: Sequence[WindowLink], progress: Report | None = None,
    interference: Interference | None = None,
) -> Plan:
    """Plan the contacts of a run.

    ``windows`` is the table of the geometry floor and ``links`` the links of its rows, in order. Spacecraft
    without an orbit take no part. The policy's time limit covers everything from here to the chosen
    contacts. ``interference`` says who must not send at once. ``progress(stage, done_s, total_s)`` is
    called as value, bound and gap move. Where requirements are missed, some seconds more go into naming those
    that contradict each other; raises :class:`RulesConflictError` if the policy wants no plan then.
    """
    policy = run.policy
    clock = Clock(policy.time_limit_s)
    with clock.stage("options"):
        problem, option_set = build_problem(
            run, windows, links, interference, clock=clock.part(_OPTIONS_SHARE * policy.time_limit_s))
    limits = Limits(policy.gap, policy.time_limit_s, policy.threads, policy.seed, policy.search_rounds)
    floor = None
    if policy.fairness == "max_min":
        with clock.stage("fairness"):
            problem, floor = with_fair_floor(run, problem, limits, _FAIRNESS_SHARE * clock.left_s())
    result = find_plan(problem, limits, clock=clock, progress=_reporter(progress, clock, policy.time_limit_s))
    planned_s = clock.elapsed_s()
    terms = all_terms(problem)
    found: tuple[Contradiction, ...] = ()
    if result.shortfalls:
        seconds = min(_CONTRADICTIONS_S, policy.time_limit_s)
        found = find_contradictions(problem, terms, result.chosen, limits, seconds)
    if found and policy.when_rules_conflict == "stop":
        raise RulesConflictError(one.sentence for one in found)
    contacts = contacts_table(run, windows, problem, option_set, terms, result)
    return Plan(
        contacts, segments_table(run, problem, option_set, result, contacts),
        unused_table(run.start_utc, windows, problem, option_set, terms, result), result, problem,
        planned_s, found, floor)


def _reporter(report: Report | None, clock: Clock, limit_s: float) -> Progress | None:
    if report is None:
        return None

    def show(value: float, bound: float, gap: float) -> None:
        stage = f"planning: value {value:,.0f}, bound {bound:,.0f}, gap {100.0 * gap:.2f} %"
        report(stage, round(min(clock.elapsed_s(), limit_s)), round(limit_s))

    return show


def build_problem(
    run: Run, windows: pd.DataFrame, links: Sequence[WindowLink], interference: Interference | None = None, *,
    clock: Clock | None = None,
) -> tuple[Problem, OptionSet]:
    """The problem of a run, and its options with the link choices behind them.

    After the time of ``clock`` windows give one option each.
    """
    fleet = fleet_of(run)
    antennas = Antennas(
        names=tuple(run.antennas), beams=np.array([a.beams for a in run.antennas.values()], dtype=np.int64))
    disturbing = interference or Interference()
    arrays = window_arrays(run, windows, fleet, antennas)
    blocks = [block for find in BLOCKS for block in find(run)]
    wishes = [wish for find in WISHES for wish in find(run)]
    silences = [silence for find in SILENCES for silence in find(run)]
    caps = [cap for find in CAPS for cap in find(run)]
    standbys = [standby for find in STANDBYS for standby in find(run)]
    option_set = find_options(run, arrays, fleet, antennas, links, blocks, wishes, caps, silences, standbys, clock)
    problem = Problem(
        horizon_s=run.horizon_s, fleet=fleet, antennas=antennas, windows=arrays, options=option_set.options,
        requests=tuple(request_need(run, fleet, one) for one in run.requests if one.handover_overlap_s is None),
        commands=_command_needs(run, fleet),
        conflicts=tuple(_conflict(fleet, antennas, pair) for pair in disturbing.pairs),
        crowds=tuple(_crowd(fleet, antennas, crowd) for crowd in disturbing.crowds),
        spill_cost_per_mb=run.policy.spill_cost_per_mb, left_worth_share=run.policy.left_worth_share,
        worth_per_money=run.policy.worth_per_money,
        too_tight=too_tight(run, windows, antennas, option_set.options))
    problem = with_changes(run, problem)
    draft = Draft(run, windows, problem, option_set.candidates, tuple(blocks))
    needs = (*problem.needs, *(need for find in NEEDS for need in find(draft)))
    return replace(problem, needs=needs), option_set


def _conflict(fleet: Fleet, antennas: Antennas, pair: InterferencePair) -> Conflict:
    name = f"{pair.victim} on {pair.antenna} beside {pair.interferer}, C/I {pair.worst_db:.0f} dB"
    return Conflict(
        name, fleet.names.index(pair.victim), antennas.names.index(pair.antenna), fleet.names.index(pair.interferer),
        pair.start_s, pair.end_s)


def _crowd(fleet: Fleet, antennas: Antennas, crowd: InterferenceCrowd) -> Crowd:
    return Crowd(
        f"{crowd.victim} on {crowd.antenna} beside {', '.join(crowd.interferers)}, C/I of all of them",
        fleet.names.index(crowd.victim), antennas.names.index(crowd.antenna),
        tuple(fleet.names.index(name) for name in crowd.interferers), crowd.shares, crowd.start_s, crowd.end_s)


def _command_needs(run: Run, fleet: Fleet) -> tuple[CommandNeed, ...]:
    needs = []
    for k, name in enumerate(fleet.names):
        craft = run.spacecraft[name]
        every_h = craft.command_every_h or run.policy.command_every_h
        if every_h is None:
            continue
        last = craft.last_command_utc
        last_s = 0 if last is None else math.floor(seconds_of(run, last))
        needs.append(CommandNeed(k, round(every_h * 3600.0), last_s))
    return tuple(needs)
