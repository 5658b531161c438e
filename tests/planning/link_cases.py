"""Spacecraft with several links, spans to be followed, and interference, on random problems; judges of them."""

from __future__ import annotations

import random
from collections.abc import Iterable
from dataclasses import replace

import numpy as np
from planning_cases import STEP_S, Judge

from passplan.planning.problem import Antennas, Conflict, Crowd, Problem
from passplan.planning.rules.handovers import HandoverNeed


def with_links(problem: Problem, seed: int) -> Problem:
    """One to three links for each spacecraft, with enough aboard for all of them.

    Most contacts are those of one spacecraft; windows are spread over three antennas, some with two beams.
    """
    rng, o = random.Random(f"links {seed}"), problem.options
    whose = np.array([0 if rng.random() < 0.6 else k for k in o.spacecraft.tolist()], dtype=np.int64)
    beams = np.array([rng.choice([1, 1, 2]) for _ in range(3)])
    where = (o.window + seed) % 3
    tight = np.array([(a, b) for a, b in problem.too_tight.tolist() if where[a] == where[b] and beams[where[a]] == 1])
    fleet = replace(
        problem.fleet, links=np.array([rng.choice([1, 2, 2, 3]) for _ in problem.fleet.names]),
        weight=1.0 + problem.fleet.weight, capacity_mb=10.0 * problem.fleet.capacity_mb,
        start_fill_mb=8.0 * problem.fleet.start_fill_mb)
    return replace(
        problem, options=replace(o, spacecraft=whose, antenna=where), fleet=fleet,
        antennas=Antennas(("dish-0", "dish-1", "dish-2"), beams),
        too_tight=tight.astype(np.int64).reshape(-1, 2))


class NoiseJudge(Judge):
    """Also listens: minute by minute, who of the chosen is disturbed."""

    def kept(self, chosen: Iterable[int]) -> bool:
        """Whether links, beams and ears are all right."""
        picked = list(chosen)
        return super().kept(picked) and not any(
            self._heard(noise, [k for k in picked if self.options.start_s[k] <= t < self.options.end_s[k]])
            for noise in (*self.problem.conflicts, *self.problem.crowds) for t in range(noise.start_s, noise.end_s, 60))

    def _heard(self, noise: Conflict | Crowd, now: list[int]) -> bool:
        o = self.options
        down = [k for k in now if o.downlink[k]]
        if not any(o.spacecraft[k] == noise.victim and o.antenna[k] == noise.antenna for k in down):
            return False
        if isinstance(noise, Conflict):
            return any(o.spacecraft[k] == noise.interferer for k in down)
        shares = dict(zip(noise.interferers, noise.shares, strict=True))
        links = self.problem.fleet.links
        return sum(shares[int(o.spacecraft[k])] / links[o.spacecraft[k]] for k in down
                   if not (o.spacecraft[k] == noise.victim and o.antenna[k] == noise.antenna)) > 1.0 + 1e-9


class FollowJudge(Judge):
    """Goes along each span minute by minute: is there a contact that goes on for the overlap after this minute?"""

    def points(self, chosen: frozenset[int]) -> float:
        """Each span weighs its points, in proportion to the minutes in which nothing follows up."""
        o, total = self.options, super().points(chosen)
        for need in self.problem.needs_of(HandoverNeed):
            asked = need.request
            able = [k for k in chosen if o.spacecraft[k] == asked.spacecraft and int(o.antenna[k]) in asked.antennas
                    and (o.downlink[k] if asked.service == "downlink" else o.command[k])
                    and o.end_s[k] - o.start_s[k] >= asked.min_duration_s]
            minutes = range(asked.earliest_s, min(asked.latest_s, self.problem.horizon_s) - need.overlap_s, STEP_S)
            missed = sum(not any(o.start_s[k] <= t and t + STEP_S + need.overlap_s <= o.end_s[k] for k in able)
                         for t in minutes)
            total += asked.points * missed / len(minutes) if minutes else 0.0
        return total
