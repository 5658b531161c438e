"""Small planning problems for tests, and a judge of plans that shares no code with the package."""

from __future__ import annotations

import random
from collections.abc import Iterable, Iterator, Sequence
from typing import Any

import numpy as np
import pytest

from passplan.planning.option_table import build_options
from passplan.planning.problem import Antennas, CommandNeed, Fleet, Problem, RequestNeed, Windows

STEP_S = 60


def some_of(numbers: range, quick: int) -> list[Any]:
    """Parameters of a test that tries many cases: the first ``quick`` always, the others in the slow runs only."""
    return [pytest.param(n, marks=[] if k < quick else pytest.mark.slow) for k, n in enumerate(numbers)]


def problem_of(
    options: list[dict[str, Any]], *, horizon_s: int = 6_000, weight: tuple[float, ...] = (1.0,),
    generation: tuple[float, ...] = (0.0,), capacity: tuple[float, ...] = (1e6,), start: tuple[float, ...] = (1e5,),
    prepare_s: tuple[int, ...] = (60,), release_s: tuple[int, ...] = (0,), **rest: Any,
) -> Problem:
    """A problem from option rows; a window for each option unless rows say which."""
    rows = [{"window": k, "spacecraft": 0, "antenna": 0, **row} for k, row in enumerate(options)]
    rows = [{"prepare_s": prepare_s[row["antenna"]], "release_s": release_s[row["antenna"]], **row} for row in rows]
    count = max((row["window"] for row in rows), default=-1) + 1
    of_window = [[row for row in rows if row["window"] == w] for w in range(count)]
    windows = Windows(
        tuple(f"w{w}" for w in range(count)),
        np.array([group[0]["spacecraft"] for group in of_window], dtype=np.int64),
        np.array([group[0]["antenna"] for group in of_window], dtype=np.int64),
        np.array([min(row["start_s"] for row in group) for group in of_window], dtype=np.int64),
        np.array([max(row["end_s"] for row in group) for group in of_window], dtype=np.int64))
    fleet = Fleet(tuple(f"craft-{k}" for k in range(len(weight))), np.array(weight), np.array(generation),
                  np.array(capacity), np.array(start))
    antennas = Antennas(tuple(f"dish-{k}" for k in range(len(prepare_s))))
    return Problem(horizon_s, fleet, antennas, windows, build_options(rows), **rest)


