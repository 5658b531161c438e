"""A valid plan at once: requirements first, then whatever adds most, by exact marginal value.

The marginal value of an option is the spacecraft's value with it less the value without it, by its
storage maps, so that a contact after which little is left aboard is not counted twice. Keys are refreshed
lazily: the best candidate is looked at again before it is taken (the "lazy greedy" of Minoux 1978; as the
value is not quite submodular it is a heuristic here).
"""

from __future__ import annotations

import heapq
from collections.abc import Iterable

import numpy as np

from passplan.planning.clock import Clock
from passplan.planning.maps import StorageMaps, storage_maps, worth_of
from passplan.planning.occupancy import Occupancy
from passplan.planning.problem import Problem
from passplan.planning.rules.terms import AtLeast, Recurrence, Terms, Wanted
from passplan.planning.search.fill import fill_up
from passplan.planning.search.fleetarrays import ROUNDING, FleetArrays, load_plan, unload_plan
from passplan.planning.search.schedule import worth_of as counted_of


def plan_greedily(
    problem: Problem, terms: Terms, clock: Clock, *, maps: StorageMaps | None = None, begin: Iterable[int] = (),
    arrays: FleetArrays | None = None,
) -> list[int]:
    """Options of a valid plan, sorted, built on those of ``begin``. Ends early, still valid, when time is up.

    With ``arrays`` most of the work is done by compiled code, which large problems need; where spacecraft have several
    links they say what contacts of the others are worth.
    """
    fills = arrays is not None and bool(np.all(problem.fleet.links == 1))
    if arrays is not None and fills and not (terms.wanted or terms.recurrences or terms.guarantees):
        return _filled(arrays, begin, clock)
    builder = _Builder(problem, terms, maps or storage_maps(problem), arrays)
    for o in begin:
        builder.take(int(o))
    for want in sorted(terms.wanted, key=lambda want: -want.points):
        builder.meet(want)
    for need in terms.recurrences:
        builder.cover(need)
    for promise in terms.guarantees:
        builder.reach(promise)
    if arrays is not None and fills:
        return _filled(arrays, builder.chosen, clock)
    builder.fill(clock)
    return sorted(builder.chosen)


def _filled(arrays: FleetArrays, chosen: Iterable[int], clock: Clock) -> list[int]:
    taken, size = load_plan(arrays, sorted(chosen))
    fill_up(arrays, arrays.limit * (1.0 + ROUNDING) + ROUNDING, taken, size, clock)
    return unload_plan(arrays, taken, size)


