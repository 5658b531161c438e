"""Plan a yardstick instance with every rule of the house on it, each in the way of a plan that heeds none.

    python tests/benchmarks/rules.py INSTANCE.npz --seconds 180 --seed 1 [--costs --cost-rounds 4] [--without links]

Prints for each rule by how much a plan without rules breaks it, then the objectives in order with value, bound, gap
and the seconds that each got. With ``--costs`` each rule is left off in turn: from the same plan the search goes on for
so many rounds with all rules, and then without each. What it gains more without a rule is the cost of that rule in
value, and the points that it loses more are its cost in requirements. Rounds are a measure of work, not of time, so
that a busy machine changes nothing.
"""

from __future__ import annotations

import argparse
import resource
import time
from collections.abc import Iterable
from dataclasses import replace
from pathlib import Path

import numpy as np
from house import House, backed, priced, published
from optimiser import read_instance

from passplan.planning.clock import Clock
from passplan.planning.greedy import plan_greedily
from passplan.planning.maps import storage_maps
from passplan.planning.occupancy import Occupancy, first_conflict
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits, Problem
from passplan.planning.result import PlanResult
from passplan.planning.rules import all_terms
from passplan.planning.search.ready import compiled_in_time
from passplan.planning.several_links import arrays_of, search_all
from passplan.planning.shortfalls import find_shortfalls, total_points
from passplan.planning.tiers import objectives
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


def searched(problem: Problem, chosen: Iterable[int], limits: Limits) -> tuple[float, float]:
    """Value and points of a plan after some rounds of search for value; contacts that do not fit are left out."""
    terms, maps, aim = all_terms(problem), storage_maps(problem), objectives(problem)[1].problem
    occupancy, start = Occupancy(terms, len(problem.options)), list[int]()
    for o in chosen:
        if occupancy.fits(o):
            occupancy.add(o)
            start.append(o)
    points = total_points(find_shortfalls(terms, start))
    found = search_all(aim, terms, arrays_of(aim, terms, maps), limits, Clock(limits.time_limit_s), start, points,
                       lambda _value, _bound: None)
    return account(aim, found.chosen).value, total_points(find_shortfalls(terms, found.chosen))


def main() -> None:
    """Decorate and plan one instance."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("instance", type=Path)
    parser.add_argument("--seconds", type=float, default=180.0)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--threads", type=int, default=2)
    parser.add_argument("--gap", type=float, default=0.005)
    parser.add_argument("--costs", action="store_true", help="what each rule costs in value")
    parser.add_argument("--cost-rounds", type=int, default=4, help="rounds of search for each rule of --costs")
    parser.add_argument("--without", nargs="*", default=[], help="rules that are left off, by name")
    args = parser.parse_args()
    base = priced(backed(read_instance(args.instance)))
    free = greedy(base)
    house = House(base, free, np.random.default_rng(args.seed)).rules()
    house = {name: rule for name, rule in house.items() if name not in args.without}
    print(f"{len(base.options)} options; {len(house) + 1} rules")
    binds = {name: breach(rule(base), free) for name, rule in house.items()}
    for name, why in binds.items():
        print(f"  {name:20s} " + (f"binds: the plan without rules has {why}" if why else "is kept by the plan without"))
    if "handover" not in house:
        print("  links, handover      are left off: nowhere does a second antenna see a spacecraft on from the first")

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
    for name in (name for name, why in binds.items() if not why):
        # A rule that allows more binds where the plan makes use of it.
        used = first_conflict(all_terms(with_all(name)), len(base.options), result.chosen)
        binds[name] = used or ""
        print(f"  {name:20s} " + (f"binds: without it {used}" if used else "does not bind"))
    idle = ", ".join(name for name, why in binds.items() if not why)
    print(f"  rules that do not bind: {idle or 'none'}")
    if args.costs:
        limits = Limits(0.0, 600.0, args.threads, args.seed, search_rounds=args.cost_rounds)
        value, points = searched(published(ruled, plan), result.chosen, limits)
        print(f"cost of each rule, of {value:.0f} in value; {args.cost_rounds} rounds of search from the plan")
        for name in house:
            more, fewer = searched(published(with_all(name), plan), result.chosen, limits)
            print(f"  {name:20s} {more - value:12.0f} ({100.0 * (more - value) / abs(value):6.2f} %)"
                  f"  {points - fewer:9.2f} points", flush=True)


if __name__ == "__main__":
    main()
