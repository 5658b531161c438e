"""A proven ceiling on the value, from prices on the time that spacecraft compete for.

Every clique of a shared lane gets a price p >= 0, and every point of shortfall a price q >= 0. For any
prices, no plan with at most s points is worth more than

    sum over spacecraft of max(worth - prices of its options - q x its points) + sum(p) + q s

because a plan pays each clique at most once (Lagrangian duality; subgradient method: Held, Wolfe and
Crowder 1974). Each maximum is found exactly by the schedule program.
The prices are the certificate: :func:`ceiling` evaluates them again from nothing else.
"""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np

from passplan.planning.problem import Floats, Integers
from passplan.planning.search.compiled import compiled
from passplan.planning.search.fleetarrays import FleetArrays
from passplan.planning.search.schedule import Work, best_schedule, make_work, worth_of

_FIRST_STEP = 0.05
_MEAN_MEMORY = 0.8
_SQUARE_MEMORY = 0.99
_LEAST_SIZE = 0.1
_PATIENCE = 6
_SHRINK = 0.8
# When steps have become this small against the first, it is time for another way.
_LEAST_STEP = 1e-3
_MOST_CONTACTS = 4_096


@dataclass(frozen=True, eq=False)
class Sweep:
    """All spacecraft at one set of prices: worth (n,), points (n,), and how often each clique is used."""

    worth: Floats
    points: Floats
    use: Integers


@compiled
def _sweep(
    a: FleetArrays, low: int, high: int, price: Floats, point_worth: float, work: Work, worth: Floats, points: Floats,
    edges: Integers,
) -> None:
    taken = np.empty(_MOST_CONTACTS, dtype=np.int64)
    for i in range(low, high):
        worth[i], size = best_schedule(a, i, price, point_worth, work, taken)
        _, points[i] = worth_of(a, i, taken, max(0, size))
        for k in range(size):
            for lane in range(a.use_first.shape[1]):
                edges[a.use_first[taken[k], lane]] += 1
                edges[a.use_last[taken[k], lane]] -= 1


class Sweeper:
    """Finds the best schedule of every spacecraft at given prices; parts of the fleet run side by side."""

    def __init__(self, arrays: FleetArrays, threads: int = 1, pool: ThreadPoolExecutor | None = None) -> None:
        self.arrays, self.pool = arrays, pool
        self.parts = np.linspace(0, len(arrays.craft), (threads if pool else 1) + 1).astype(int).tolist()
        self.work = [make_work() for _ in self.parts[1:]]

    def __call__(self, clique_price: Floats, point_worth: float) -> Sweep:
        """All spacecraft at the given prices."""
        a = self.arrays
        price = option_prices(a, clique_price) + a.cost
        worth, points = np.zeros(len(a.craft)), np.zeros(len(a.craft))
        edges = [np.zeros(a.cliques + 1, dtype=np.int64) for _ in self.work]

        def run(k: int) -> None:
            _sweep(a, self.parts[k], self.parts[k + 1], price, point_worth, self.work[k], worth, points, edges[k])

        if self.pool is None:
            run(0)
        else:
            list(self.pool.map(run, range(len(edges))))
        return Sweep(worth, points, np.cumsum(np.sum(edges, axis=0))[:-1])


def option_prices(arrays: FleetArrays, clique_price: Floats) -> Floats:
    """What the cliques of each option cost together, shape (m,)."""
    running = np.concatenate([[0.0], np.cumsum(clique_price)])
    total: Floats = (running[arrays.use_last] - running[arrays.use_first]).sum(axis=1)
    return np.maximum(total, 0.0)


def ceiling(arrays: FleetArrays, clique_price: Floats, point_worth: float, plan_points: float) -> float:
    """The bound that a certificate proves: prices of cliques and of a point, for plans of ``plan_points``."""
    at = Sweeper(arrays)(clique_price, point_worth)
    return float(at.worth.sum() + clique_price.sum() + point_worth * plan_points)


