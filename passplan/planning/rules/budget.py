"""The contacts that start on one UTC day cost no more than the budget of a day."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from passplan.planning.days import Day, days_of
from passplan.planning.hooks import Draft
from passplan.planning.problem import Problem
from passplan.planning.rules.rows import Row, rows_of
from passplan.planning.rules.terms import Terms


@dataclass(frozen=True)
class BudgetNeed:
    """What may be spent on each of ``days``."""

    per_day: float
    days: tuple[Day, ...]


def budget_needs(draft: Draft) -> Iterator[BudgetNeed]:
    """One need where the policy states a budget."""
    per_day = draft.run.policy.budget_per_day
    if per_day is not None:
        yield BudgetNeed(per_day, tuple(days_of(draft.run)))


def budget(problem: Problem) -> Terms:
    """One row for each day whose contacts could cost more. A budget of 0 leaves those that cost nothing."""
    return Terms(rows=tuple(rows_of("budget", _day_rows(problem, need)) for need in problem.needs_of(BudgetNeed)))


def _day_rows(problem: Problem, need: BudgetNeed) -> Iterator[Row]:
    options = problem.options
    for day in need.days:
        mine = np.flatnonzero((options.start_s >= day.start_s) & (options.start_s < day.end_s) & (options.cost > 0.0))
        yield f"the budget of {need.per_day:g} for {day.date}", mine, options.cost[mine], need.per_day
