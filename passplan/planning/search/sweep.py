"""All spacecraft at one set of prices, each with its best schedule."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np

from passplan.planning.arrays import Floats, Integers
from passplan.planning.clock import Clock
from passplan.planning.search.compiled import compiled
from passplan.planning.search.dues import give
from passplan.planning.search.fleetarrays import FleetArrays
from passplan.planning.search.labels import Work, make_work
from passplan.planning.search.prices import option_prices, units
from passplan.planning.search.schedule import best_schedule, points_of

# Where labels run out of room, ceilings of a spacecraft are loosened, at first by this part of what fills its storage
# is worth, then four times as far, and so on.
_LEAST_SLACK, _TRIES = 1e-6, 12
# Spacecraft swept between two looks at the clock.
_AT_A_TIME = 16


@dataclass(frozen=True, eq=False)
class Sweep:
    """All spacecraft at one set of prices: worth (n,), points (n,), and how far each limit is used (c + r + d,).

    ``taken`` and ``size`` are their schedules.
    """

    worth: Floats
    points: Floats
    use: Floats
    taken: Integers
    size: Integers


@compiled
def _sweep(
    a: FleetArrays, low: int, high: int, price: Floats, point_worth: float, work: Work, worth: Floats, points: Floats,
    edges: Integers, loads: Floats, given: Floats, taken: Integers, size: Integers,
) -> None:
    no_room, slack = np.empty(0), work.slack[0]
    for i in range(low, high):
        count = -1
        for _ in range(1 + _TRIES):
            worth[i], count = best_schedule(a, i, price, point_worth, no_room, work, taken[i])
            if count >= 0:
                break
            # No room for all labels: a looser ceiling is better than none.
            work.slack[0] = max(4.0 * work.slack[0], _LEAST_SLACK * (a.craft[i, 0] + a.spill) * a.craft[i, 2])
        work.slack[0] = slack
        size[i] = max(0, count)
        points[i] = points_of(a, i, taken[i], size[i])
        for k in range(size[i]):
            o = taken[i, k]
            for u in range(a.use_at[o], a.use_at[o + 1]):
                edges[a.use_first[u]] += 1
                edges[a.use_last[u]] -= 1
            for e in range(a.load_at[o], a.load_at[o + 1]):
                loads[a.load_row[e]] += a.load_amount[e]
        give(a.dues.at, a.dues.to, a.dues.share, taken[i], size[i], 1.0, given)


class Sweeper:
    """Finds the best schedule of every spacecraft at given prices; parts of the fleet run side by side."""

    def __init__(
        self, arrays: FleetArrays, threads: int = 1, pool: ThreadPoolExecutor | None = None,
        clock: Clock | None = None,
    ) -> None:
        self.arrays, self.pool, self.clock = arrays, pool, clock
        self.parts = np.linspace(0, len(arrays.craft), (threads if pool else 1) + 1).astype(int).tolist()
        self.work = [make_work() for _ in self.parts[1:]]
        self._unit = units(arrays)

    def __call__(self, price: Floats, point_worth: float, arrays: FleetArrays | None = None) -> Sweep | None:
        """All spacecraft at the given prices (c + r + d,), of another objective if ``arrays`` are given.

        None if time is up before they are through.
        """
        a = self.arrays if arrays is None else arrays
        option_price = option_prices(a, price) + a.cost
        worth, points = np.zeros(len(a.craft)), np.zeros(len(a.craft))
        taken, size = np.zeros((len(a.craft), a.most_contacts), dtype=np.int64), np.zeros(len(a.craft), dtype=np.int64)
        edges = [np.zeros(a.cliques + 1, dtype=np.int64) for _ in self.work]
        loads, given = ([np.zeros(len(x)) for _ in self.work] for x in (a.limit, a.dues.points))

        def run(k: int) -> bool:
            for low in range(self.parts[k], self.parts[k + 1], _AT_A_TIME):
                if self.clock is not None and self.clock.expired():
                    return False
                _sweep(a, low, min(low + _AT_A_TIME, self.parts[k + 1]), option_price, point_worth, self.work[k],
                       worth, points, edges[k], loads[k], given[k], taken, size)
            return True

        if not all([run(0)] if self.pool is None else list(self.pool.map(run, range(len(edges))))):
            return None
        use = np.concatenate([np.sum(edges, axis=0).cumsum()[:-1], np.sum(loads, axis=0), np.sum(given, axis=0)])
        return Sweep(worth, points, use / self._unit, taken, size)
