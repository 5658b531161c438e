"""A proven ceiling on the value, from prices on the time that spacecraft compete for.

Every clique of a shared lane gets a price p >= 0, every row a price r >= 0 for its whole limit, every point of
shortfall a price q >= 0, and every due (see ``dues.py``) a reward v from 0 to q x its points for meeting it. For any
of them, no plan with at most s points is worth more than

    sum over spacecraft of max(worth - prices + rewards of its options - q x its points)
    + sum(p) + sum(r) - sum(v) + q s

because a plan pays each clique at most once and each row at most up to its limit, and what it is not rewarded for a
due it owes in points (Lagrangian duality; subgradient method: Held, Wolfe and Crowder 1974). Each maximum is found
by the schedule program, without the rows; of spacecraft with classes of data, a ceiling of it. Objectives that are held
at what was reached are relaxed in the same way, each at a price of its own (``Hold``). The prices are the certificate:
``certificate.py`` evaluates them again by other code.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from passplan.planning.arrays import Flags, Floats, ragged_ranges
from passplan.planning.certificate import PriceCertificate
from passplan.planning.rules.terms import Terms
from passplan.planning.search.adam import Adam
from passplan.planning.search.fleetarrays import FleetArrays, at_their_word, blended
from passplan.planning.search.prices import limits_of, units, widths
from passplan.planning.search.schedule import total_worth
from passplan.planning.search.sweep import Sweep, Sweeper

# The first step moves the price of an option by about this part of what a contact is worth; after so many steps it
# is half as long, then a third, and so on. Rows need longer ones: an option is in many, each with a price of its own.
_FIRST_STEP, _FIRST_STEP_WITH_ROWS = 0.1, 0.3
_HALF_AFTER = 10.0
_SHRINK = 0.5
# After so many steps it is time for another way, and then for a new start from the best prices with steps this long.
_STEPS = 1_500
_NEXT_STEP = 0.1
# All prices together are at least this part of the value: where time costs nothing at all, schedules are full of
# contacts that bring nothing down, and what is used says nothing about what is needed.
_FLOOR = 1e-7
# The prices of a point and of what is held change by this part at first.
_FIRST_CHANGE = 0.2
# Of what is held, this part too much or too little is a step in full.
_HELD_SIZE = 0.01


@dataclass(frozen=True, eq=False)
class Hold:
    """An objective over the same options that is to come to at least ``least``, without its base.

    Contacts beside these might come to ``spare`` more than they do, so that the bound can count on so much less.
    """

    arrays: FleetArrays
    least: float
    spare: float = 0.0


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


class BoundSearch:
    """Moves prices so that the ceiling falls. It counts iterations and never looks at the clock.

    The subgradient of the ceiling is "how far used, less how much there is" in each clique, row and due. Steps shrink
    as 1 / n. The prices of a point of shortfall and of what is held change by factors.
    """

    def __init__(
        self, arrays: FleetArrays, sweeper: Sweeper, plan_points: float, point_worth: float, worth: float,
        contact_worth: float, *, points_move: bool = False, holds: Sequence[tuple[Hold, float]] = (),
        price: Floats | None = None, shared: Flags | None = None,
    ) -> None:
        """``worth`` and ``contact_worth`` are those of a plan, about. ``holds`` come with a first guess of their price.

        ``points_move`` says that ``point_worth`` is no more than a first guess either. Dues that contacts beside these
        could meet too, ``shared`` (d,), are not rewarded.
        """
        self.arrays, self.sweeper, self.plan_points = arrays, sweeper, plan_points
        self.limits = limits_of(arrays)
        self.bound = np.inf
        self.floor = np.full(len(self.limits), _FLOOR * worth / max(1, len(self.limits)))
        self.ceiling = np.full(len(self.limits), np.inf)
        self._due = slice(arrays.cliques + len(arrays.limit), None)
        self._due_points = arrays.dues.points if shared is None else np.where(shared, 0.0, arrays.dues.points)
        self.holds = [replace(hold, least=hold.least - hold.spare) for hold, _ in holds]
        # The ceiling takes layers at their word; so does the way in which it falls.
        self._held = [replace(hold, arrays=at_their_word(hold.arrays)) for hold in self.holds]
        self.point_worth, self.point_rate = point_worth, 1.0 if points_move else 0.0
        self.hold_price = np.array([share for _, share in holds], dtype=float)
        self._hopeless = np.bincount(arrays.dues.to, minlength=len(arrays.dues.points)) == 0
        self._point_worth, self._hold_price = point_worth, self.hold_price
        self._keep_within()
        begin = np.zeros(len(self.limits)) if price is None else price
        self.price = self.best_price = np.clip(begin, self.floor, self.ceiling)
        self._start = self.price if price is None else None
        first = _FIRST_STEP_WITH_ROWS if len(arrays.limit) else _FIRST_STEP
        self._step = first * contact_worth / widths(arrays)
        self._steps = 0
        self._adam, self._level_adam = Adam(len(self.limits)), Adam(1 + len(self.holds))

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
            self._adam, self._level_adam = Adam(len(self.limits)), Adam(1 + len(self.holds))
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

    def fewer_points(self, plan_points: float) -> None:
        """Plans now have at most so many points, fewer than before: they are worth so much less at the same prices."""
        self.bound -= self.point_worth * (self.plan_points - plan_points)
        self.plan_points = plan_points

    def _evaluate(self) -> tuple[float, Floats, Floats] | None:
        """The ceiling at the present prices, noted if it is the lowest, and which way prices should go.

        None if time is up before it is known.
        """
        at = self.sweeper(self.price, self._point_worth, self._blended(self._hold_price))
        if at is None:
            return None
        held = sum(hold.least * share for hold, share in zip(self.holds, self._hold_price.tolist(), strict=True))
        here = float(at.worth.sum() + self.price @ self.limits + self._point_worth * self.plan_points - held)
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
        owed = (full * (1.0 - at.use[self._due] / self.limits[self._due])) @ self._due_points
        levels = [self.point_rate * float(at.points.sum() + owed - self.plan_points)]
        for hold in self._held:
            less = hold.least - total_worth(hold.arrays, at.taken, at.size)
            levels.append(less / (_HELD_SIZE * max(1.0, abs(hold.least))))
        return np.asarray(np.clip(np.array(levels), -1.0, 1.0))

    def _keep_within(self) -> None:
        """A due is never rewarded beyond its points, and one that nothing can meet not below them."""
        self.floor[self._due] = -self._point_worth * self._due_points / self.limits[self._due]
        self.ceiling[self._due] = np.where(self._hopeless, self.floor[self._due], 0.0)

    def _blended(self, hold_price: Floats) -> FleetArrays:
        """The objective with what is held at its prices."""
        parts = [(hold.arrays, share) for hold, share in zip(self.holds, hold_price.tolist(), strict=True)]
        return blended([*parts, (self.arrays, 1.0)]) if parts else self.arrays
