"""A proven ceiling on the value, from prices on the time that spacecraft compete for.

Every clique of a shared lane gets a price p >= 0, every row a price r >= 0 for its whole limit, and every point of
shortfall a price q >= 0. For any prices, no plan with at most s points is worth more than

    sum over spacecraft of max(worth - prices of its options - q x its points) + sum(p) + sum(r) + q s

(s without what no option can meet), because a plan pays each clique at most once and each row at most up to its limit
(Lagrangian duality; subgradient method: Held, Wolfe and Crowder 1974). Each maximum is found by the schedule program,
without the rows; of spacecraft with classes of data, a ceiling of it. A guarantee is a row the other way round: what a
plan gives to it is paid for with up to q times its points, and the price of all that is due is taken off.
The prices are the certificate: ``certificate.py`` evaluates them again by other code.
"""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np

from passplan.planning.arrays import Floats, Integers, ragged_ranges
from passplan.planning.certificate import PriceCertificate
from passplan.planning.clock import Clock
from passplan.planning.rules.terms import Terms
from passplan.planning.search.compiled import compiled
from passplan.planning.search.fleetarrays import FleetArrays
from passplan.planning.search.labels import Work, make_work
from passplan.planning.search.schedule import best_schedule, worth_of

# The first step moves the price of an option by about this part of what a contact is worth; after so many steps it
# is half as long, then a third, and so on.
_FIRST_STEP = 0.1
_HALF_AFTER = 10.0
_MEAN_MEMORY = 0.9
_SQUARE_MEMORY = 0.99
_LEAST_SIZE = 0.1
_SHRINK = 0.5
# After so many steps it is time for another way, and then for a new start from the best prices with steps this long.
_STEPS = 1_500
_NEXT_STEP = 0.1
# All prices together are at least this part of the value: where time costs nothing at all, schedules are full of
# contacts that bring nothing down, and what is used says nothing about what is needed.
_FLOOR = 1e-7
# Where labels run out of room, ceilings of a spacecraft are loosened, at first by this part of what fills its storage
# is worth, then four times as far, and so on.
_LEAST_SLACK, _TRIES = 1e-6, 12
# Spacecraft swept between two looks at the clock.
_AT_A_TIME = 16
# A ceiling without a search is at rest after so many groups of so many steps that lowered it by less than this part.
_PATIENCE, _FEW, _REST = 12, 5, 1e-5


@dataclass(frozen=True, eq=False)
class Sweep:
    """All spacecraft at one set of prices: worth (n,), points (n,), and how far each limit is used (c + r + g,)."""

    worth: Floats
    points: Floats
    use: Floats


@compiled
def _sweep(
    a: FleetArrays, low: int, high: int, price: Floats, point_worth: float, work: Work, worth: Floats, points: Floats,
    edges: Integers, loads: Floats, gifts: Floats,
) -> None:
    taken = np.empty(a.most_contacts, dtype=np.int64)
    no_room, slack = np.empty(0), work.slack[0]
    for i in range(low, high):
        worth[i], size = best_schedule(a, i, price, point_worth, no_room, work, taken)
        for _ in range(_TRIES):
            if size >= 0:
                break
            # No room for all labels: a looser ceiling is better than none.
            work.slack[0] = max(4.0 * work.slack[0], _LEAST_SLACK * (a.craft[i, 0] + a.spill) * a.craft[i, 2])
            worth[i], size = best_schedule(a, i, price, point_worth, no_room, work, taken)
        work.slack[0] = slack
        _, points[i] = worth_of(a, i, taken, max(0, size))
        for k in range(size):
            for u in range(a.use_at[taken[k]], a.use_at[taken[k] + 1]):
                edges[a.use_first[u]] += 1
                edges[a.use_last[u]] -= 1
            for e in range(a.load_at[taken[k]], a.load_at[taken[k] + 1]):
                loads[a.load_row[e]] += a.load_amount[e]
            for e in range(a.give_at[taken[k]], a.give_at[taken[k] + 1]):
                gifts[a.give_to[e]] += a.give_amount[e]


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

    def __call__(self, price: Floats, point_worth: float, slack: float = 0.0) -> Sweep | None:
        """All spacecraft at the given prices (c + r + g,); None if time is up before they are through.

        Worths are ceilings: with ``slack`` the labels of a spacecraft that are ahead by so much less of one another are
        not told apart, which is faster.
        """
        a = self.arrays
        option_price = option_prices(a, price) - gift_worths(a, price) + a.cost
        worth, points = np.zeros(len(a.craft)), np.zeros(len(a.craft))
        edges = [np.zeros(a.cliques + 1, dtype=np.int64) for _ in self.work]
        loads = [np.zeros(len(a.limit)) for _ in self.work]
        gifts = [np.zeros(len(a.promise)) for _ in self.work]

        def run(k: int) -> bool:
            self.work[k].slack[0] = slack
            for low in range(self.parts[k], self.parts[k + 1], _AT_A_TIME):
                if self.clock is not None and self.clock.expired():
                    return False
                _sweep(a, low, min(low + _AT_A_TIME, self.parts[k + 1]), option_price, point_worth, self.work[k],
                       worth, points, edges[k], loads[k], gifts[k])
            return True

        if not all([run(0)] if self.pool is None else list(self.pool.map(run, range(len(edges))))):
            return None
        use = np.concatenate([np.cumsum(np.sum(edges, axis=0))[:-1], np.sum(loads, axis=0) / self._unit,
                              -np.sum(gifts, axis=0)])
        return Sweep(worth, points, use)