def random_problem(seed: int, *, needs: bool = True, windows: int = 12) -> Problem:
    """At most ``windows`` windows, some with parts, on a 60 s grid; storage, setup, costs and needs at random."""
    rng = random.Random(seed)
    crafts, dishes, steps = rng.randint(1, 3), rng.randint(1, 3), rng.randint(20, 60)
    rows: list[dict[str, Any]] = []
    for w in range(rng.randint(1, windows)):
        craft, dish = rng.randrange(crafts), rng.randrange(dishes)
        a = rng.randrange(steps - 3)
        b = min(steps, a + rng.randint(3, 12))
        closed = rng.randrange(steps) if rng.random() < 0.3 else None
        spans = [(a, b)] if closed is None or not a <= closed < b else [(a, closed), (closed + 1, b)]
        if rng.random() < 0.5 and b - a > 4:
            spans.append((a, (a + b) // 2) if rng.random() < 0.5 else ((a + b) // 2, b))
        rate = rng.choice([0.2, 1.0, 3.0])
        for x, y in spans:
            if y - x < 2 or len(rows) >= 14:
                continue
            downlink, command = rng.random() < 0.85, rng.random() < 0.6
            pieces = [((x + 1) * STEP_S, y * STEP_S, rate)] if downlink else []
            rows.append({
                "window": w, "spacecraft": craft, "antenna": dish, "start_s": x * STEP_S, "end_s": y * STEP_S,
                "pieces": pieces, "command": command, "cost": rng.choice([0.0, 5.0, 40.0])})
            if seed % 3 == 0:
                rows[-1] |= {"prepare_s": (x * 7 + y) % 3 * STEP_S, "release_s": (x + y * 5) % 4 * STEP_S // 2}
    taken = sorted({row["window"] for row in rows})
    for row in rows:
        row["window"] = taken.index(row["window"])
    capacity = [rng.choice([0.0, 100.0, 400.0, 5e3]) for _ in range(crafts)]
    requests = tuple(
        RequestNeed(f"ask-{k}", "any", rng.randrange(-1, crafts),
                    frozenset(rng.sample(range(dishes), rng.randint(1, dishes))),
                    rng.choice(["downlink", "command", "both"]), low := rng.randrange(steps - 6) * STEP_S,
                    low + rng.randint(6, 30) * STEP_S, rng.randint(2, 6) * STEP_S)
        for k in range(rng.randrange(3) if needs else 0))
    commands = tuple(
        CommandNeed(k, rng.randint(4, 40) * STEP_S, -rng.randrange(30) * STEP_S)
        for k in range(crafts) if needs and rng.random() < 0.5)
    turning = [(a, b) for a, x in enumerate(rows) for b, y in enumerate(rows)
               if x["antenna"] == y["antenna"] and x["end_s"] <= y["start_s"] < x["end_s"] + 8 * STEP_S]
    tight = [pair for pair in turning if rng.random() < 0.5] if needs and seed % 2 else []
    return problem_of(
        rows, too_tight=np.array(tight, dtype=np.int64).reshape(-1, 2), horizon_s=steps * STEP_S,
        weight=tuple(rng.choice([0.0, 1.0, 2.5]) for _ in range(crafts)),
        generation=tuple(rng.choice([0.0, 0.1, 0.5]) for _ in range(crafts)), capacity=tuple(capacity),
        start=tuple(c * rng.random() for c in capacity), prepare_s=tuple(rng.choice([0, 60]) for _ in range(dishes)),
        release_s=tuple(rng.choice([0, 60]) for _ in range(dishes)), requests=requests, commands=commands,
        spill_cost_per_mb=rng.choice([0.0, 0.1, 1.0]), worth_per_money=rng.choice([0.0, 1.0]))


class Judge:
    """Points and value of a set of options, by stepping through time; everything on the 60 s grid."""

    def __init__(self, problem: Problem, limits: Sequence[tuple[Sequence[int], Sequence[float], float]] = ()) -> None:
        self.problem, self.options = problem, problem.options
        self.limits = [(dict(zip(some, amounts, strict=True)), most) for some, amounts, most in limits]
        self.steps = problem.horizon_s // STEP_S
        self.tight = {(int(a), int(b)) for a, b in problem.too_tight}
        self._craft_value: dict[tuple[int, frozenset[int]], float] = {}

    def compatible(self, a: int, b: int) -> bool:
        """Whether two options can both be used."""
        o = self.options
        first, second = (a, b) if (o.start_s[a], o.end_s[a]) <= (o.start_s[b], o.end_s[b]) else (b, a)
        overlap = o.spacecraft[a] == o.spacecraft[b] and o.start_s[second] < o.end_s[first]
        if overlap and (self.problem.fleet.links[o.spacecraft[a]] == 1 or o.antenna[a] == o.antenna[b]):
            return False
        if (first, second) in self.tight:
            return False
        if self.problem.antennas.beams[int(o.antenna[a])] > 1:
            return True
        setup_s = int(o.release_s[first] + o.prepare_s[second])
        return bool(o.antenna[a] != o.antenna[b] or o.start_s[second] >= o.end_s[first] + setup_s)

    def kept(self, chosen: Iterable[int]) -> bool:
        """Whether amounts stay within every limit, and no antenna is short of beams, no spacecraft of links."""
        chosen = list(chosen)
        within = all(sum(amounts.get(o, 0.0) for o in chosen) <= most + 1e-9 for amounts, most in self.limits)
        return within and self._enough_beams(chosen) and self._enough_links(chosen)

    def _enough_links(self, chosen: list[int]) -> bool:
        o, links = self.options, self.problem.fleet.links
        if np.all(links == 1):
            return True
        spans = [(int(o.spacecraft[k]), int(o.start_s[k]), int(o.end_s[k])) for k in chosen]
        return all(sum(who == craft and a <= start_s < b for who, a, b in spans) <= links[craft]
                   for craft, start_s, _ in spans)

    def _enough_beams(self, chosen: list[int]) -> bool:
        o, dishes = self.options, self.problem.antennas
        for dish in np.flatnonzero(dishes.beams > 1).tolist():
            mine = [k for k in chosen if o.antenna[k] == dish]
            for instant in range(-3_600 + STEP_S // 2, self.problem.horizon_s + 3_600, STEP_S):
                held = sum(o.start_s[k] - o.prepare_s[k] < instant < o.end_s[k] + o.release_s[k] for k in mine)
                if held > dishes.beams[dish]:
                    return False
        return True

    def plans(self) -> Iterator[frozenset[int]]:
        """Every set of options that can be used together."""
        def grow(chosen: tuple[int, ...], following: int) -> Iterator[frozenset[int]]:
            yield frozenset(chosen)
            for o in range(following, len(self.options)):
                if all(self.compatible(o, other) for other in chosen) and self.kept((*chosen, o)):
                    yield from grow((*chosen, o), o + 1)
        return grow((), 0)

    def points(self, chosen: frozenset[int]) -> float:
        """Requests missed, plus overdue steps as parts of the interval."""
        o, total = self.options, 0.0
        for need in self.problem.requests:
            total += not any(self._meets(k, need) for k in chosen)
        for need in self.problem.commands:
            mine = [k for k in chosen if o.spacecraft[k] == need.spacecraft and o.command[k]]
            for step in range(self.steps):
                instant = step * STEP_S + STEP_S // 2
                fresh = instant < need.last_s + need.every_s
                fresh = fresh or any(o.start_s[k] < instant < o.end_s[k] + need.every_s for k in mine)
                total += 0.0 if fresh else STEP_S / need.every_s
        return total

    def value(self, chosen: frozenset[int]) -> float:
        """Weight x delivered, less spill, less cost."""
        o = self.options
        total = -self.problem.worth_per_money * sum(float(o.cost[k]) for k in chosen)
        for craft in range(len(self.problem.fleet)):
            mine = frozenset(k for k in chosen if o.spacecraft[k] == craft)
            if (craft, mine) not in self._craft_value:
                self._craft_value[craft, mine] = self._storage(craft, mine)
            total += self._craft_value[craft, mine]
        return total

    def best(self) -> tuple[float, float]:
        """Least points, and the most value that goes with them."""
        points, value = float("inf"), -float("inf")
        for chosen in self.plans():
            mine = self.points(chosen)
            if mine > points + 1e-9:
                continue
            worth = self.value(chosen)
            points, value = (mine, worth) if mine < points - 1e-9 else (points, max(value, worth))
        return points, value

    def _meets(self, k: int, need: RequestNeed) -> bool:
        o = self.options
        offered = {"downlink": bool(o.downlink[k]), "command": bool(o.command[k])}
        asked = ("downlink", "command") if need.service == "both" else (need.service,)
        return bool(
            o.spacecraft[k] == need.spacecraft and int(o.antenna[k]) in need.antennas and all(offered[s] for s in asked)
            and need.earliest_s <= o.start_s[k] and o.end_s[k] <= need.latest_s
            and o.end_s[k] - o.start_s[k] >= need.min_duration_s)

    def _storage(self, craft: int, mine: frozenset[int]) -> float:
        o, fleet = self.options, self.problem.fleet
        rate = [0.0] * self.steps
        for k in mine:
            for p in o.pieces(k):
                for step in range(int(o.piece_start_s[p]) // STEP_S, int(o.piece_end_s[p]) // STEP_S):
                    rate[step] += float(o.piece_rate_mb_per_s[p])
        fill, sent, lost = float(fleet.start_fill_mb[craft]), 0.0, 0.0
        for step in range(self.steps):
            fill += float(fleet.generation_mb_per_s[craft]) * STEP_S
            out = min(fill, rate[step] * STEP_S)
            sent, fill = sent + out, fill - out
            over = max(0.0, fill - float(fleet.capacity_mb[craft]))
            lost, fill = lost + over, fill - over
        return float(fleet.weight[craft]) * sent - self.problem.spill_cost_per_mb * lost
