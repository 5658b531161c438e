"""Random limits of spacecraft on small planning problems, and a judge of them by stepping through time."""

from __future__ import annotations

import random
from collections.abc import Iterable
from dataclasses import replace
from itertools import accumulate, pairwise

import numpy as np
from planning_cases import STEP_S, Judge, random_problem

from passplan.planning.battery import PowerNeed
from passplan.planning.on_air import OnAir
from passplan.planning.problem import Problem
from passplan.planning.rules.contact_counts import CountNeed
from passplan.planning.rules.contact_gaps import GapNeed
from passplan.planning.rules.sending_time import OrbitSendingNeed, SpanSendingNeed


def random_craft_problem(seed: int) -> Problem:
    """A random problem in which each spacecraft has each limit by a coin's toss."""
    problem = random_problem(seed)
    return replace(problem, needs=craft_needs(problem, random.Random(10_000 + seed)))


def craft_needs(problem: Problem, rng: random.Random) -> tuple[object, ...]:
    """Each limit for each spacecraft of a problem by a coin's toss, and when transmitters are on."""
    needs: list[object] = [on_air_of(problem)]
    for craft in range(len(problem.fleet)):
        edges_s = tuple(float(t) for t in range(rng.randint(1, 15) * STEP_S + 7, problem.horizon_s, 20 * STEP_S))
        if rng.random() < 0.4:
            needs.append(GapNeed(craft, rng.choice([0, 2, 5]) * STEP_S, rng.choice([0, 4, 12]) * STEP_S))
        if rng.random() < 0.4:
            needs.append(CountNeed(craft, rng.choice(["orbit", "day"]), edges_s, rng.randint(1, 2)))
        if rng.random() < 0.4:
            needs.append(OrbitSendingNeed(craft, edges_s, rng.randint(1, 12) * STEP_S + 30.0))
        if rng.random() < 0.4:
            needs.append(SpanSendingNeed(craft, rng.randint(8, 40) * STEP_S + 20.0, rng.randint(1, 12) * STEP_S + 10.0))
        if rng.random() < 0.5:
            edges = np.array([0.0, *sorted(rng.sample(range(1, problem.horizon_s), 4)), problem.horizon_s])
            capacity_wh = rng.choice([3.0, 8.0, 20.0])
            net_w = np.array([rng.choice([-30.0, -10.0, 20.0, 50.0, 70.0]) for _ in range(5)])
            needs.append(PowerNeed(craft, capacity_wh, rng.choice([0.0, 0.2, 0.5]) * capacity_wh,
                                   rng.choice([0.1, 0.6, 1.0]) * capacity_wh, edges, net_w))
    return tuple(needs)


def loosened(problem: Problem) -> Problem:
    """The same problem with every limit of its spacecraft a little looser."""
    return replace(problem, needs=tuple(_loosened(need) for need in problem.needs))


