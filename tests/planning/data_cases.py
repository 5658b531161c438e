"""Problems with classes of data and changing generation, and a judge that follows every class in steps."""

from __future__ import annotations

import random
from dataclasses import replace

import numpy as np
from planning_cases import STEP_S, Judge, random_problem

from passplan.planning.problem import Problem
from passplan.planning.streams import Keeping, Stream


def random_data_problem(seed: int) -> Problem:
    """A random problem in which spacecraft hold up to three classes; rates change on the 60 s grid."""
    return with_classes(random_problem(seed, windows=9), random.Random(f"data {seed}"))


def with_classes(problem: Problem, rng: random.Random) -> Problem:
    """The problem with up to three classes for each spacecraft, none standing for its plain storage."""
    fleet, steps = problem.fleet, problem.horizon_s // STEP_S
    streams = []
    for craft in range(len(fleet)):
        count = rng.randrange(4)
        weights = sorted((rng.choice([0.0, 1.0, 2.0, 6.0]) for _ in range(count)), reverse=True)
        streams.append(tuple(
            _stream(rng, f"class {k}", weight, float(fleet.capacity_mb[craft]) * rng.random() / count, steps)
            for k, weight in enumerate(weights)))
    return replace(problem, fleet=replace(fleet, streams=tuple(streams)))


def _stream(rng: random.Random, name: str, weight: float, start_mb: float, steps: int) -> Stream:
    edges = sorted({0, steps, *(rng.randrange(steps) for _ in range(rng.randrange(5)))})
    rates = [rng.choice([0.0, 0.05, 0.3, 1.0]) for _ in edges[1:]]
    made = np.concatenate([[0.0], np.cumsum(np.diff(edges) * STEP_S * np.array(rates))])
    return Stream(name, weight, start_mb, np.array(edges, dtype=float) * STEP_S, made)


class DataJudge(Judge):
    """Each class in steps: the best goes down first, the least is lost first."""

    def _storage(self, craft: int, mine: frozenset[int]) -> float:
        streams, o = self.problem.fleet.streams_of(craft), self.options
        if not streams:
            return super()._storage(craft, mine)
        capacity = float(self.problem.fleet.capacity_mb[craft])
        fills, worth = [one.start_mb for one in streams], 0.0
        for step in range(self.steps):
            link = STEP_S * sum(
                float(o.piece_rate_mb_per_s[p]) for k in mine for p in o.pieces(k)
                if o.piece_start_s[p] <= step * STEP_S < o.piece_end_s[p])
            for k, one in enumerate(streams):
                fills[k] += float(one.made((step + 1.0) * STEP_S) - one.made(step * float(STEP_S)))
                out = min(fills[k], link)
                link, fills[k], worth = link - out, fills[k] - out, worth + one.weight * out
            over = max(0.0, sum(fills) - capacity)
            worth -= self.problem.spill_cost_per_mb * over
            for k in reversed(range(len(streams))):
                gone = min(over, fills[k])
                fills[k], over = fills[k] - gone, over - gone
        return worth


def random_ageing_problem(seed: int) -> Problem:
    """As :func:`random_data_problem`, with deadlines, fading worth, overflow policies and acknowledgement."""
    problem = random_data_problem(seed)
    rng = random.Random(f"ageing {seed}")
    fleet = problem.fleet
    streams = tuple(tuple(_aged(rng, one) for one in own) for own in fleet.streams)
    keeping = tuple(
        Keeping(rng.random() < 0.4, rng.choice(["", "", "contact", "next_command"])) for _ in range(len(fleet)))
    return replace(problem, fleet=replace(fleet, streams=streams, keeping=keeping))


def _aged(rng: random.Random, one: Stream) -> Stream:
    deadline_s = rng.choice([np.inf, 300.0, 900.0])
    ages, shares = rng.choice([
        ([0.0], [1.0]), ([0.0], [1.0]), ([0.0, 1_200.0], [1.0, 0.0]),
        ([0.0, 400.0, 400.0, 800.0], [1.0, 0.8, 0.4, 0.1])])
    return replace(one, deadline_s=deadline_s, start_age_s=min(deadline_s, rng.choice([0.0, 100.0, 600.0])),
                   fresh_age_s=np.array(ages), fresh_share=np.array(shares))