class BoundSearch:
    """Moves prices so that the ceiling falls. It counts iterations and never looks at the clock.

    The subgradient of the ceiling is "times used less one" in each clique. Its steps are scaled clique by
    clique by a running mean and mean square (Adam: Kingma and Ba 2015), which here beats Polyak's step and
    needs no guess of the optimum; the step shrinks while nothing improves.
    """

    def __init__(
        self, arrays: FleetArrays, sweeper: Sweeper, plan_points: float, point_worth: float, contact_worth: float,
    ) -> None:
        self.arrays, self.sweeper, self.plan_points = arrays, sweeper, plan_points
        self.bound = np.inf
        self.price = self.best_price = np.zeros(arrays.cliques)
        self.point_worth = point_worth
        self._mean, self._square = np.zeros(arrays.cliques), np.zeros(arrays.cliques)
        # A first step moves the price of an option by some part of what a contact is worth.
        width = max(1.0, float((arrays.use_last - arrays.use_first).sum(axis=1).mean()))
        self._first_step = self._step = _FIRST_STEP * contact_worth / width
        self._stuck = self._steps = 0

    def improve(self, iterations: int, value: float) -> None:
        """Take subgradient steps. ``value`` is the best plan known."""
        if self._step < _LEAST_STEP * self._first_step:
            self._polish(iterations, value)
            self._step, self._steps = 0.2 * self._first_step, 0
            self._mean, self._square = np.zeros(self.arrays.cliques), np.zeros(self.arrays.cliques)
            return
        for _ in range(iterations):
            at = self.sweeper(self.price, self.point_worth)
            here = float(at.worth.sum() + self.price.sum() + self.point_worth * self.plan_points)
            if not np.isfinite(here):
                # Too many labels at these prices: go back to good ones, and on with care.
                self.price, self._step = self.best_price, self._step * _SHRINK
                self._mean = np.zeros(self.arrays.cliques)
                continue
            self._note(here)
            gradient = at.use - 1.0
            gradient[(self.price <= 0.0) & (gradient < 0.0)] = 0.0
            self._steps += 1
            self._mean = _MEAN_MEMORY * self._mean + (1.0 - _MEAN_MEMORY) * gradient
            self._square = _SQUARE_MEMORY * self._square + (1.0 - _SQUARE_MEMORY) * gradient**2
            mean = self._mean / (1.0 - _MEAN_MEMORY**self._steps)
            size = np.sqrt(self._square / (1.0 - _SQUARE_MEMORY**self._steps))
            self.price = np.maximum(0.0, self.price + self._step * mean / (size + _LEAST_SIZE))

    def _polish(self, iterations: int, value: float) -> None:
        """Polyak's steps (1969) from the best prices: they end exactly where the ceiling meets the plan, if it does."""
        self.price = self.best_price
        for _ in range(iterations):
            at = self.sweeper(self.price, self.point_worth)
            here = float(at.worth.sum() + self.price.sum() + self.point_worth * self.plan_points)
            gradient = at.use - 1.0
            gradient[(self.price <= 0.0) & (gradient < 0.0)] = 0.0
            size = float(gradient @ gradient)
            if not np.isfinite(here) or size <= 0.0:
                break
            self._note(here)
            self.price = np.maximum(0.0, self.price + (here - value) / size * gradient)
        self.price = self.best_price

    def restart(self, plan_points: float) -> None:
        """Forget the bound, not the prices: the plan now has fewer points, so that other plans compete."""
        self.plan_points, self.bound, self._stuck = plan_points, np.inf, 0

    def _note(self, here: float) -> None:
        if here < self.bound - 1e-5 * abs(here) or not np.isfinite(self.bound):
            self._stuck = 0
        if here < self.bound:
            self.bound, self.best_price = here, self.price
        self._stuck += 1
        if self._stuck > _PATIENCE:
            self._step, self._stuck = self._step * _SHRINK, 0
