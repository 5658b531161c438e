"""Plan a yardstick instance with every rule of the house on it, each in the way of a plan that heeds none.

    python tests/benchmarks/rules.py INSTANCE.npz --seconds 180 --seed 1 [--costs --cost-seconds 20]

Prints for each rule by how much a plan without rules breaks it, then the objectives in order with value, bound, gap
and the seconds that each got. With ``--costs`` each rule is left off in turn: its cost is the value without it less the
value with all, from short runs of equal length.
"""

from __future__ import annotations

import argparse
import resource
import time
from dataclasses import replace
from pathlib import Path

import numpy as np
from house import House, priced, published
from optimiser import read_instance

from passplan.planning.clock import Clock
from passplan.planning.greedy import plan_greedily
from passplan.planning.maps import storage_maps
from passplan.planning.occupancy import first_conflict
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits, Problem
from passplan.planning.result import PlanResult
from passplan.planning.rules import all_terms
from passplan.planning.search.ready import compiled_in_time
from passplan.planning.several_links import arrays_of
from passplan.planning.shortfalls import find_shortfalls, total_points
from passplan.planning.value import account


def greedy(problem: Problem) -> np.ndarray:
    """A quick plan, as option numbers."""
    terms, maps, clock = all_terms(problem), storage_maps(problem), Clock(120.0)
    compiled_in_time(clock)
    chosen = plan_greedily(problem, terms, clock, maps=maps, arrays=arrays_of(problem, terms, maps))
    return np.array(chosen, dtype=np.int64)


def breach(problem: Problem, chosen: np.ndarray) -> str:
    """How a plan breaks the rules of a problem, or nothing."""
    terms = all_terms(problem)
    fault = first_conflict(terms, len(problem.options), chosen)
    if fault is not None:
        return fault
    points = total_points(find_shortfalls(terms, chosen))
    if points > 0.0:
        return f"{points:.2f} points of shortfall"
    missed_mb = sum(one.missed_mb for own in account(problem, chosen).classes for one in own)
    return f"{missed_mb:.0f} MB dropped at their deadline" if missed_mb > 0.0 else ""


def report(result: PlanResult) -> None:
    """The objectives of a plan, and how the time was shared."""
    for tier in result.tiers:
        key = tier.name.replace(" ", "_") if tier.name != "shortfalls" else "requirements"
        print(f"  {tier.name:12s} {tier.sense:5s} {tier.value:14.2f}  bound {tier.bound:14.2f}  "
              f"gap {100.0 * tier.gap:9.3f} %  {result.seconds.get(key, 0.0):7.1f} s")
    print("  seconds by stage: " + ", ".join(f"{name} {spent:.1f}" for name, spent in result.seconds.items()))


def main() -> None:
    """Decorate and plan one instance."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("instance", type=Path)
    parser.add_argument("--seconds", type=float, default=180.0)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--threads", type=int, default=2)
    parser.add_argument("--gap", type=float, default=0.005)
    parser.add_argument("--costs", action="store_true", help="what each rule costs in value")
    parser.add_argument("--cost-seconds", type=float, default=20.0, help="seconds for each run of --costs")
    args = parser.parse_args()
    base = priced(read_instance(args.instance))
    free = greedy(base)
    house = House(base, free, np.random.default_rng(args.seed)).rules()
    print(f"{len(base.options)} options; {len(house) + 1} rules")
    for name, rule in house.items():
        why = breach(rule(base), free)
        print(f"  {name:20s} " + (f"binds: the plan without rules has {why}" if why else "is kept by the plan without"))

    def with_all(left_off: str = "") -> Problem:
        problem = base
        for name, rule in house.items():
            problem = problem if name == left_off else rule(problem)
        return problem

    # Yesterday's plan had other priorities.
    ruled = with_all()
    plan = greedy(replace(ruled, fleet=replace(ruled.fleet, weight=ruled.fleet.weight[::-1])))
    print(f"  {'changes, frozen':20s} {len(plan)} contacts are published")

    def solve(problem: Problem, seconds: float) -> PlanResult:
        return find_plan(problem, Limits(args.gap, seconds, args.threads, args.seed), clock=Clock(seconds))

    began = time.monotonic()
    result = solve(published(ruled, plan), args.seconds)
    print(f"{result.status} by {result.path}, {len(result.chosen)} contacts, {time.monotonic() - began:.1f} s in all, "
          f"peak memory {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6:.2f} GB")
    report(result)
    print(f"  two at once on the antenna with beams: "
          f"{'yes' if breach(base, np.array(result.chosen, dtype=np.int64)) else 'no'}")
    if args.costs:
        whole = solve(published(ruled, plan), args.cost_seconds)
        print(f"cost of each rule in value, of {whole.value:.1f}; runs of {args.cost_seconds:g} s")
        for name in house:
            other = solve(published(with_all(name), plan), args.cost_seconds)
            print(f"  {name:20s} {other.value - whole.value:12.1f}  ({len(other.shortfalls)} shortfalls, "
                  f"gap {100.0 * other.gap:.2f} %)", flush=True)


if __name__ == "__main__":
    main()
