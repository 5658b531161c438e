"""Solve the exact model tier by tier through OR-Tools' MathOpt.

The solver is HiGHS; it gives the same plan every time that it ends by its gap. SCIP was slower on every
instance tried, and closed less of the gap; it stands in where HiGHS fails.
"""

from __future__ import annotations

import datetime as dt
import threading
from collections.abc import Sequence
from contextlib import suppress
from dataclasses import dataclass, replace

import numpy as np
from ortools.math_opt import model_pb2
from ortools.math_opt.python import mathopt

from passplan.planning.certificate import ModelCertificate
from passplan.planning.clock import Clock
from passplan.planning.hushed import hushed
from passplan.planning.model import PlanModel, build_model
from passplan.planning.overrated import Overrated
from passplan.planning.problem import Limits, Problem
from passplan.planning.rules.terms import Terms

# Points are sums of whole requests and seconds over hours; closer than this they are the same.
_POINTS_TOLERANCE = 1e-7
# How often the clock is looked at while a solver runs.
_LOOK_S = 0.05
_WRONG = (mathopt.TerminationReason.INFEASIBLE, mathopt.TerminationReason.INFEASIBLE_OR_UNBOUNDED)
_SOLVERS = (mathopt.SolverType.HIGHS, mathopt.SolverType.GSCIP)


@dataclass(frozen=True)
class Solved:
    """What the solver says: options chosen (None if it found nothing), and the bound it proved.

    ``bound`` is a floor of the points (tier 1) or a ceiling of the value (tier 2); infinitely far away if
    nothing was proven.
    """

    chosen: tuple[int, ...] | None
    bound: float
    certificate: ModelCertificate | None = None


def least_shortfall(
    problem: Problem, terms: Terms, limits: Limits, clock: Clock, known: Sequence[int] = (),
) -> Solved:
    """Tier 1: options that leave the fewest points of shortfall; they need not bring anything down.

    ``known`` are the options of a plan to start from.
    """
    model = build_model(problem, terms, storage=False)
    answer = _solve(model.proto(tier=1), model, limits, clock, 0.0, known)
    return Solved(answer.chosen, -float("inf") if answer.bound is None else answer.bound)


def most_value(
    problem: Problem, terms: Terms, limits: Limits, clock: Clock, points: float,
    holds: Sequence[tuple[Problem, float]] = (), overrated: Sequence[Overrated] = (), known: Sequence[int] = (),
) -> Solved:
    """Tier 2: the most valuable options among those with at most ``points`` of shortfall.

    ``holds`` are the same problem with other objectives, each with the value that is not to be given up;
    ``overrated`` are choices of which the model thinks too much. ``known`` are the options of a plan to start from.
    """
    with clock.stage("model"):
        model = build_model(problem, terms, overrated=overrated)
        limit = points + _POINTS_TOLERANCE if np.any(model.points) else None
        unpriced = [replace(one, worth=0.0) for one in overrated]
        held = [(build_model(other, terms, overrated=unpriced).value, least - other.base_worth)
                for other, least in holds]
        proto = model.proto(tier=2, points_limit=limit, holds=held)
    with clock.stage("solve"):
        answer = _solve(proto, model, limits, clock, limits.gap, known)
    if answer.bound is None:
        return Solved(answer.chosen, float("inf"))
    bound = answer.bound + problem.base_worth
    return Solved(answer.chosen, bound, None if holds else ModelCertificate(model, limit, bound))


@dataclass(frozen=True)
class _Answer:
    chosen: tuple[int, ...] | None
    objective: float
    bound: float | None


def _solve(
    proto: model_pb2.ModelProto, model: PlanModel, limits: Limits, clock: Clock, gap: float, known: Sequence[int] = (),
) -> _Answer:
    for solver in _SOLVERS:
        parameters = mathopt.SolveParameters(
            time_limit=dt.timedelta(seconds=max(clock.left_s(), 0.01)), random_seed=limits.seed,
            relative_gap_tolerance=gap)
        result = _run(proto, solver, parameters, clock, known)
        if clock.stopped:
            break
        if result is None:
            # HiGHS gives up on a sound model now and then (kError); the next one takes over.
            continue
        if result.has_primal_feasible_solution() or result.termination.reason not in _WRONG:
            return _answer(result, model)
        # A plan is known, so there is one: the solver has fallen over its own tolerances.
    return _Answer(None, 0.0, None)


def _run(
    proto: model_pb2.ModelProto, solver: mathopt.SolverType, parameters: mathopt.SolveParameters, clock: Clock,
    known: Sequence[int],
) -> mathopt.SolveResult | None:
    """The solver's result; None where it raised something, or the clock was stopped by hand.

    HiGHS cannot be interrupted: after a stop it is left to run out behind.
    """
    outcome: list[mathopt.SolveResult] = []

    def work() -> None:
        # The errors of the solvers share no type.
        with suppress(Exception):
            model = mathopt.Model.from_model_proto(proto)
            hint = mathopt.SolutionHint(variable_values={model.get_variable(o): 1.0 for o in known})
            start = mathopt.ModelSolveParameters(solution_hints=[hint] if len(known) else [])
            outcome.append(mathopt.solve(model, solver, params=parameters, model_params=start))

    thread = threading.Thread(target=work, daemon=True)
    with hushed():
        thread.start()
        while thread.is_alive() and not clock.stopped:
            thread.join(_LOOK_S)
    return outcome[0] if outcome else None


def _answer(result: mathopt.SolveResult, model: PlanModel) -> _Answer:
    bound: float | None = result.best_objective_bound()
    if bound is None or not np.isfinite(bound):
        bound = None
    if not result.has_primal_feasible_solution():
        return _Answer(None, 0.0, bound)
    solution = result.variable_values()
    count = int(model.integer.sum())
    chosen = tuple(sorted(v.id for v, x in solution.items() if v.id < count and x > 0.5))
    return _Answer(chosen, float(result.objective_value()), bound)
