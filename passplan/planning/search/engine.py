"""Search and bound together, in rounds of fixed work, until they meet or the time is up.

In each round the prices take some steps and the plan is rebuilt some times, side by side where there are
threads for it. Each uses what the other knew when the round began, so that the outcome does not depend on
which is faster: a search that ends by its gap gives the same plan every time, on any number of threads.
One that ends by the clock stops after as many rounds as the machine managed.
"""

from __future__ import annotations

import math
import threading
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np

from passplan.planning.clock import Clock
from passplan.planning.maps import StorageMaps
from passplan.planning.problem import Floats, Limits, Problem
from passplan.planning.result import OPTIMAL_GAP, relative_gap
from passplan.planning.rules.terms import Terms
from passplan.planning.search.bound import BoundSearch, Sweeper, option_prices
from passplan.planning.search.fleetarrays import FleetArrays, find_clashes, fleet_arrays
from passplan.planning.search.labels import make_work
from passplan.planning.search.rebuild import MOST_CONTACTS, rebuild
from passplan.planning.search.schedule import worth_of

# A round is about this many options looked at: some tenths of a second.
_ROUND_OPTIONS = 400_000
_MOST_OUT = 10
# Loss accepted at first, as a part of what a contact is worth on average, round by round.
_WARMTH = (0.0, 0.02, 0.1, 0.5)
_PATIENCE_ROUNDS = 200


@dataclass(frozen=True, eq=False)
class Found:
    """What the search found: options of the plan, its bound, and the prices that prove it."""

    chosen: tuple[int, ...]
    bound: float
    clique_price: Floats
    point_worth: float
    rounds: int


def search_plan(
    problem: Problem, terms: Terms, maps: StorageMaps, limits: Limits, clock: Clock, start: Sequence[int],
    tell: Callable[[float, float], None] | None = None,
) -> Found | None:
    """Improve the plan ``start`` and bound it. None if there is nothing to choose from, or if the time ran out
    before the code was compiled.

    Raises :class:`~passplan.planning.search.fleetarrays.NotForSearchError` where the terms do not fit.
    ``tell(value, bound)`` is called after each round.
    """
    if not _compiled_in_time(clock):
        return None
    arrays = fleet_arrays(problem, terms, maps)
    if not len(arrays.option):
        return None
    threads = max(1, limits.threads)
    with ThreadPoolExecutor(threads) as pool:
        return _Rounds(problem, arrays, limits, start, pool, threads).run(clock, tell)


