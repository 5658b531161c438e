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
from pathlib import Path

import numpy as np

from passplan.planning.clock import Clock
from passplan.planning.greedy import plan_greedily
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import (
    Antennas,
    Fleet,
    Limits,
    Options,
    Problem,
    Windows,
    offsets_of,
    ragged_ranges,
)
from passplan.planning.rules import all_terms
from passplan.planning.value import account


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


def main() -> None:
    """Plan one instance."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("instance", type=Path)
    parser.add_argument("--seconds", type=float, default=60.0)
    parser.add_argument("--gap", type=float, default=1e-5, help="stop at this relative gap")
    parser.add_argument("--threads", type=int, default=2)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--solution", type=Path)
    args = parser.parse_args()
    clock = Clock(args.seconds)
    problem = read_instance(args.instance)
    print(f"{len(problem.fleet)} spacecraft x {len(problem.antennas)} antennas: {len(problem.windows)} windows, "
          f"{len(problem.options)} options")
    last = 0.0

    def tell(value: float, bound: float, gap: float) -> None:
        nonlocal last
        if clock.elapsed_s() >= 1.1 * last:
            last = clock.elapsed_s()
            print(f"{last:8.1f} s  value {value:14.1f}  bound {bound:14.1f}  gap {100.0 * gap:8.4f} %")

    result = find_plan(problem, Limits(args.gap, args.seconds, args.threads, args.seed), clock=clock, progress=tell)
    seconds = clock.elapsed_s()
    options = problem.options
    if args.solution:
        with args.solution.open("w", newline="") as file:
            writer = csv.writer(file)
            writer.writerow(["window", "start_s", "end_s"])
            writer.writerows([int(options.window[o]), int(options.start_s[o]), int(options.end_s[o])]
                             for o in result.chosen)
    began = time.monotonic()
    greedy = account(problem, plan_greedily(problem, all_terms(problem), Clock(args.seconds))).value
    greedy_s = time.monotonic() - began
    stages = ", ".join(f"{name} {spent:.1f}" for name, spent in result.seconds.items())
    print(f"greedy alone: {greedy:.1f}, gap {100.0 * (1.0 - greedy / result.bound):.3f} % in {greedy_s:.1f} s")
    print(f"{result.status} by {result.path}: objective {result.value:.1f}, gap {100.0 * result.gap:.4f} %, "
          f"{len(result.chosen)} contacts, {seconds:.1f} s ({stages}), "
          f"peak memory {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6:.2f} GB")
    print(f"bound {result.bound:.6f}")


if __name__ == "__main__":
    main()
