"""A proven ceiling on the value, from prices on the time that spacecraft compete for.

Every clique of a shared lane gets a price p >= 0, every row a price r >= 0 for its whole limit, every point of
shortfall a price q >= 0, and every due (see ``dues.py``) a reward v from 0 to q x its points for meeting it. For any
of them, no plan with at most s points is worth more than

    sum over spacecraft of max(worth - prices + rewards of its options - q x its points)
    + sum(p) + sum(r) - sum(v) + q s

because a plan pays each clique at most once and each row at most up to its limit, and what it is not rewarded for a
due it owes in points (Lagrangian duality; subgradient method: Held, Wolfe and Crowder 1974). Each maximum is found
exactly by the schedule program, without the rows. Objectives that are held at what was reached are relaxed in the
same way, each at a price of its own (``Hold``). The prices are the certificate: ``certificate.py`` evaluates them again
by other code.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np

from passplan.planning.arrays import Floats, Integers, ragged_ranges
from passplan.planning.certificate import PriceCertificate
from passplan.planning.clock import Clock
from passplan.planning.rules.terms import Terms
from passplan.planning.search.compiled import compiled
from passplan.planning.search.dues import give
from passplan.planning.search.fleetarrays import FleetArrays, blended
from passplan.planning.search.labels import Work, make_work
from passplan.planning.search.schedule import best_schedule, worth_of

# The first step moves the price of an option by about this part of what a contact is worth; after so many steps it
# is half as long, then a third, and so on. Rows need longer ones: an option is in many, each with a price of its own.
_FIRST_STEP, _FIRST_STEP_WITH_ROWS = 0.1, 0.3
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
# The prices of a point and of what is held change by this part at first.
_FIRST_CHANGE = 0.2
# Of what is held, this part too much or too little is a step in full.
_HELD_SIZE = 0.01


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


@dataclass(frozen=True, eq=False)
class Hold:
    """An objective over the same options that is to come to at least ``least``, without its base."""

    arrays: FleetArrays
    least: float


@compiled
def _sweep(
    a: FleetArrays, low: int, high: int, price: Floats, point_worth: float, work: Work, worth: Floats, points: Floats,
    edges: Integers, loads: Floats, given: Floats, taken: Integers, size: Integers,
) -> None:
    no_room, slack = np.empty(0), work.slack[0]
    for i in range(low, high):
        worth[i], count = best_schedule(a, i, price, point_worth, no_room, work, taken[i])
        for _ in range(_TRIES):
            if count >= 0:
                break
            # No room for all labels: a looser ceiling is better than none.
            work.slack[0] = max(4.0 * work.slack[0], _LEAST_SLACK * (a.craft[i, 0] + a.spill) * a.craft[i, 2])
            worth[i], count = best_schedule(a, i, price, point_worth, no_room, work, taken[i])
        work.slack[0] = slack
        size[i] = max(0, count)
        _, points[i] = worth_of(a, i, taken[i], size[i])
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

    def __call__(
        self, price: Floats, point_worth: float, slack: float = 0.0, arrays: FleetArrays | None = None,
    ) -> Sweep | None:
        """All spacecraft at the given prices (c + r + d,), of another objective if ``arrays`` are given.

        None if time is up before they are through. Worths are ceilings: with ``slack`` the labels of a spacecraft that
        are ahead by so much less of one another are not told apart, which is faster.
        """
        a = self.arrays if arrays is None else arrays
        option_price = option_prices(a, price) + a.cost
        worth, points = np.zeros(len(a.craft)), np.zeros(len(a.craft))
        taken, size = np.zeros((len(a.craft), a.most_contacts), dtype=np.int64), np.zeros(len(a.craft), dtype=np.int64)
        edges = [np.zeros(a.cliques + 1, dtype=np.int64) for _ in self.work]
        loads, given = ([np.zeros(len(x)) for _ in self.work] for x in (a.limit, a.dues.points))

        def run(k: int) -> bool:
            self.work[k].slack[0] = slack
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


def units(arrays: FleetArrays) -> Floats:
    """What each clique, row and due is counted in for its price, shape (c + r + d,): about what a contact uses."""
    rows = _mean(arrays.load_row, arrays.load_amount, len(arrays.limit))
    dues = _mean(arrays.dues.to, arrays.dues.share, len(arrays.dues.points))
    return np.concatenate([np.ones(arrays.cliques), rows, dues])


def _mean(group: Integers, amounts: Floats, count: int) -> Floats:
    """The mean amount of each group, 1 of one that is empty."""
    total, size = np.bincount(group, weights=amounts, minlength=count), np.bincount(group, minlength=count)
    mean: Floats = np.where(total > 0.0, total / np.maximum(size, 1), 1.0)
    return mean


def limits_of(arrays: FleetArrays) -> Floats:
    """How much of each clique and row there is and of each due is due, in the units of their prices, (c + r + d,)."""
    whole = np.concatenate([np.ones(arrays.cliques), arrays.limit, np.ones(len(arrays.dues.points))])
    return np.asarray(whole / units(arrays))


def option_prices(arrays: FleetArrays, price: Floats, *, dues: bool = True) -> Floats:
    """What the cliques and rows of each option cost together, less what dues reward it with, shape (m,)."""
    total = np.zeros(len(arrays.option))
    each = price / units(arrays)
    rows, last = arrays.cliques, arrays.cliques + len(arrays.limit)
    _add_prices(arrays, each[:rows], each[rows:last], total)
    if dues:
        owner = np.repeat(np.arange(len(total)), np.diff(arrays.dues.at))
        total += np.bincount(owner, weights=arrays.dues.share * each[last:][arrays.dues.to], minlength=len(total))
    return total


@compiled
def _add_prices(a: FleetArrays, clique_price: Floats, row_price: Floats, total: Floats) -> None:
    use_at, use_first, use_last = a.use_at, a.use_first, a.use_last
    load_at, load_row, load_amount = a.load_at, a.load_row, a.load_amount
    for o in range(len(total)):
        for u in range(use_at[o], use_at[o + 1]):
            for c in range(use_first[u], use_last[u]):
                total[o] += clique_price[c]
        for e in range(load_at[o], load_at[o + 1]):
            total[o] += load_amount[e] * row_price[load_row[e]]


def certificate_of(arrays: FleetArrays, terms: Terms, bounds: BoundSearch) -> PriceCertificate:
    """The best prices found, in the words of the terms."""
    counts = np.array([len(rows) for rows in terms.rows], dtype=np.int64)
    each = bounds.best_price / units(arrays)
    rows, last = arrays.cliques, arrays.cliques + len(arrays.limit)
    reward = np.zeros(len(terms.guarantees) + len(terms.wanted))
    reward[arrays.dues.number] = -each[last:]
    return PriceCertificate(
        arrays.clique_lane, arrays.clique_s, each[:rows],
        np.repeat(np.arange(len(counts)), counts), ragged_ranges(np.zeros_like(counts), counts), each[rows:last],
        bounds.point_worth, bounds.plan_points, reward)


class _Adam:
    """Steps scaled one by one by a running mean and mean square (Adam: Kingma and Ba 2015).

    This beats Polyak's step here, and needs no guess of the optimum.
    """

    def __init__(self, count: int) -> None:
        self._mean, self._square, self._steps = np.zeros(count), np.zeros(count), 0

    def direction(self, gradient: Floats) -> Floats:
        """Which way to go, each about 1 in size."""
        self._steps += 1
        self._mean = _MEAN_MEMORY * self._mean + (1.0 - _MEAN_MEMORY) * gradient
        self._square = _SQUARE_MEMORY * self._square + (1.0 - _SQUARE_MEMORY) * gradient**2
        mean = self._mean / (1.0 - _MEAN_MEMORY**self._steps)
        size = np.sqrt(self._square / (1.0 - _SQUARE_MEMORY**self._steps))
        return mean / (size + _LEAST_SIZE)

    def brake(self) -> None:
        """Forget which way it went."""
        self._mean = np.zeros(len(self._mean))


class BoundSearch:
    """Moves prices so that the ceiling falls. It counts iterations and never looks at the clock.

    The subgradient of the ceiling is "how far used, less how much there is" in each clique, row and due. Steps shrink
    as 1 / n. The prices of a point of shortfall and of what is held change by factors.
    """

    def __init__(
        self, arrays: FleetArrays, sweeper: Sweeper, plan_points: float, point_worth: float, worth: float,
        contact_worth: float, *, points_move: bool = False, holds: Sequence[tuple[Hold, float]] = (),
        price: Floats | None = None,
    ) -> None:
        """``worth`` and ``contact_worth`` are those of a plan, about. ``holds`` come with a first guess of their price.

        ``points_move`` says that ``point_worth`` is no more than a first guess either.
        """
        self.arrays, self.sweeper, self.plan_points = arrays, sweeper, plan_points
        self.limits = limits_of(arrays)
        self.bound, self.slack = np.inf, 0.0
        self.floor = np.full(len(self.limits), _FLOOR * worth / max(1, len(self.limits)))
        self.ceiling = np.full(len(self.limits), np.inf)
        self._due = slice(arrays.cliques + len(arrays.limit), None)
        self.holds = [hold for hold, _ in holds]
        self.point_worth, self.point_rate = point_worth, 1.0 if points_move else 0.0
        self.hold_price = np.array([share for _, share in holds], dtype=float)
        self._hopeless = np.bincount(arrays.dues.to, minlength=len(arrays.dues.points)) == 0
        self._point_worth, self._hold_price = point_worth, self.hold_price
        self._keep_within()
        begin = np.zeros(len(self.limits)) if price is None else price
        self.price = self.best_price = np.clip(begin, self.floor, self.ceiling)
        self._start = self.price if price is None else None
        first = _FIRST_STEP_WITH_ROWS if len(arrays.limit) else _FIRST_STEP
        self._step = first * contact_worth / self._widths()
        self._steps = 0
        self._adam, self._level_adam = _Adam(len(self.limits)), _Adam(1 + len(self.holds))

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
            self._adam, self._level_adam = _Adam(len(self.limits)), _Adam(1 + len(self.holds))
            return
        for _ in range(iterations):
            found = self._evaluate()
            if found is None:
                return
            here, gradient, levels = found
            if not np.isfinite(here):
                # Too many labels at these prices: go back to good ones, and on with care.
                self.price, self._step = self.best_price, self._step * _SHRINK
                self._point_worth, self._hold_price = self.point_worth, self.hold_price
                self._adam.brake()
                continue
            self._steps += 1
            shrunk = 1.0 / (1.0 + self._steps / _HALF_AFTER)
            change = np.exp(_FIRST_CHANGE * shrunk * self._level_adam.direction(levels))
            self._point_worth *= float(change[0])
            self._hold_price = self._hold_price * change[1:]
            self._keep_within()
            price = self.price + self._step * shrunk * self._adam.direction(gradient)
            self.price = np.clip(price, self.floor, self.ceiling)

    def _polish(self, iterations: int, value: float) -> None:
        """Polyak's steps (1969) from the best prices: they end exactly where the ceiling meets the plan, if it does."""
        self.price, self._point_worth, self._hold_price = self.best_price, self.point_worth, self.hold_price
        self._keep_within()
        for _ in range(iterations):
            found = self._evaluate()
            if found is None:
                break
            here, gradient, _ = found
            size = float(gradient @ gradient)
            if not np.isfinite(here) or size <= 0.0:
                break
            self.price = np.clip(self.price + (here - value) / size * gradient, self.floor, self.ceiling)
        self.price = self.best_price

    def settle(self) -> None:
        """Find the ceiling at the best prices once more without slack, if there is time."""
        if self.slack > 0.0:
            at = self.sweeper(self.best_price, self.point_worth, 0.0, self._blended(self.hold_price))
            if at is not None:
                here = self._ceiling(at, self.best_price, self.point_worth, self.hold_price)
                self.bound = min(self.bound, here)

    def restart(self, plan_points: float) -> None:
        """Forget the bound, not the prices: the plan now has fewer points, so that other plans compete."""
        self.plan_points, self.bound = plan_points, np.inf

    def _evaluate(self) -> tuple[float, Floats, Floats] | None:
        """The ceiling at the present prices, noted if it is the lowest, and which way prices should go.

        None if time is up before it is known.
        """
        at = self.sweeper(self.price, self._point_worth, self.slack, self._blended(self._hold_price))
        if at is None:
            return None
        here = self._ceiling(at, self.price, self._point_worth, self._hold_price)
        if here < self.bound:
            self.bound, self.best_price = here, self.price
            self.point_worth, self.hold_price = self._point_worth, self._hold_price
        gradient = at.use - self.limits
        gradient[(self.price <= self.floor) & (gradient < 0.0)] = 0.0
        gradient[(self.price >= self.ceiling) & (gradient > 0.0)] = 0.0
        return here, gradient, self._levels(at) if np.isfinite(here) else np.zeros(1 + len(self.holds))

    def _levels(self, at: Sweep) -> Floats:
        """Which way the prices of a point and of what is held should go."""
        # A reward that is as high as it may be moves with the price of a point.
        full = self.price[self._due] <= self.floor[self._due]
        owed = (full * (1.0 - at.use[self._due] / self.limits[self._due])) @ self.arrays.dues.points
        levels = [self.point_rate * float(at.points.sum() + owed - self.plan_points)]
        for hold in self.holds:
            less = hold.least - total_worth(hold.arrays, at.taken, at.size)
            levels.append(less / (_HELD_SIZE * max(1.0, abs(hold.least))))
        return np.asarray(np.clip(np.array(levels), -1.0, 1.0))

    def _keep_within(self) -> None:
        """A due is never rewarded beyond its points, and one that nothing can meet not below them."""
        self.floor[self._due] = -self._point_worth * self.arrays.dues.points / self.limits[self._due]
        self.ceiling[self._due] = np.where(self._hopeless, self.floor[self._due], 0.0)

    def _widths(self) -> Floats:
        """Among how many of its kind the price of a contact is shared out, shape (c + r + d,)."""
        a = self.arrays
        cliques = max(1.0, float((a.use_last - a.use_first).sum()) / max(1, len(a.option)))
        loads = np.diff(a.load_at)
        rows = _mean(a.load_row, np.repeat(loads, loads).astype(float), len(a.limit))
        widths: Floats = np.concatenate([np.full(a.cliques, cliques), rows, np.ones(len(a.dues.points))])
        return widths

    def _ceiling(self, at: Sweep, price: Floats, point_worth: float, hold_price: Floats) -> float:
        held = sum(hold.least * share for hold, share in zip(self.holds, hold_price.tolist(), strict=True))
        return float(at.worth.sum() + price @ self.limits + point_worth * self.plan_points - held)

    def _blended(self, hold_price: Floats) -> FleetArrays:
        """The objective with what is held at its prices."""
        parts = [(hold.arrays, share) for hold, share in zip(self.holds, hold_price.tolist(), strict=True)]
        return blended([*parts, (self.arrays, 1.0)]) if parts else self.arrays


