"""Run the planning floor on a yardstick instance and write the solution for its scorer.

    python tests/benchmarks/optimiser.py INSTANCE.npz --seconds 60 --solution OUT.csv

The instance is an .npz file of windows with stepped rates; contacts start and end at a window's ends or on
the grid of ``cut_s``. Prints the curve of gap against time and a summary; the last line is ``bound NUMBER``.
"""

from __future__ import annotations

import argparse
import csv
import resource
import time
from bisect import bisect_left, insort
from pathlib import Path

import numpy as np
from ortools.sat.python import cp_model

from passplan.planning.arrays import offsets_of, ragged_ranges
from passplan.planning.clock import Clock
from passplan.planning.option_table import Options
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Antennas, Fleet, Limits, Problem, Windows
from passplan.planning.value import account

# Building the straightforward model takes about 30 microseconds for each option and interval, and memory.
_MOST_FOR_CP = 400_000


def read_instance(path: Path) -> Problem:
    """Every option that the instance's rules allow: a complete set, so that our bound is valid for all plans."""
    data = np.load(path)
    step_s, cut_s, shortest_s = int(data["step_s"]), int(data["cut_s"]), int(data["min_contact_s"])
    spans = []
    for w, (low, high) in enumerate(zip(data["start_s"].tolist(), data["end_s"].tolist(), strict=True)):
        instants = sorted({low, high, *(range(-(-low // cut_s) * cut_s, high, cut_s) if cut_s else ())})
        spans += [(w, a, b) for k, a in enumerate(instants) for b in instants[k + 1:] if b - a >= shortest_s]
    window, start_s, end_s = np.array(spans, dtype=np.int64).reshape(-1, 3).T
    first = (start_s + int(data["acquisition_s"])) // step_s
    counts = np.maximum(0, end_s // step_s - first)
    rates = ragged_ranges(data["rate_offset"][window] - data["start_s"][window] // step_s + first, counts)
    steps = ragged_ranges(first, counts)
    options = Options(
        window=window, spacecraft=data["spacecraft"][window], antenna=data["antenna"][window], start_s=start_s,
        end_s=end_s, prepare_s=np.full(len(window), int(data["setup_s"])), release_s=np.zeros(len(window)),
        downlink=np.ones(len(window), dtype=bool), command=np.zeros(len(window), dtype=bool),
        cost=np.zeros(len(window)), piece_offset=offsets_of(counts), piece_start_s=steps * step_s,
        piece_end_s=(steps + 1) * step_s, piece_rate_mb_per_s=data["rate_mb_per_s"][rates].astype(float))
    crafts, dishes = len(data["priority"]), int(data["antenna"].max(initial=-1)) + 1
    return Problem(
        horizon_s=int(data["horizon_s"]),
        fleet=Fleet(tuple(f"craft-{k}" for k in range(crafts)), data["priority"], data["generation_mb_per_s"],
                    data["capacity_mb"], data["start_fill_mb"]),
        antennas=Antennas(tuple(f"dish-{k}" for k in range(dishes))),
        windows=Windows(tuple(map(str, range(len(data["spacecraft"])))), data["spacecraft"], data["antenna"],
                        data["start_s"], data["end_s"]),
        options=options, spill_cost_per_mb=float(data["spill_cost"]))


def plain_greedy(problem: Problem) -> list[int]:
    """A hand planner's rule: what could bring down most comes first, if its antenna and spacecraft are free."""
    options = problem.options
    carried = np.add.reduceat(
        np.append(options.piece_rate_mb_per_s * (options.piece_end_s - options.piece_start_s), 0.0),
        np.minimum(options.piece_offset[:-1], len(options.piece_start_s))) * (np.diff(options.piece_offset) > 0)
    busy: dict[tuple[str, int], list[tuple[int, int]]] = {}
    chosen = []
    for o in np.argsort(-carried * problem.fleet.weight[options.spacecraft], kind="stable").tolist():
        a, b = int(options.start_s[o]), int(options.end_s[o])
        holds = ((("dish", int(options.antenna[o])), a - int(options.prepare_s[o]), b + int(options.release_s[o])),
                 (("craft", int(options.spacecraft[o])), a, b))
        if all(_is_free(busy.get(key, []), low, high) for key, low, high in holds):
            for key, low, high in holds:
                insort(busy.setdefault(key, []), (low, high))
            chosen.append(o)
    return chosen


def _is_free(busy: list[tuple[int, int]], low: int, high: int) -> bool:
    at = bisect_left(busy, (low, low))
    return not (at > 0 and busy[at - 1][1] > low) and not (at < len(busy) and busy[at][0] < high)


def straightforward_cp(problem: Problem, seconds: float, threads: int) -> tuple[list[int], float]:
    """CP-SAT with an optional interval for each option and ``add_no_overlap`` for each antenna and spacecraft.

    Storage is the simplest that is not absurd: a spacecraft sends no more over the day than it holds and makes. Returns
    the options chosen and the seconds that building took, which count against ``seconds``.
    """
    began = time.monotonic()
    options, fleet = problem.options, problem.fleet
    model = cp_model.CpModel()
    lanes: dict[tuple[str, int], list[cp_model.IntervalVar]] = {}
    carried: list[list[cp_model.LinearExprT]] = [[] for _ in range(len(fleet))]
    used = []
    for o in range(len(options)):
        a, b = int(options.start_s[o]), int(options.end_s[o])
        x = model.new_bool_var("")
        used.append(x)
        low, high = a - int(options.prepare_s[o]), b + int(options.release_s[o])
        for key, start, end in ((("dish", int(options.antenna[o])), low, high),
                                (("craft", int(options.spacecraft[o])), a, b)):
            lanes.setdefault(key, []).append(model.new_optional_fixed_size_interval_var(start, end - start, x, ""))
        span = slice(options.piece_offset[o], options.piece_offset[o + 1])
        volume = float((options.piece_rate_mb_per_s[span] * (
            options.piece_end_s[span] - options.piece_start_s[span])).sum())
        carried[int(options.spacecraft[o])].append(round(volume) * x)
    for intervals in lanes.values():
        model.add_no_overlap(intervals)
    worth = []
    for k, volumes in enumerate(carried):
        there_is = int(fleet.start_fill_mb[k] + fleet.generation_mb_per_s[k] * problem.horizon_s)
        sent = model.new_int_var(0, there_is, "")
        model.add(sent <= sum(volumes))
        worth.append(float(fleet.weight[k]) * sent)
    model.maximize(sum(worth))
    built_s = time.monotonic() - began
    solver = cp_model.CpSolver()
    solver.parameters.max_time_in_seconds = max(0.1, seconds - built_s)
    solver.parameters.num_workers = threads
    if solver.solve(model) not in (cp_model.OPTIMAL, cp_model.FEASIBLE):
        return [], built_s
    return [o for o, x in enumerate(used) if solver.value(x)], built_s


def print_baselines(problem: Problem, bound: float, seconds: float, threads: int) -> None:
    """Values that others reach on the same options, as our accounts have them, against our bound."""
    rows: list[tuple[str, float, float]] = []
    for name, find in (
            ("largest volume first", lambda: plain_greedy(problem)),
            ("CP-SAT, add_no_overlap", lambda: straightforward_cp(problem, seconds, threads)[0])):
        if name.startswith("CP") and len(problem.options) > _MOST_FOR_CP:
            print(f"  {name:24s} not run: over {_MOST_FOR_CP} options, building the model takes all the time")
            continue
        began = time.monotonic()
        value = account(problem, find()).value
        rows.append((name, value, time.monotonic() - began))
    for name, value, took_s in rows:
        gap = 100.0 * (1.0 - value / bound)
        print(f"  {name:24s} objective {value:14.1f}  gap to our bound {gap:8.3f} %  {took_s:.1f} s")


def main() -> None:
    """Plan one instance."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("instance", type=Path)
    parser.add_argument("--seconds", type=float, default=60.0)
    parser.add_argument("--gap", type=float, default=1e-5, help="stop at this relative gap")
    parser.add_argument("--threads", type=int, default=2)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--solution", type=Path)
    parser.add_argument("--no-baselines", action="store_true", help="only our own plan")
    args = parser.parse_args()
    clock = Clock(args.seconds)
    problem = read_instance(args.instance)
    print(f"{len(problem.fleet)} spacecraft x {len(problem.antennas)} antennas: {len(problem.windows)} windows, "
          f"{len(problem.options)} options")
    print("gap against time (the time limit counts from before the instance is read):")
    last = 0.0

    def tell(value: float, bound: float, gap: float) -> None:
        nonlocal last
        if clock.elapsed_s() >= 1.15 * last:
            last = clock.elapsed_s()
            print(f"{last:8.1f} s  value {value:14.1f}  bound {bound:14.1f}  gap {100.0 * gap:8.4f} %", flush=True)

    result = find_plan(problem, Limits(args.gap, args.seconds, args.threads, args.seed), clock=clock, progress=tell)
    options = problem.options
    if args.solution:
        with args.solution.open("w", newline="") as file:
            writer = csv.writer(file)
            writer.writerow(["window", "start_s", "end_s"])
            writer.writerows([int(options.window[o]), int(options.start_s[o]), int(options.end_s[o])]
                             for o in result.chosen)
    seconds = clock.elapsed_s()
    stages = ", ".join(f"{name} {spent:.1f}" for name, spent in result.seconds.items())
    print(f"{result.status} by {result.path}: objective {result.value:.1f}, gap {100.0 * result.gap:.4f} %, "
          f"{len(result.chosen)} contacts")
    print(f"{seconds:.1f} s in all ({stages}), {time.process_time():.1f} s of processor time, "
          f"peak memory {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6:.2f} GB")
    if not args.no_baselines:
        print_baselines(problem, result.bound, args.seconds, args.threads)
    print(f"bound {result.bound:.6f}")


if __name__ == "__main__":
    main()
