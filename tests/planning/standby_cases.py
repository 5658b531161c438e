"""Random options that hold a second antenna, requests that ask for one, and a judge of them."""

from __future__ import annotations

import random
from dataclasses import replace

import numpy as np
from need_cases import NeedJudge, needy_problem
from planning_cases import STEP_S

from passplan.planning.option_table import Holds
from passplan.planning.problem import Antennas, Problem, RequestNeed


def held_problem(seed: int) -> Problem:
    """A needy problem some of whose options hold a second antenna, which some of the requests ask for."""
    rng = random.Random(90_000 + seed)
    problem = needy_problem(seed)
    options, dishes = problem.options, len(problem.antennas) + 1
    some = [o for o in range(len(options)) if rng.random() < 0.5]
    antenna = [rng.choice([k for k in range(dishes) if k != options.antenna[o]]) for o in some]
    either = [rng.choice(["downlink", "command", "both"]) for _ in some]
    further = Holds(
        np.array(some, dtype=np.int64), options.window[some], np.array(antenna, dtype=np.int64),
        options.start_s[some], options.end_s[some],
        np.array([rng.choice([0, STEP_S]) for _ in some], dtype=np.int64), np.zeros(len(some), dtype=np.int64),
        np.array([one != "command" for one in either], dtype=bool),
        np.array([one != "downlink" for one in either], dtype=bool))
    requests = tuple(
        replace(need, standbys=frozenset(rng.sample(range(dishes), rng.randint(1, dishes))))
        if rng.random() < 0.6 else need for need in problem.requests)
    if some:
        k = rng.randrange(len(some))
        o, service = some[k], "both" if rng.random() < 0.2 else either[k]
        span = int(options.start_s[o]), int(options.end_s[o]) + 3 * STEP_S
        requests += (RequestNeed(
            "ready", "any", int(options.spacecraft[o]), frozenset(range(dishes)), service, *span, STEP_S,
            standbys=frozenset({antenna[k]})),)
    names = (*problem.antennas.names, "spare")
    beams = np.append(problem.antennas.beams, rng.choice([1, 2]))
    return replace(
        problem, options=replace(options, further=further), requests=requests, antennas=Antennas(names, beams))


class HeldJudge(NeedJudge):
    """Adds the antennas that options hold beside their own."""

    def compatible(self, a: int, b: int) -> bool:
        """Whether no antenna with a single beam is wanted twice at a time."""
        beams = self.problem.antennas.beams
        return super().compatible(a, b) and not any(
            x[0] == y[0] and beams[x[0]] == 1 and x[1] < y[2] and y[1] < x[2]
            for x in self._held(a) for y in self._held(b))

    def kept(self, chosen: object) -> bool:
        """Whether each request has one stand-by at most, and no antenna is short of beams."""
        some = list(chosen)  # type: ignore[call-overload]
        for need in self.problem.requests:
            if need.standbys is not None and sum(self._serves(k, need) for k in some) > 1:
                return False
        held = [hold for k in some for hold in self._held(k)]
        for instant in sorted({hold[1] for hold in held}):
            for dish, most in enumerate(self.problem.antennas.beams.tolist()):
                if sum(d == dish and a <= instant < b for d, a, b in held) > most:
                    return False
        return super().kept(some)

    def _held(self, k: int) -> list[tuple[int, int, int]]:
        o, further = self.options, self.options.further
        own = [(int(o.antenna[k]), int(o.start_s[k] - o.prepare_s[k]), int(o.end_s[k] + o.release_s[k]))]
        return own + [(int(further.antenna[h]), int(further.start_s[h] - further.prepare_s[h]),
                       int(further.end_s[h] + further.release_s[h])) for h in np.flatnonzero(further.option == k)]

    def _meets(self, k: int, need: RequestNeed) -> bool:
        if not super()._meets(k, need):
            return False
        if need.standbys is None:
            return True
        further = self.options.further
        return any(
            int(further.antenna[h]) in need.standbys and (need.service == "command" or further.downlink[h])
            and (need.service == "downlink" or further.command[h]) for h in np.flatnonzero(further.option == k))

    def _serves(self, k: int, need: RequestNeed) -> bool:
        return self._served(frozenset({k}), need)