def _loosened(need: object) -> object:
    if isinstance(need, GapNeed):
        return replace(need, gap_s=need.gap_s // 2, cool_down_s=need.cool_down_s // 2)
    if isinstance(need, CountNeed):
        return replace(need, most=need.most + 1)
    if isinstance(need, OrbitSendingNeed | SpanSendingNeed):
        return replace(need, most_s=need.most_s + 2 * STEP_S)
    return replace(need, floor_wh=0.5 * need.floor_wh) if isinstance(need, PowerNeed) else need


def on_air_of(problem: Problem) -> OnAir:
    """The transmitters of a random problem: a minute of acquisition before the first piece."""
    o = problem.options
    sends = np.diff(o.piece_offset) > 0
    first, last = np.where(sends, o.piece_offset[:-1], 0), np.where(sends, o.piece_offset[1:] - 1, 0)
    if not sends.any():
        return OnAir(o.start_s, o.start_s, np.zeros(len(o)))
    start_s = np.where(sends, o.piece_start_s[first] - STEP_S, o.start_s)
    load_w = 30.0 + 15.0 * (np.arange(len(o)) % 3)
    return OnAir(start_s, np.where(sends, o.piece_end_s[last], o.start_s), np.where(sends, load_w, 0.0))


class CraftJudge(Judge):
    """Also knows the limits of spacecraft, each in its own plain way."""

    def kept(self, chosen: Iterable[int]) -> bool:
        """Whether a set of options that do not collide keeps every limit."""
        chosen = list(chosen)
        checks = {GapNeed: self._rested, CountNeed: self._few_enough, OrbitSendingNeed: self._quiet_in_orbits,
                  SpanSendingNeed: self._quiet_in_spans, PowerNeed: self._charged}
        return super().kept(chosen) and all(
            checks[type(need)](need, [k for k in chosen if self.options.spacecraft[k] == need.spacecraft])
            for need in self.problem.needs if type(need) in checks)

    def _rested(self, need: GapNeed, chosen: list[int]) -> bool:
        links = int(self.problem.fleet.links[need.spacecraft])
        sending = [k for k in chosen if self.options.downlink[k]]
        return self._dealt(chosen, [[] for _ in range(links)], need.gap_s) and self._dealt(
            sending, [[] for _ in range(links)], need.cool_down_s)

    def _dealt(self, contacts: list[int], hands: list[list[int]], rest_s: int) -> bool:
        """Whether the contacts can be dealt out to links so that each rests between its own."""
        if not contacts:
            return True
        o, first = self.options, contacts[0]
        for hand in hands:
            if all(o.start_s[first] >= o.end_s[k] + rest_s or o.start_s[k] >= o.end_s[first] + rest_s for k in hand):
                hand.append(first)
                if self._dealt(contacts[1:], hands, rest_s):
                    return True
                hand.pop()
        return False

    def _few_enough(self, need: CountNeed, chosen: list[int]) -> bool:
        parts = [sum(edge <= self.options.start_s[k] for edge in need.edges_s) for k in chosen]
        return all(parts.count(part) <= need.most for part in parts)

    def _seconds_on(self, chosen: list[int]) -> list[int]:
        (on_air,) = self.problem.needs_of(OnAir)
        seconds = [0] * self.problem.horizon_s
        for k in chosen:
            for t in range(int(on_air.start_s[k]), int(on_air.end_s[k])):
                seconds[t] += 1
        return seconds

    def _charged(self, need: PowerNeed, chosen: list[int]) -> bool:
        """Second by second: never under the floor, or under what the battery holds there when nothing is sent."""
        (on_air,) = self.problem.needs_of(OnAir)
        part = np.searchsorted(need.edges_s, np.arange(self.problem.horizon_s), side="right") - 1
        load_w = np.zeros(self.problem.horizon_s)
        for k in chosen:
            load_w[on_air.start_s[k]:on_air.end_s[k]] += on_air.load_w[k]
        idle = charge = need.start_wh
        for net_w, drawn_w in zip(need.net_w[part].tolist(), load_w.tolist(), strict=True):
            idle = min(need.capacity_wh, idle + net_w / 3600.0)
            charge = min(need.capacity_wh, charge + (net_w - drawn_w) / 3600.0)
            if charge < min(need.floor_wh, idle) - 1e-7:
                return False
        return True

    def _quiet_in_orbits(self, need: OrbitSendingNeed, chosen: list[int]) -> bool:
        seconds, edges = self._seconds_on(chosen), [0.0, *need.edges_s, self.problem.horizon_s]
        return all(sum(seconds[int(a):int(b)]) <= need.most_s for a, b in pairwise(edges))

    def _quiet_in_spans(self, need: SpanSendingNeed, chosen: list[int]) -> bool:
        sums = [0, *accumulate(self._seconds_on(chosen))]
        span_s = int(need.span_s)
        most_s = max(sums[min(t + span_s, len(sums) - 1)] - sums[t] for t in range(len(sums)))
        return most_s <= need.most_s