def units(arrays: FleetArrays) -> Floats:
    """What the amounts of each row are counted in for its price: its limit, or 1 where that is 0."""
    return np.where(arrays.limit > 0.0, arrays.limit, 1.0)


def limits_of(arrays: FleetArrays) -> Floats:
    """How much of each clique and row there is, in the units of their prices, and minus what each guarantee is due.

    Shape (c + r + g,).
    """
    return np.concatenate([np.ones(arrays.cliques), arrays.limit / units(arrays), -np.ones(len(arrays.promise))])


def option_prices(arrays: FleetArrays, price: Floats) -> Floats:
    """What the cliques and rows of each option cost together, shape (m,)."""
    total = np.zeros(len(arrays.option))
    rows = slice(arrays.cliques, arrays.cliques + len(arrays.limit))
    _add_prices(arrays, price[: arrays.cliques], price[rows] / units(arrays), total)
    return total


def gift_worths(arrays: FleetArrays, price: Floats) -> Floats:
    """What each option is paid for what it gives to guarantees, shape (m,)."""
    owner = np.repeat(np.arange(len(arrays.option)), np.diff(arrays.give_at))
    paid = arrays.give_amount * price[arrays.cliques + len(arrays.limit):][arrays.give_to]
    total = np.zeros(len(arrays.option))
    np.add.at(total, owner, paid)
    return total


@compiled
def _add_prices(a: FleetArrays, clique_price: Floats, row_price: Floats, total: Floats) -> None:
    for o in range(len(total)):
        for u in range(a.use_at[o], a.use_at[o + 1]):
            for c in range(a.use_first[u], a.use_last[u]):
                total[o] += clique_price[c]
        for e in range(a.load_at[o], a.load_at[o + 1]):
            total[o] += a.load_amount[e] * row_price[a.load_row[e]]


def certificate_of(arrays: FleetArrays, terms: Terms, bounds: BoundSearch) -> PriceCertificate:
    """The best prices found, in the words of the terms."""
    counts = np.array([len(one) for one in terms.rows], dtype=np.int64)
    rows = arrays.cliques + len(arrays.limit)
    return PriceCertificate(
        arrays.clique_lane, arrays.clique_s, bounds.best_price[: arrays.cliques],
        np.repeat(np.arange(len(counts)), counts), ragged_ranges(np.zeros_like(counts), counts),
        bounds.best_price[arrays.cliques:rows] / units(arrays), bounds.best_price[rows:], bounds.point_worth,
        bounds.plan_points)


