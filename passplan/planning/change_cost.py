"""What it costs to change the published plan, contact by contact, and how many changes there are.

A published contact is kept by an option of its spacecraft on its antenna whose edges are within a minute of those
that were published; anything else counts as a change. Changing one costs the policy's ``change_cost`` at the
start of the horizon and half as much every ``change_half_h`` later, so that what is near is left alone.
In the options this is linear: the cost of all changes, less what keeping each contact saves.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from passplan.inputs.run import Run
from passplan.planning.arrays import Floats, Integers
from passplan.planning.horizon import seconds_of
from passplan.planning.problem import Problem

_SAME_S = 60.0


@dataclass(frozen=True, eq=False)
class ChangeNeed:
    """For each option the published contact that it keeps, or -1, shape (m,); what changing each costs in worth."""

    keeps: Integers
    cost: Floats


def with_changes(run: Run, problem: Problem) -> Problem:
    """The problem with the cost of changes in its objective, and with the objectives that the policy names."""
    if run.policy.tiers == "in_order":
        problem = replace(problem, in_order=True, spill_cost_per_mb=0.0, worth_per_money=0.0)
    if not run.published:
        return problem
    options = problem.options
    keeps = np.full(len(options), -1, dtype=np.int64)
    starts_s = np.array([seconds_of(run, item.start_utc) for item in run.published])
    for k, item in enumerate(run.published):
        if item.spacecraft in problem.fleet.names:
            mine = options.spacecraft == problem.fleet.names.index(item.spacecraft)
            mine &= options.antenna == problem.antennas.names.index(item.antenna)
            mine &= np.abs(options.start_s - starts_s[k]) <= _SAME_S
            mine &= np.abs(options.end_s - seconds_of(run, item.end_utc)) <= _SAME_S
            keeps[mine] = k
    halves = np.maximum(starts_s, 0.0) / 3600.0 / run.policy.change_half_h
    need = ChangeNeed(keeps, run.policy.change_cost * 0.5**halves)
    problem = replace(problem, needs=(*problem.needs, need))
    if run.policy.change_cost == 0.0:
        return problem
    saved = np.where(keeps >= 0, need.cost[keeps], 0.0)
    return replace(problem, extra_price=-saved, base_worth=-float(need.cost.sum()))
