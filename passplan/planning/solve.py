"""Solve the exact model tier by tier through OR-Tools' MathOpt (HiGHS), which gives the same plan every time it ends by its gap."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass

import numpy as np
from ortools.math_opt import model_pb2
from ortools.math_opt.python import mathopt

from passplan.planning.clock import Clock
from passplan.planning.model import PlanModel, build_model
from passplan.planning.problem import Limits, Problem
from passplan.planning.rules.terms import Terms
from passplan.planning.shortfalls import least_points

# Points are sums of whole requests and seconds over hours; closer than this they are the same.
_POINTS_TOLERANCE = 1e-7


@dataclass(frozen=True)
class Solved:
    """What the solver says: options chosen (None if it found nothing), and the bound it proved.

    ``points_bound`` is a proven floor of tier 1; ``value_bound`` a proven ceiling of tier 2 among plans
    with no more points than ``points``, and infinite if nothing was proven.
    """

    chosen: tuple[int, ...] | None
    points: float
    points_bound: float
    value_bound: float


def solve_exactly(
    problem: Problem, terms: Terms, limits: Limits, clock: Clock, points: float, seconds: float,
) -> Solved:
    """Least points, then most value with the points kept, in ``seconds``. ``points`` is what a known plan has.

    Tier 1 is skipped when the known plan already has the least points that the options allow.
    """
    stop = clock.elapsed_s() + seconds
    with clock.stage("model"):
        model = build_model(problem, terms)
    floor = least_points(terms)
    chosen: tuple[int, ...] | None = None
    with clock.stage("solve"):
        if points > floor + _POINTS_TOLERANCE:
            first = _solve(model.proto(tier=1), model, limits, 0.5 * (stop - clock.elapsed_s()), 0.0)
            floor = max(floor, first.bound if first.bound is not None else floor)
            if first.chosen is not None and first.objective < points - _POINTS_TOLERANCE:
                points, chosen = first.objective, first.chosen
        if clock.elapsed_s() >= stop:
            return Solved(chosen, points, min(floor, points), float("inf"))
        limit = points + _POINTS_TOLERANCE if np.any(model.points) else None
        second = _solve(model.proto(tier=2, points_limit=limit), model, limits, stop - clock.elapsed_s(), limits.gap)
    bound = float("inf") if second.bound is None else second.bound
    return Solved(second.chosen if second.chosen is not None else chosen, points, min(floor, points), bound)


@dataclass(frozen=True)
class _Answer:
    chosen: tuple[int, ...] | None
    objective: float
    bound: float | None


def _solve(proto: model_pb2.ModelProto, model: PlanModel, limits: Limits, seconds: float, gap: float) -> _Answer:
    parameters = mathopt.SolveParameters(
        time_limit=dt.timedelta(seconds=max(seconds, 0.01)), random_seed=limits.seed, relative_gap_tolerance=gap)
    result = mathopt.solve(mathopt.Model.from_model_proto(proto), mathopt.SolverType.HIGHS, params=parameters)
    bound: float | None = result.best_objective_bound()
    if bound is None or not np.isfinite(bound):
        bound = None
    if not result.has_primal_feasible_solution():
        return _Answer(None, 0.0, bound)
    solution = result.variable_values()
    count = int(model.integer.sum())
    chosen = tuple(sorted(v.id for v, x in solution.items() if v.id < count and x > 0.5))
    return _Answer(chosen, float(result.objective_value()), bound)