class _Builder:
    def __init__(self, problem: Problem, terms: Terms, maps: StorageMaps, arrays: FleetArrays | None) -> None:
        self.problem, self.maps, self.arrays = problem, maps, arrays
        if arrays is not None:
            self.place = np.full(len(problem.options), -1, dtype=np.int64)
            self.place[arrays.option] = np.arange(len(arrays.option))
        self.occupancy = Occupancy(terms, len(problem.options))
        self.chosen: set[int] = set()
        self.of_craft: list[list[int]] = [[] for _ in range(len(problem.fleet))]
        self.worth = [self._worth_of(i, []) for i in range(len(problem.fleet))]
        self.starts = problem.options.start_s.tolist()
        self.crafts = problem.options.spacecraft.tolist()

    def meet(self, want: Wanted) -> None:
        """Take the best option that meets a request, if one fits and none has been taken yet."""
        if self.chosen.isdisjoint(want.options.tolist()):
            self._take_best(want.options.tolist())

    def cover(self, need: Recurrence) -> None:
        """Walk along the interval; at each instant not covered take the option that reaches furthest."""
        spans = sorted(zip(need.options.tolist(), need.start_s.tolist(), need.end_s.tolist(), strict=True))
        reached = need.from_s
        while reached < need.until_s:
            live = [(o, a, b) for o, a, b in spans if b + need.reach_s > reached]
            held = [b for o, a, b in live if o in self.chosen and a <= reached]
            free = [(b, o) for o, a, b in live if a <= reached and o not in self.chosen and self.occupancy.fits(o)]
            if held:
                reached = max(held) + need.reach_s
            elif free:
                furthest = max(b for b, _ in free)
                self._take_best([o for b, o in free if b >= furthest - need.every_s // 8])
            else:
                later = [a for _, a, _ in live if a > reached]
                if not later:
                    return
                reached = min(later)

    def reach(self, promise: AtLeast) -> None:
        """Take what adds most to what is promised, until it is reached or nothing fits any more."""
        amounts = dict(zip(promise.options.tolist(), promise.amounts.tolist(), strict=True))
        missing = promise.need - sum(amount for o, amount in amounts.items() if o in self.chosen)
        # What does not fit will not fit later either.
        rest = [o for o in sorted(amounts, key=lambda o: (-amounts[o], o)) if amounts[o] > 0.0 and o not in self.chosen]
        while missing > 0.0:
            at = next((k for k, o in enumerate(rest) if self.occupancy.fits(o)), len(rest))
            rest = rest[at:]
            if not rest:
                return
            most = min(amounts[rest[0]], missing)
            until = next((k for k, o in enumerate(rest) if amounts[o] < most), len(rest))
            fit = [o for o in rest[:until] if self.occupancy.fits(o)]
            best = -max((self._gain(o), -o) for o in fit)[1]
            self.take(best)
            missing -= amounts[best]
            rest = [o for o in fit if o != best] + rest[until:]

    def fill(self, clock: Clock) -> None:
        """Add options in the order of what they add now, until none adds anything."""
        options, problem = self.problem.options, self.problem
        volume = np.zeros(len(options))
        counts = np.diff(options.piece_offset)
        np.add.at(volume, np.repeat(np.arange(len(options)), counts),
                  options.piece_rate_mb_per_s * (options.piece_end_s - options.piece_start_s))
        weight = problem.fleet.weight[options.spacecraft] + problem.spill_cost_per_mb
        ceiling = volume * weight - problem.price
        heap = [(-c, o) for o, c in enumerate(ceiling.tolist()) if c > 0.0]
        heapq.heapify(heap)
        while heap and not clock.expired():
            _, o = heapq.heappop(heap)
            if not self.occupancy.fits(o):
                continue
            gain = self._gain(o)
            if heap and gain < -heap[0][0]:
                if gain > 0.0:
                    heapq.heappush(heap, (-gain, o))
            elif gain > 0.0:
                self.take(o)

    def _take_best(self, candidates: Iterable[int]) -> None:
        best = max(((self._gain(o), -o) for o in candidates if self.occupancy.fits(o)), default=None)
        if best is not None:
            self.take(-best[1])

    def take(self, option: int) -> None:
        """Choose an option that fits."""
        self.occupancy.add(option)
        self.chosen.add(option)
        craft = self.crafts[option]
        self.of_craft[craft] = self._with(option)
        self.worth[craft] = self._worth_of(craft, self.of_craft[craft])

    def _gain(self, option: int) -> float:
        craft = self.crafts[option]
        with_it: float = self._worth_of(craft, self._with(option))
        return with_it - float(self.worth[craft])

    def _worth_of(self, craft: int, mine: list[int]) -> float:
        if self.arrays is None or self.problem.fleet.links[craft] > 1:
            return float(worth_of(self.problem, self.maps, craft, mine))
        return float(counted_of(self.arrays, craft, self.place[mine], len(mine))[0])

    def _with(self, option: int) -> list[int]:
        return sorted([*self.of_craft[self.crafts[option]], option], key=self.starts.__getitem__)


def worth_beside(problem: Problem, maps: StorageMaps, others: list[int], option: int) -> float:
    """What a spacecraft is worth with an option beside ``others`` of it (in time order, none overlapping it)."""
    starts = problem.options.start_s
    joined = sorted([*others, option], key=lambda o: int(starts[o]))
    return worth_of(problem, maps, int(problem.options.spacecraft[option]), joined)
