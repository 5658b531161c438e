"""Search and bound together, in rounds of fixed work, until they meet or the time is up.

In each round the prices take some steps and the plan is rebuilt, side by side where there are threads for it. Where
the bound has come to rest and the plan has not, all threads rebuild, each a part of the fleet. Each uses what
the others knew when the round began, and work is counted in labels, not in seconds, so that the outcome does not
depend on which is faster: a search that ends by its gap or its rounds gives the same plan every time. One that ends
by the clock stops after as many rounds as the machine managed.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from functools import partial

import numpy as np

from passplan.planning.arrays import Floats, Integers
from passplan.planning.certificate import PriceCertificate
from passplan.planning.clock import Clock
from passplan.planning.problem import Limits
from passplan.planning.result import OPTIMAL_GAP, relative_gap
from passplan.planning.rules.terms import Terms
from passplan.planning.search.bound import BoundSearch, Sweeper, certificate_of, gift_worths, limits_of, option_prices
from passplan.planning.search.fleetarrays import FleetArrays, load_plan, unload_plan
from passplan.planning.search.labels import make_work
from passplan.planning.search.rebuild import Ground, given_to, rebuild
from passplan.planning.search.schedule import worth_of

# A round is about this many labels: some tenths of a second.
_ROUND_LABELS = 4_000_000
_MOST_SWEEPS = 20
# Even where sweeps cost next to nothing, a round of rebuilding looks at so many.
_LEAST_LABELS = 200_000
# Before the first sweep nobody knows how many labels there are to an option.
_LABELS_PER_OPTION = 15
_MOST_OUT = 10
# Loss accepted at first, as a part of what a contact is worth on average, round by round.
_WARMTH = (0.0, 0.02, 0.1, 0.5)
_PATIENCE_ROUNDS = 80
# Fleets below this are never rebuilt in parts.
_LEAST_PART = 20
# So many steps of the bound first: prices overshoot before they are of use. Then it moves every so many rounds or more.
_FIRST_SWEEPS, _BOUND_EVERY = 60, 5
# Of each round only contacts that start within so many seconds of one another are rebuilt: a little time of many
# spacecraft is looked through more often than all of it. None: the whole horizon.
_SPANS_S = (28_800, 14_400, None)
_RATE_MEMORY = 0.7
# Free cliques are dealt out in runs of neighbours, as a contact needs several of them.
_RUN = 64


@dataclass(frozen=True, eq=False)
class Found:
    """What the search found: options of the plan, its bound, and the prices that prove it (None: no proof is kept).

    ``left_alone`` counts spacecraft whose contacts serve a requirement that the search cannot count.
    """

    chosen: tuple[int, ...]
    bound: float
    certificate: PriceCertificate | None
    rounds: int
    left_alone: int


def search_plan(
    arrays: FleetArrays, terms: Terms, limits: Limits, clock: Clock, start: Sequence[int], points: float,
    tell: Callable[[float, float], None] | None = None,
) -> Found:
    """Improve the plan ``start`` (options by number) of ``points`` of shortfall, and bound it.

    ``tell(value, bound)`` is called after each round.
    """
    threads = max(1, limits.threads)
    with ThreadPoolExecutor(threads) as pool:
        return _Rounds(arrays, limits, start, points, pool, threads, clock).run(terms, clock, tell)


class _Rounds:
    def __init__(
        self, arrays: FleetArrays, limits: Limits, start: Sequence[int], points: float, pool: ThreadPoolExecutor,
        threads: int, clock: Clock,
    ) -> None:
        self.arrays, self.limits, self.pool, self.threads = arrays, limits, pool, threads
        self.workers = max(2, threads)
        self.taken, self.size = load_plan(arrays, start)
        fixed = np.array([bool(arrays.uncounted[self.taken[i, : self.size[i]]].any()) for i in range(len(self.size))])
        self.movable = ~fixed
        # Points before value: a second of a command interval outweighs what it can be traded for.
        self.point_worth = 1e5 * (1.0 + float(np.abs(arrays.craft[:, 0] + arrays.spill) @ (
            arrays.craft[:, 3] + arrays.craft[:, 1] * arrays.horizon_s)))
        self.sweeper = Sweeper(arrays, max(1, threads - 1), pool if threads > 2 else None, clock)
        self.work = [make_work() for _ in range(self.workers)]
        self.value, self.points = self._worth()
        # What the search does not count stays as it is.
        self.more_points = points - self.points - arrays.hopeless
        self.bounds = BoundSearch(
            arrays, self.sweeper, self.points + self.more_points, self._first_point_worth(), abs(self.value),
            self._contact_worth())
        self.swept = 0
        self.bound_rate = self.value_rate = 0.0

    def run(self, terms: Terms, clock: Clock, tell: Callable[[float, float], None] | None) -> Found:
        effort = 1 + _LABELS_PER_OPTION * len(self.arrays.option) + len(self.arrays.start_s)
        # One sweep says how much work a sweep is: between two problems it differs a hundredfold.
        sweeps = 1
        rounds, idle, round_s = 0, 0, 0.0
        while not clock.expired() and rounds < self.limits.search_rounds:
            began_s, before = clock.elapsed_s(), (self.value, self.bounds.bound)
            # What ends by the clock need not be the same every time: the last round is as short as it must be.
            part = min(1.0, clock.left_s() / round_s) if round_s > 0.0 else 1.0
            with_bound = (
                self.swept < _FIRST_SWEEPS or rounds % _BOUND_EVERY == 0 or self.bound_rate >= self.value_rate)
            labels = int(part * max(_LEAST_LABELS, min(sweeps * effort, _ROUND_LABELS if rounds == 0 else np.inf)))
            spent = self._round(rounds, sweeps if with_bound and part > 0.7 else 0, labels)
            if spent:
                effort = max(1, spent // sweeps)
                sweeps = max(1, min(_MOST_SWEEPS, round(_ROUND_LABELS / effort)))
            rounds += 1
            round_s = max(clock.elapsed_s() - began_s, round_s if part < 1.0 else 0.0)
            self.value, points = self._worth()
            if points < self.points - 1e-9:
                self.points = points
                self.bounds.restart(points + self.more_points)
            self._learn(before, with_bound)
            idle = 0 if (self.value, self.bounds.bound) != before else idle + 1
            if tell is not None:
                tell(self.value, self.bounds.bound)
            gap = relative_gap(self.value, self.bounds.bound)
            if gap <= max(self.limits.gap, OPTIMAL_GAP) or idle > _PATIENCE_ROUNDS:
                break
        return Found(
            tuple(unload_plan(self.arrays, self.taken, self.size)), self.bounds.bound,
            certificate_of(self.arrays, terms, self.bounds), rounds, int((~self.movable).sum()))

    def _round(self, number: int, sweeps: int, effort: int) -> int:
        """Steps of the bound and rebuilding side by side, or rebuilding in parts; returns labels of all sweeps."""
        prices = option_prices(self.arrays, self.bounds.guide)
        gifts = gift_worths(self.arrays, self.bounds.guide)
        in_parts = sweeps == 0 and self.movable.sum() >= _LEAST_PART
        grounds = self._parts(number) if in_parts else [self._whole()]
        jobs = [partial(self._rebuild, number, k, effort, prices, gifts, ground) for k, ground in enumerate(grounds)]
        if self.threads == 1:
            results = [job() for job in jobs]
            spent = self._improve(sweeps)
        else:
            futures = [self.pool.submit(job) for job in jobs]
            spent = self._improve(sweeps)
            results = [future.result() for future in futures]
        for ground, (taken, size) in zip(grounds, results, strict=True):
            self.taken[ground.crafts], self.size[ground.crafts] = taken[ground.crafts], size[ground.crafts]
        return spent

    def _improve(self, sweeps: int) -> int:
        if sweeps == 0:
            return 0
        self.swept += sweeps
        before = sum(int(work.spent[0]) for work in self.sweeper.work)
        self.bounds.improve(sweeps, self.value)
        return sum(int(work.spent[0]) for work in self.sweeper.work) - before

    def _rebuild(
        self, number: int, worker: int, effort: int, prices: Floats, gifts: Floats, ground: Ground,
    ) -> tuple[Integers, Integers]:
        warmth = _WARMTH[number % len(_WARMTH)] * self._contact_worth()
        taken, size = self.taken.copy(), self.size.copy()
        seed = (self.limits.seed * 1_000_003 + number * 31 + worker) % 2**32
        span_s = min(_SPANS_S[number % len(_SPANS_S)] or self.arrays.horizon_s, self.arrays.horizon_s)
        rebuild(self.arrays, seed, effort, warmth, _MOST_OUT, span_s, prices, gifts, self.point_worth, ground,
                self.work[worker], taken, size)
        return taken, size

    def _whole(self) -> Ground:
        a = self.arrays
        return Ground(self.movable, *(np.ones(n, dtype=bool) for n in (a.cliques, len(a.limit), len(a.promise))))

    def _parts(self, number: int) -> list[Ground]:
        """The fleet, the free cliques, the rows and the guarantees dealt out at random, one part to each worker."""
        rng = np.random.default_rng((self.limits.seed, number))
        counts = len(self.size), self.arrays.cliques // _RUN + 1, len(self.arrays.limit), len(self.arrays.promise)
        crafts, runs, rows, promises = (rng.integers(0, self.workers, n) for n in counts)
        cliques = np.repeat(runs, _RUN)[: self.arrays.cliques]
        return [Ground((crafts == k) & self.movable, cliques == k, rows == k, promises == k)
                for k in range(self.workers)]

    def _learn(self, before: tuple[float, float], with_bound: bool) -> None:
        """Follow what a round's work gains on either side."""
        gained, fell = self.value - before[0], before[1] - self.bounds.bound
        workers = 1 if with_bound else self.workers
        self.value_rate = _RATE_MEMORY * self.value_rate + (1.0 - _RATE_MEMORY) * gained / workers
        if with_bound and np.isfinite(fell):
            self.bound_rate = _RATE_MEMORY * self.bound_rate + (1.0 - _RATE_MEMORY) * max(0.0, fell)

    def _contact_worth(self) -> float:
        """What a contact of the plan is worth, on average."""
        return max(1.0, abs(self.value)) / max(1, int(self.size.sum()))

    def _worth(self) -> tuple[float, float]:
        pairs = [worth_of(self.arrays, i, self.taken[i], self.size[i]) for i in range(len(self.size))]
        given = given_to(self.arrays, self.taken, self.size)
        missed = float(self.arrays.promise @ np.maximum(0.0, 1.0 - given))
        return math.fsum(w for w, _ in pairs), math.fsum(p for _, p in pairs) + missed

    def _first_point_worth(self) -> float:
        """What a point is worth in the bound: much if the plan has only the points that nobody can avoid."""
        if self.points <= 0.0:
            return self.point_worth
        alone = self.sweeper(np.zeros(len(limits_of(self.arrays))), self.point_worth)
        if alone is None or self.points <= alone.points.sum() + 1e-9:
            return self.point_worth
        return float((self.arrays.craft[:, 0] * self.arrays.craft[:, 2]).max(initial=1.0))