class _Rounds:
    def __init__(
        self, problem: Problem, arrays: FleetArrays, limits: Limits, start: Sequence[int], pool: ThreadPoolExecutor,
        threads: int,
    ) -> None:
        self.arrays, self.limits, self.pool, self.threads = arrays, limits, pool, threads
        count = len(arrays.craft)
        self.taken = np.zeros((count, MOST_CONTACTS), dtype=np.int64)
        self.size = np.zeros(count, dtype=np.int64)
        self._load(problem, start)
        self.best_taken, self.best_size = self.taken.copy(), self.size.copy()
        # Points before value: a second of a command interval outweighs what it can be traded for.
        self.point_worth = 1e5 * (1.0 + float(np.abs(arrays.craft[:, 0] + problem.spill_cost_per_mb) @ (
            arrays.craft[:, 3] + arrays.craft[:, 1] * arrays.horizon_s)))
        self.sweeper = Sweeper(arrays, max(1, threads - 1), pool if threads > 2 else None)
        self.work = make_work()
        self.value, self.points = self._worth()
        self.bounds = BoundSearch(
            arrays, self.sweeper, self.points, self._first_point_worth(problem), self._contact_worth())

    def run(self, clock: Clock, tell: Callable[[float, float], None] | None) -> Found:
        options = max(1, len(self.arrays.option))
        sweeps = max(2, min(40, _ROUND_OPTIONS // options))
        rebuilds = max(20, min(2_000, sweeps * len(self.arrays.craft) // 3))
        rounds, idle = 0, 0
        while not clock.expired():
            prices = option_prices(self.arrays, self.bounds.best_price)
            before = self.value, self.bounds.bound
            if self.threads > 1:
                beside = self.pool.submit(self._rebuild, rounds, rebuilds, prices)
                self.bounds.improve(sweeps, before[0])
                beside.result()
            else:
                self._rebuild(rounds, rebuilds, prices)
                self.bounds.improve(sweeps, before[0])
            rounds += 1
            self.value, points = self._worth()
            if points < self.points - 1e-9:
                self.points = points
                self.bounds.restart(points)
            idle = 0 if (self.value, self.bounds.bound) != before else idle + 1
            if tell is not None:
                tell(self.value, self.bounds.bound)
            gap = relative_gap(self.value, self.bounds.bound)
            if gap <= max(self.limits.gap, OPTIMAL_GAP) or idle > _PATIENCE_ROUNDS:
                break
        chosen = sorted(int(self.arrays.option[o])
                        for i in range(len(self.best_size)) for o in self.best_taken[i, : self.best_size[i]])
        return Found(tuple(chosen), self.bounds.bound, self.bounds.best_price, self.bounds.point_worth, rounds)

    def _rebuild(self, round_number: int, iterations: int, prices: Floats) -> None:
        warmth = _WARMTH[round_number % len(_WARMTH)] * self._contact_worth()
        self.taken[:], self.size[:] = self.best_taken, self.best_size
        seed = (self.limits.seed * 1_000_003 + round_number) % 2**32
        rebuild(self.arrays, seed, iterations, warmth, _MOST_OUT, prices, self.point_worth,
                self.work, self.taken, self.size, self.best_taken, self.best_size)

    def _contact_worth(self) -> float:
        """What a contact of the plan is worth, on average."""
        return max(1.0, abs(self.value)) / max(1, int(self.best_size.sum()))

    def _worth(self) -> tuple[float, float]:
        pairs = [worth_of(self.arrays, i, self.best_taken[i], self.best_size[i]) for i in range(len(self.best_size))]
        return math.fsum(w for w, _ in pairs), math.fsum(p for _, p in pairs)

    def _first_point_worth(self, problem: Problem) -> float:
        """What a point is worth in the bound: much if the plan has only the points that nobody can avoid."""
        alone = self.sweeper(np.zeros(self.arrays.cliques), self.point_worth).points.sum()
        if self.points <= alone + 1e-9:
            return self.point_worth
        return float((problem.fleet.weight * problem.fleet.capacity_mb).max(initial=1.0))

    def _load(self, problem: Problem, start: Sequence[int]) -> None:
        place = {int(o): k for k, o in enumerate(self.arrays.option)}
        for o in sorted(start, key=lambda o: int(problem.options.start_s[o])):
            craft = int(problem.options.spacecraft[o])
            self.taken[craft, self.size[craft]] = place[o]
            self.size[craft] += 1


_compiled = threading.Event()
_compiling = threading.Lock()


def _compiled_in_time(clock: Clock) -> bool:
    """Wait for compiled code, which the first run on a machine has to make; it goes on behind if time is up."""
    def compile_all() -> None:
        with _compiling:
            if not _compiled.is_set():
                _exercise()
                _compiled.set()

    if not _compiled.is_set():
        threading.Thread(target=compile_all, daemon=True).start()
        _compiled.wait(clock.left_s())
    return _compiled.is_set()


def _exercise() -> None:
    """Call every compiled function once, on a problem of one spacecraft and one option."""
    one, none = np.ones(1, dtype=np.int64), np.zeros(1, dtype=np.int64)
    arrays = FleetArrays(
        option=none, first=np.array([0, 1]), craft=np.ones((1, 4)), start_first=np.array([0, 1]), start_s=none,
        node=none, arrival=one, span=np.array([[0, 1]]), maps=np.zeros((1, 6)), cost=np.zeros(1), bits=none,
        renews=none, use_first=np.zeros((1, 1), dtype=np.int64), use_last=np.ones((1, 1), dtype=np.int64), clash=none,
        wants=np.zeros((1, 1)), recur=np.zeros((1, 3)), horizon_s=1, spill=0.0, cliques=1)
    find_clashes(arrays.first, none, one, arrays.use_first, arrays.use_last, 0, none.copy())
    Sweeper(arrays)(np.zeros(1), 0.0)
    taken, size = np.zeros((1, 4), dtype=np.int64), np.zeros(1, dtype=np.int64)
    rebuild(arrays, 1, 1, 0.0, 2, np.zeros(1), 0.0, make_work(64), taken, size, taken.copy(), size.copy())
