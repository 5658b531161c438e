"""Small problems with rules of every kind switched on at random, and a judge that knows all of them."""

from __future__ import annotations

import random
from dataclasses import replace

import numpy as np
from craft_cases import CraftJudge, craft_needs
from data_cases import DataJudge, with_classes
from ground_cases import GroundJudge, ground_needs
from link_cases import FollowJudge, NoiseJudge, with_links
from need_cases import OrderJudge, with_published
from planning_cases import STEP_S
from standby_cases import HeldJudge, held_problem

from passplan.planning.problem import Conflict, Crowd, Problem, RequestNeed
from passplan.planning.rules.handovers import HandoverNeed

MOST_OPTIONS = 12


def mixed_problem(seed: int) -> Problem:
    """At most 12 options under needs, decisions, guarantees and stand-bys, with anything else by a coin's toss.

    That is: several links and beams, classes of data, limits of spacecraft, limits of sites and money, spans to be
    followed, interference, and objectives in order with a published plan.
    """
    rng = random.Random(f"mixed {seed}")
    problem = held_problem(1_000 * seed)
    for more in range(1, 1_000):
        if len(problem.options) <= MOST_OPTIONS:
            break
        problem = held_problem(1_000 * seed + more)
    if rng.random() < 0.5:
        problem = _with_links(problem, seed)
    if rng.random() < 0.4:
        problem = with_classes(problem, rng)
    needs = list(problem.needs)
    needs += craft_needs(problem, rng) if rng.random() < 0.5 else ()
    needs += ground_needs(problem, rng) if rng.random() < 0.5 else ()
    needs += [_span(problem, rng)] if rng.random() < 0.5 else []
    problem = replace(problem, needs=tuple(needs))
    if rng.random() < 0.5 and len(problem.fleet) > 1:
        problem = _with_noise(problem, rng)
    return with_published(problem, rng) if rng.random() < 0.5 else problem


def _with_links(problem: Problem, seed: int) -> Problem:
    """Several links as in :func:`with_links`, with each antenna where it was."""
    linked = with_links(problem, seed)
    return replace(problem, fleet=linked.fleet)


def _span(problem: Problem, rng: random.Random) -> HandoverNeed:
    craft, low = rng.randrange(len(problem.fleet)), rng.randrange(problem.horizon_s // STEP_S - 8)
    antennas = frozenset(range(len(problem.antennas)))
    asked = RequestNeed(
        "follow", problem.fleet.names[craft], craft, antennas, rng.choice(["downlink", "command"]), low * STEP_S,
        (low + rng.randint(6, 16)) * STEP_S, rng.randint(2, 4) * STEP_S, points=rng.choice([0.5, 2.0]))
    return HandoverNeed(asked, rng.choice([1, 2, 3]) * STEP_S)


def _with_noise(problem: Problem, rng: random.Random) -> Problem:
    victim, other = rng.sample(range(len(problem.fleet)), 2)
    others = tuple(k for k in range(len(problem.fleet)) if k != victim)
    (a, b), (c, d) = (sorted(rng.sample(range(0, problem.horizon_s + 1, STEP_S), 2)) for _ in range(2))
    dish = [rng.randrange(len(problem.antennas)) for _ in range(2)]
    return replace(
        problem, conflicts=(Conflict("pair", victim, dish[0], other, a, b),),
        crowds=(Crowd("crowd", victim, dish[1], others, (0.7,) * len(others), c, d),))


class MixedJudge(HeldJudge, FollowJudge, NoiseJudge, CraftJudge, GroundJudge, OrderJudge, DataJudge):
    """Every judge in turn; what a spacecraft with classes can bring down counts what they generate."""

    def _carried_mb(self, k: int) -> float:
        o, fleet, craft = self.options, self.problem.fleet, int(self.options.spacecraft[k])
        streams = fleet.streams_of(craft)
        if not streams:
            return super()._carried_mb(k)
        link = sum(float(o.piece_rate_mb_per_s[p]) * int(o.piece_end_s[p] - o.piece_start_s[p]) for p in o.pieces(k))
        made = sum(float(one.made(float(o.end_s[k])) - one.made(float(o.start_s[k]))) for one in streams)
        return min(link, float(fleet.capacity_mb[craft]) + made)

    def best_of_all(self) -> list[float]:
        """Objective by objective where they are in order, else points (negative) and value."""
        if self.problem.in_order:
            return self.best_in_order()
        points, value = self.best()
        return [-points, value]

    def reached_by(self, chosen: frozenset[int]) -> list[float]:
        """The same of one plan."""
        return self.reached(chosen) if self.problem.in_order else [-self.points(chosen), self.value(chosen)]


def kinds_of(problem: Problem) -> set[str]:
    """What is switched on."""
    on = {type(need).__name__ for need in problem.needs}
    on |= {"links"} if np.any(problem.fleet.links > 1) else set()
    on |= {"classes"} if any(problem.fleet.streams) else set()
    on |= {"stand-bys"} if len(problem.options.further) else set()
    on |= {"interference"} if problem.conflicts else set()
    on |= {"in order"} if problem.in_order else set()
    on |= {"turns"} if len(problem.too_tight) else set()
    on |= {"requests"} if problem.requests else set()
    return on | ({"commands"} if problem.commands else set())
