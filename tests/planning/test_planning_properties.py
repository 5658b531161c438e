"""What must hold of optimal plans, whatever the instance."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from planning_cases import random_problem

from passplan.planning.option_table import Options
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Antennas, Fleet, Limits, Problem, Windows
from passplan.planning.value import account

EXACT = Limits(gap=0.0)
SEEDS = range(300, 325)


def optimum(problem: Problem) -> float:
    result = find_plan(problem, EXACT)
    assert result.status in ("optimal", "empty")
    return result.value


def close(a: float, b: float) -> bool:
    return a == pytest.approx(b, rel=1e-5, abs=1e-5)


@pytest.mark.parametrize("seed", SEEDS)
def test_a_window_less_never_raises_the_optimum(seed: int) -> None:
    problem = random_problem(seed, needs=False)
    kept = problem.options.take(problem.options.window != 0)
    assert optimum(problem.with_options(kept)) <= optimum(problem) + 1e-5


@pytest.mark.parametrize("seed", SEEDS)
def test_an_antenna_less_never_raises_the_optimum(seed: int) -> None:
    problem = random_problem(seed, needs=False)
    kept = problem.options.take(problem.options.antenna != 0)
    assert optimum(problem.with_options(kept)) <= optimum(problem) + 1e-5


@pytest.mark.parametrize("seed", SEEDS)
def test_more_storage_never_lowers_the_optimum(seed: int) -> None:
    problem = random_problem(seed, needs=False)
    larger = replace(problem, fleet=replace(problem.fleet, capacity_mb=problem.fleet.capacity_mb + 250.0))
    assert optimum(larger) >= optimum(problem) - 1e-5


@pytest.mark.parametrize("seed", SEEDS)
def test_scaling_weights_spill_and_money_scales_the_value(seed: int) -> None:
    problem = random_problem(seed)
    scaled = replace(
        problem, fleet=replace(problem.fleet, weight=4.0 * problem.fleet.weight),
        spill_cost_per_mb=4.0 * problem.spill_cost_per_mb, worth_per_money=4.0 * problem.worth_per_money)
    assert close(optimum(scaled), 4.0 * optimum(problem))


@pytest.mark.parametrize("seed", SEEDS)
def test_order_and_names_change_nothing_else(seed: int) -> None:
    problem = random_problem(seed)
    assert close(optimum(shuffled(problem, seed)), optimum(problem))


def shuffled(problem: Problem, seed: int) -> Problem:
    """The same problem with spacecraft, antennas, windows and options renamed and in another order."""
    rng = np.random.default_rng(seed)
    fleet, antennas, windows, options = problem.fleet, problem.antennas, problem.windows, problem.options
    craft, dish, window, option = (rng.permutation(len(x)) for x in (fleet, antennas, windows, options))
    new_craft, new_dish, new_window = (np.argsort(order) for order in (craft, dish, window))
    taken = options.take(option)
    return replace(
        problem,
        fleet=Fleet(tuple(f"x{k}" for k in craft), fleet.weight[craft], fleet.generation_mb_per_s[craft],
                    fleet.capacity_mb[craft], fleet.start_fill_mb[craft]),
        antennas=Antennas(tuple(f"y{k}" for k in dish)),
        windows=Windows(tuple(f"z{k}" for k in window), new_craft[windows.spacecraft[window]],
                        new_dish[windows.antenna[window]], windows.start_s[window], windows.end_s[window]),
        options=_renumbered(taken, new_window, new_craft, new_dish),
        requests=tuple(replace(r, spacecraft=int(new_craft[r.spacecraft]) if r.spacecraft >= 0 else -1,
                               antennas=frozenset(int(new_dish[a]) for a in r.antennas)) for r in problem.requests),
        commands=tuple(replace(c, spacecraft=int(new_craft[c.spacecraft])) for c in problem.commands),
        too_tight=np.argsort(option)[problem.too_tight])


def _renumbered(options: Options, window: np.ndarray, craft: np.ndarray, dish: np.ndarray) -> Options:
    return replace(options, window=window[options.window], spacecraft=craft[options.spacecraft],
                   antenna=dish[options.antenna])


@pytest.mark.parametrize("share", [0.3, 1.0])
@pytest.mark.parametrize("seed", SEEDS)
def test_worth_of_what_is_left_never_lowers_what_comes_down_and_what_is_kept_together(seed: int, share: float) -> None:
    problem = random_problem(seed, needs=False)
    kept = replace(problem, left_worth_share=share)
    without = find_plan(problem, EXACT).chosen
    assert optimum(kept) >= account(kept, without).value - 1e-5
    by_search = find_plan(kept, Limits(gap=0.0, exact_options=0, time_limit_s=300.0, search_rounds=20))
    assert by_search.bound >= optimum(kept) - 1e-5
    assert close(by_search.value, optimum(kept))