def lowest_ceiling(
    arrays: FleetArrays, taken: Integers, size: Integers, more_points: float, threads: int, clock: Clock,
    tell: Callable[[float, float], None],
) -> float:
    """The bound alone, for a plan (``taken``, ``size``) that stays as it is, until it comes to rest or time is up.

    ``more_points`` are points of the plan that the schedule program does not count. ``tell(value, bound)`` is called
    after every few steps.
    """
    value, points = total_worth(arrays, taken, size), total_points(arrays, taken, size) + more_points
    point_worth = float(((arrays.craft[:, 0] + arrays.spill) * arrays.craft[:, 2]).max(initial=1.0))
    gained = abs(value - total_worth(arrays, taken, np.zeros_like(size)))
    with ThreadPoolExecutor(max(1, threads)) as pool:
        sweeper = Sweeper(arrays, threads, pool if threads > 1 else None, clock)
        bounds = BoundSearch(
            arrays, sweeper, points, point_worth, abs(value), max(1.0, gained) / max(1, int(size.sum())),
            points_move=points > 0.0)
        idle = 0
        while not clock.expired() and idle < _PATIENCE:
            before = bounds.bound
            bounds.improve(_FEW, value)
            tell(value, bounds.bound)
            idle = 0 if bounds.bound < before - _REST * abs(before) or not np.isfinite(before) else idle + 1
    return bounds.bound


@compiled
def total_worth(a: FleetArrays, taken: Integers, size: Integers) -> float:
    """What a whole plan is worth, without prices."""
    total = 0.0
    for i in range(len(size)):
        worth, _ = worth_of(a, i, taken[i], size[i])
        total += worth
    return total


@compiled
def total_points(a: FleetArrays, taken: Integers, size: Integers) -> float:
    """Points of a whole plan, without those of dues."""
    total = 0.0
    for i in range(len(size)):
        _, points = worth_of(a, i, taken[i], size[i])
        total += points
    return total
