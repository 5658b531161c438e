"""A proven ceiling on the value, from prices on the time that spacecraft compete for.

Every clique of a shared lane gets a price p >= 0, and every point of shortfall a price q >= 0. For any
prices, no plan with at most s points is worth more than

    sum over spacecraft of max(worth - prices of its options - q x its points) + sum(p) + q s

because a plan pays each clique at most once (Lagrangian duality; Held, Wolfe and Crowder 1974 for the
subgradient method, with the step of Polyak 1969). Each maximum is found exactly by the schedule program.
The prices are the certificate: :func:`ceiling` evaluates them again from nothing else.
"""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field

import numpy as np

from passplan.planning.problem import Floats, Integers
from passplan.planning.search.compiled import compiled
from passplan.planning.search.fleetarrays import FleetArrays
from passplan.planning.search.schedule import best_schedule

_FIRST_STEP = 1.0
_PATIENCE = 12
_MOST_CONTACTS = 4_096


@dataclass(frozen=True, eq=False)
class Sweep:
    """All spacecraft at one set of prices: worth (n,), points (n,), and how often each clique is used."""

    worth: Floats
    points: Floats
    use: Integers


@compiled
def _sweep(
    low: int, high: int, first: Integers, craft: Floats, start_first: Integers, start_s: Integers, node: Integers,
    arrival: Integers, span: Integers, maps: Floats, price: Floats, bits: Integers, renews: Integers, wants: Floats,
    recur: Floats, horizon_s: int, spill: float, point_worth: float, use_first: Integers, use_last: Integers,
    worth: Floats, points: Floats, edges: Integers,
) -> None:
    taken = np.empty(_MOST_CONTACTS, dtype=np.int64)
    for i in range(low, high):
        worth[i], size = best_schedule(
            first[i], first[i + 1], craft[i], start_s[start_first[i]:start_first[i + 1]], node, arrival, span, maps,
            price, bits, renews, wants[i], recur[i], horizon_s, spill, point_worth, taken)
        met = np.int64(0)
        covered, overdue = recur[i, 0], 0.0
        for k in range(size):
            o = taken[k]
            met |= bits[o]
            if renews[o] >= 0:
                overdue += max(0.0, min(float(span[o, 0]), recur[i, 1]) - covered)
                covered = max(covered, float(renews[o]))
            for lane in range(use_first.shape[1]):
                edges[use_first[o, lane]] += 1
                edges[use_last[o, lane]] -= 1
        points[i] = recur[i, 2] * (overdue + max(0.0, recur[i, 1] - covered))
        for b in range(wants.shape[1]):
            if not (met >> b) & 1:
                points[i] += wants[i, b]


def sweep(arrays: FleetArrays, clique_price: Floats, point_worth: float, pool: ThreadPoolExecutor | None, threads: int) -> Sweep:
    """The best schedule of every spacecraft at the given prices; parts of the fleet run side by side."""
    price = option_prices(arrays, clique_price) + arrays.cost
    count = len(arrays.craft)
    worth, points = np.zeros(count), np.zeros(count)
    parts = np.linspace(0, count, max(1, threads if pool else 1) + 1).astype(int)
    edges = [np.zeros(arrays.cliques + 1, dtype=np.int64) for _ in parts[1:]]

    def run(k: int) -> None:
        a = arrays
        _sweep(
            parts[k], parts[k + 1], a.first, a.craft, a.start_first, a.start_s, a.node, a.arrival, a.span, a.maps,
            price, a.bits, a.renews, a.wants, a.recur, a.horizon_s, a.spill, point_worth, a.use_first, a.use_last,
            worth, points, edges[k])

    if pool is None:
        run(0)
    else:
        list(pool.map(run, range(len(edges))))
    return Sweep(worth, points, np.cumsum(sum(edges[1:], edges[0]))[:-1])


def option_prices(arrays: FleetArrays, clique_price: Floats) -> Floats:
    """What the cliques of each option cost together, shape (m,)."""
    running = np.concatenate([[0.0], np.cumsum(clique_price)])
    total: Floats = (running[arrays.use_last] - running[arrays.use_first]).sum(axis=1)
    return np.maximum(total, 0.0)


def ceiling(arrays: FleetArrays, clique_price: Floats, point_worth: float, plan_points: float) -> float:
    """The bound that a certificate proves: prices of cliques and of a point, for plans of ``plan_points``."""
    at = sweep(arrays, clique_price, point_worth, None, 1)
    return float(at.worth.sum() + clique_price.sum() + point_worth * plan_points)


@dataclass(eq=False)
class BoundSearch:
    """Moves prices so that the ceiling falls. Deterministic: it looks at iterations, never at the clock."""

    arrays: FleetArrays
    plan_points: float
    point_worth: float
    threads: int = 1
    pool: ThreadPoolExecutor | None = None
    bound: float = np.inf
    best_price: Floats = field(default_factory=lambda: np.zeros(0))
    best_point_worth: float = 0.0

    def __post_init__(self) -> None:
        self.price = np.zeros(self.arrays.cliques)
        self.best_price = self.price
        self.best_point_worth = self.point_worth
        self._step, self._stuck = _FIRST_STEP, 0
        self._direction = np.zeros(self.arrays.cliques)

    def improve(self, iterations: int, value: float) -> None:
        """Take subgradient steps; ``value`` is the best plan known, which the ceiling cannot go below."""
        for _ in range(iterations):
            at = sweep(self.arrays, self.price, self.point_worth, self.pool, self.threads)
            here = float(at.worth.sum() + self.price.sum() + self.point_worth * self.plan_points)
            if here < self.bound - 1e-9 * abs(self.bound) or not np.isfinite(self.bound):
                if here < self.bound * (1.0 - 1e-5) or not np.isfinite(self.bound):
                    self._stuck = 0
                self.bound, self.best_price, self.best_point_worth = here, self.price.copy(), self.point_worth
            self._stuck += 1
            if self._stuck > _PATIENCE:
                self._step, self._stuck = self._step * 0.7, 0
                self.price, self.point_worth = self.best_price.copy(), self.best_point_worth
                continue
            # The direction looks back a little, which damps the zigzag (Camerini, Fratta and Maffioli 1975).
            gradient = at.use - 1.0
            gradient[(self.price <= 0.0) & (gradient < 0.0)] = 0.0
            self._direction = gradient + 0.6 * self._direction
            self._direction[(self.price <= 0.0) & (self._direction < 0.0)] = 0.0
            size = float(self._direction @ self._direction)
            if size <= 0.0:
                break
            target = max(here - value, 1e-6 * abs(here))
            self.price = np.maximum(0.0, self.price + self._step * target / size * self._direction)