class BoundSearch:
    """Moves prices so that the ceiling falls. It counts iterations and never looks at the clock.

    The subgradient of the ceiling is "how far used, less how much there is" in each clique and row. Its steps are
    scaled one by one by a running mean and mean square (Adam: Kingma and Ba 2015), which here beats Polyak's step and
    needs no guess of the optimum; the steps shrink as 1 / n.
    """

    def __init__(
        self, arrays: FleetArrays, sweeper: Sweeper, plan_points: float, point_worth: float, worth: float,
        contact_worth: float,
    ) -> None:
        self.arrays, self.sweeper, self.plan_points = arrays, sweeper, plan_points
        self.price: Floats
        self.best_price: Floats
        self.limits = limits_of(arrays)
        self.bound = np.inf
        self.point_worth = point_worth
        free = np.full(arrays.cliques + len(arrays.limit), np.inf)
        self.top = np.concatenate([free, point_worth * arrays.promise])
        self.floor: Floats = np.minimum(self.top, _FLOOR * worth / max(1, len(self.limits)))
        self._start = self.price = self.best_price = self.floor
        self._mean, self._square = np.zeros(len(self.limits)), np.zeros(len(self.limits))
        # An option pays the prices of so many cliques, and of rows as if of so many; a few may pay far more of those.
        rows = np.concatenate([np.zeros(arrays.cliques), np.ones(len(arrays.limit) + len(arrays.promise))])
        cliques = float((arrays.use_last - arrays.use_first).sum()) / max(1, len(arrays.option))
        width = max(1.0, cliques + float(np.median([*option_prices(arrays, rows), 0.0])))
        self._step = _FIRST_STEP * contact_worth / width
        self._steps = 0

    @property
    def guide(self) -> Floats:
        """Prices that tell a plan what others need: the best ones, or those in hand where the best are still nothing.

        At first prices overshoot, so that the lowest ceiling is that of the start for a while.
        """
        return self.price if self.best_price is self._start else self.best_price

    def improve(self, iterations: int, value: float) -> None:
        """Take subgradient steps, until time is up. ``value`` is the best plan known."""
        if self._steps >= _STEPS:
            self._polish(iterations, value)
            self._step, self._steps = self._step * _NEXT_STEP, 0
            self._mean, self._square = np.zeros(len(self.limits)), np.zeros(len(self.limits))
            return
        for _ in range(iterations):
            found = self._evaluate()
            if found is None:
                return
            here, gradient = found
            if not np.isfinite(here):
                # Too many labels at these prices: go back to good ones, and on with care.
                self.price, self._step = self.best_price, self._step * _SHRINK
                self._mean = np.zeros(len(self.limits))
                continue
            self._steps += 1
            self._mean = _MEAN_MEMORY * self._mean + (1.0 - _MEAN_MEMORY) * gradient
            self._square = _SQUARE_MEMORY * self._square + (1.0 - _SQUARE_MEMORY) * gradient**2
            mean = self._mean / (1.0 - _MEAN_MEMORY**self._steps)
            size = np.sqrt(self._square / (1.0 - _SQUARE_MEMORY**self._steps))
            step = self._step / (1.0 + self._steps / _HALF_AFTER)
            self.price = np.clip(self.price + step * mean / (size + _LEAST_SIZE), self.floor, self.top)

    def _polish(self, iterations: int, value: float) -> None:
        """Polyak's steps (1969) from the best prices: they end exactly where the ceiling meets the plan, if it does."""
        self.price = self.best_price
        for _ in range(iterations):
            found = self._evaluate()
            if found is None:
                break
            here, gradient = found
            size = float(gradient @ gradient)
            if not np.isfinite(here) or size <= 0.0:
                break
            self.price = np.clip(self.price + (here - value) / size * gradient, self.floor, self.top)
        self.price = self.best_price

    def restart(self, plan_points: float) -> None:
        """Forget the bound, not the prices: the plan now has fewer points, so that other plans compete."""
        self.plan_points, self.bound = plan_points, np.inf

    def _evaluate(self) -> tuple[float, Floats] | None:
        """The ceiling at the present prices, noted if it is the lowest, and which way each price should go.

        None if time is up before it is known.
        """
        at = self.sweeper(self.price, self.point_worth)
        if at is None:
            return None
        here = float(at.worth.sum() + self.price @ self.limits + self.point_worth * self.plan_points)
        if here < self.bound:
            self.bound, self.best_price = here, self.price
        gradient = at.use - self.limits
        gradient[(self.price <= self.floor) & (gradient < 0.0)] = 0.0
        gradient[(self.price >= self.top) & (gradient > 0.0)] = 0.0
        return here, gradient


def lowest_ceiling(
    arrays: FleetArrays, taken: Integers, size: Integers, more_points: float, threads: int, clock: Clock,
    tell: Callable[[float, float], None],
) -> float:
    """The bound alone, for a plan (``taken``, ``size``) that stays as it is, until it comes to rest or time is up.

    ``more_points`` are points of the plan that the schedule program does not count. ``tell(value, bound)`` is called
    after every few steps.
    """
    pairs = [worth_of(arrays, i, taken[i], size[i]) for i in range(len(size))]
    value, points = sum(worth for worth, _ in pairs), sum(points for _, points in pairs)
    point_worth = float((arrays.craft[:, 0] * arrays.craft[:, 2] + arrays.spill * arrays.craft[:, 2]).max(initial=1.0))
    with ThreadPoolExecutor(max(1, threads)) as pool:
        sweeper = Sweeper(arrays, threads, pool if threads > 1 else None, clock)
        bounds = BoundSearch(
            arrays, sweeper, points + more_points - arrays.hopeless, point_worth, abs(value),
            abs(value) / max(1, int(size.sum())))
        idle = 0
        while not clock.expired() and idle < _PATIENCE:
            before = bounds.bound
            bounds.improve(_FEW, value)
            tell(value, bounds.bound)
            idle = 0 if bounds.bound < before - _REST * abs(before) or not np.isfinite(before) else idle + 1
    return bounds.bound
