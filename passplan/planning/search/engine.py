"""Search and bound together, in rounds of fixed work, until they meet or the time is up.

In each round the prices take some steps and the plan is rebuilt, side by side where there are threads for it. Where
the bound has come to rest and the plan has not, all threads rebuild, each a part of the fleet. Each uses what
the others knew when the round began, and work is counted in labels, not in seconds, so that the outcome does not
depend on which is faster: a search that ends by its gap or its rounds gives the same plan every time. One that ends
by the clock stops after as many rounds as the machine managed.

Other objectives may be held at what was reached in them. The plan is then rebuilt for a sum in which each of them has
a share. It grows while the plan falls short of what is held, and shrinks towards the price that the bound has found
for it otherwise; the plan that is handed back is the best of those that held all.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field
from functools import partial

import numpy as np

from passplan.planning.arrays import Flags, Floats, Integers
from passplan.planning.certificate import PriceCertificate
from passplan.planning.clock import Clock
from passplan.planning.problem import Limits
from passplan.planning.result import OPTIMAL_GAP, relative_gap
from passplan.planning.rules.terms import Terms
from passplan.planning.search.bound import BoundSearch, Hold, certificate_of
from passplan.planning.search.dues import points_missed
from passplan.planning.search.fleetarrays import FleetArrays, blended, load_plan, unload_plan
from passplan.planning.search.grounds import Grounds
from passplan.planning.search.labels import make_work
from passplan.planning.search.prices import option_prices, units
from passplan.planning.search.rebuild import Ground, rebuild
from passplan.planning.search.schedule import total_points, total_worth
from passplan.planning.search.sweep import Sweeper

# A round is about this many labels: some tenths of a second.
_ROUND_LABELS = 4_000_000
_MOST_SWEEPS = 20
# Even where sweeps cost next to nothing, a round of rebuilding looks at so many.
_LEAST_LABELS = 200_000
# Before the first sweep nobody knows how many labels there are to an option.
_LABELS_PER_OPTION = 15
# Spacecraft taken out at a time; with rows fewer, as what is put back then fits in fewer ways.
_MOST_OUT, _MOST_OUT_WITH_ROWS = 10, 6
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
# By so much shares of what is held go up and down from round to round, down to such a part of the guess.
_SHARE_UP, _SHARE_DOWN, _LEAST_SHARE = 2.0, 0.5, 0.002
# A plan that has fallen short of what is held in so many rounds, and has not become better, is given up.
_MOST_SHORT = 6
_SAME_POINTS = 1e-9
# What is held may be missed by this part: sums are rounded.
_HELD = 1e-6
# The least reward for a due that is not met, in contacts for each contact that meets it.
_LEAST_REWARD = 0.1


@dataclass(frozen=True, eq=False)
class Found:
    """What the search found: options of the plan, its bound, and the prices that prove it (None: no proof is kept).

    ``left_alone`` counts spacecraft whose contacts serve a requirement that the search cannot count. ``price`` are the
    bound's prices as it keeps them, for a search that goes on with other objectives, ``hold_price`` those of ``holds``.
    """

    chosen: tuple[int, ...]
    bound: float
    certificate: PriceCertificate | None
    rounds: int
    left_alone: int
    price: Floats = field(default_factory=lambda: np.zeros(0))
    hold_price: tuple[float, ...] = ()


@dataclass(frozen=True, eq=False)
class Staying:
    """What contacts outside the search take: ``used`` (r,) of rows. They give ``given`` (d,) to dues.

    Those like them could give to the ``shared`` (d,) dues. The bound counts on neither.
    """

    used: Floats
    given: Floats
    shared: Flags


def search_plan(
    arrays: FleetArrays, terms: Terms, limits: Limits, clock: Clock, start: Sequence[int], points: float,
    tell: Callable[[float, float], None] | None = None, *, holds: Sequence[tuple[Hold, float]] = (),
    price: Floats | None = None, staying: Staying | None = None,
) -> Found:
    """Improve the plan ``start`` (options by number) of ``points`` of shortfall, and bound it.

    ``tell(value, bound)`` is called after each round. ``holds`` are other objectives and the least that each is to come
    to, which ``start`` does, with a guess of what they are worth; ``price`` are prices to begin with. Beside contacts
    that stay as they are the plan has to make do with what is left; the bound is over all that others could leave.
    """
    threads = max(1, limits.threads)
    with ThreadPoolExecutor(threads) as pool:
        if staying is None:
            dues = len(arrays.dues.points)
            staying = Staying(np.zeros(len(arrays.limit)), np.zeros(dues), np.zeros(dues, dtype=bool))
        rounds = _Rounds(arrays, limits, start, points, pool, threads, clock, holds, price, staying)
        return rounds.run(terms, clock, tell)


class _Rounds:
    def __init__(
        self, arrays: FleetArrays, limits: Limits, start: Sequence[int], points: float, pool: ThreadPoolExecutor,
        threads: int, clock: Clock, holds: Sequence[tuple[Hold, float]], price: Floats | None, staying: Staying,
    ) -> None:
        self.aim, self.limits, self.pool, self.threads, self.staying = arrays, limits, pool, threads, staying
        self.workers = max(2, threads)
        self.taken, self.size = load_plan(arrays, start)
        fixed = np.array([bool(arrays.uncounted[self.taken[i, : self.size[i]]].any()) for i in range(len(self.size))])
        self.movable, self.grounds = ~fixed, Grounds(arrays, ~fixed)
        self.holds, self.shares = [hold for hold, _ in holds], np.array([share for _, share in holds])
        self._blend()
        self.sweeper = Sweeper(arrays, max(1, threads - 1), pool if threads > 2 else None, clock)
        self.work = [make_work() for _ in range(self.workers)]
        self.best = self.taken.copy(), self.size.copy()
        self.value, self.points = total_worth(self.aim, self.taken, self.size), self._points()
        # What the search does not count stays as it is.
        self.more_points = points - self.points
        point_worth, moves = self._first_point_worth()
        worth = abs(self.value + sum(share * hold.least for hold, share in holds))
        self.bounds = BoundSearch(
            arrays, self.sweeper, points, point_worth, worth, self._contact_worth(), points_move=moves, holds=holds,
            price=price, shared=staying.shared)
        self.least_shares, self.shorts = _LEAST_SHARE * self.shares, 0
        self._blend()
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
            self._judge()
            self._learn(before, with_bound)
            idle = 0 if (self.value, self.bounds.bound) != before else idle + 1
            if tell is not None:
                tell(self.value, self.bounds.bound)
            gap = relative_gap(self.value, self.bounds.bound)
            if gap <= max(self.limits.gap, OPTIMAL_GAP) or idle > _PATIENCE_ROUNDS:
                break
        return Found(
            tuple(unload_plan(self.arrays, *self.best)), self.bounds.bound,
            certificate_of(self.arrays, terms, self.bounds), rounds, int((~self.movable).sum()),
            self.bounds.best_price, tuple(self.bounds.hold_price.tolist()))

    def _blend(self) -> None:
        """The sum for which the plan is rebuilt."""
        parts = [(hold.arrays, share) for hold, share in zip(self.holds, self.shares.tolist(), strict=True)]
        arrays = blended([*parts, (self.aim, 1.0)]) if parts else self.aim
        self.arrays = arrays._replace(limit=arrays.limit - self.staying.used)
        # Points before value: a second of a command interval outweighs what it can be traded for.
        self.point_worth = 1e5 * (1.0 + float(np.abs(arrays.craft[:, 0] + arrays.spill) @ (
            arrays.craft[:, 3] + arrays.craft[:, 1] * arrays.horizon_s)))

    def _judge(self) -> None:
        """Keep the plan if it is the best that holds what is to be held; otherwise see to it that it will."""
        points, short = self._points(), False
        for k, hold in enumerate(self.holds):
            reached = total_worth(hold.arrays, self.taken, self.size)
            if reached < hold.least - _HELD * max(1.0, abs(hold.least)):
                self.shares[k] *= _SHARE_UP
                short = True
            else:
                self.shares[k] = max(min(self.shares[k], self.bounds.hold_price[k]), _SHARE_DOWN * self.shares[k])
        # What is worth nothing in the bound is not given away by the plan.
        self.shares = np.maximum(self.shares, self.least_shares)
        value = total_worth(self.aim, self.taken, self.size)
        fewer = points < self.points - _SAME_POINTS
        if not short and (fewer or (value > self.value and points <= self.points + _SAME_POINTS)):
            self.best, self.value, self.shorts = (self.taken.copy(), self.size.copy()), value, 0
            if fewer:
                self.points = points
                self.bounds.fewer_points(points + self.more_points)
        self.shorts += short
        if self.shorts >= _MOST_SHORT:
            # It has gone astray: back to the best one, for which all that is held now weighs more.
            (self.taken, self.size), self.shorts = (self.best[0].copy(), self.best[1].copy()), 0
        if self.holds:
            self._blend()

    def _round(self, number: int, sweeps: int, effort: int) -> int:
        """Steps of the bound and rebuilding side by side, or rebuilding in parts; returns labels of all sweeps."""
        guide, own = self.bounds.guide, self.grounds.own
        prices = tuple(option_prices(self.arrays, np.where(mask, guide, 0.0), dues=False) for mask in (~own, own))
        grounds = [self.grounds.whole()]
        if sweeps == 0 and self.movable.sum() >= _LEAST_PART:
            grounds = self.grounds.dealt_out(self.workers, (self.limits.seed, number))
        jobs = [partial(self._rebuild, number, k, effort, prices, ground) for k, ground in enumerate(grounds)]
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
        self, number: int, worker: int, effort: int, prices: tuple[Floats, ...], ground: Ground,
    ) -> tuple[Integers, Integers]:
        warmth = _WARMTH[number % len(_WARMTH)] * self._contact_worth()
        taken, size = self.taken.copy(), self.size.copy()
        seed = (self.limits.seed * 1_000_003 + number * 31 + worker) % 2**32
        most = _MOST_OUT_WITH_ROWS if len(self.arrays.limit) else _MOST_OUT
        span_s = min(_SPANS_S[number % len(_SPANS_S)] or self.arrays.horizon_s, self.arrays.horizon_s)
        rebuild(self.arrays, seed, effort, warmth, most, span_s, prices[0], prices[1], self._rewards(),
                self.staying.given, self.point_worth, ground, self.work[worker], taken, size)
        return taken, size

    def _rewards(self) -> Floats:
        """What meeting each due whole is worth, shape (d,): what the bound pays, and at least a part of a contact."""
        dues = len(self.arrays.dues.points)
        unit = units(self.arrays)[-dues:] if dues else np.zeros(0)
        paid = -self.bounds.best_price[-dues:] if dues else np.zeros(0)
        return np.asarray(np.maximum(paid, _LEAST_REWARD * self._contact_worth()) / unit)

    def _learn(self, before: tuple[float, float], with_bound: bool) -> None:
        """Follow what a round's work gains on either side."""
        gained, fell = self.value - before[0], before[1] - self.bounds.bound
        workers = 1 if with_bound else self.workers
        self.value_rate = _RATE_MEMORY * self.value_rate + (1.0 - _RATE_MEMORY) * gained / workers
        if with_bound and np.isfinite(fell):
            self.bound_rate = _RATE_MEMORY * self.bound_rate + (1.0 - _RATE_MEMORY) * max(0.0, fell)

    def _contact_worth(self) -> float:
        """What a contact of the plan is worth in the sum, on average."""
        nothing = total_worth(self.arrays, self.taken, np.zeros_like(self.size))
        return max(1.0, abs(total_worth(self.arrays, self.taken, self.size) - nothing)) / max(1, int(self.size.sum()))

    def _points(self) -> float:
        """Points of the plan in hand, as far as the search counts them."""
        alone = total_points(self.arrays, self.taken, self.size)
        return alone + points_missed(self.arrays.dues, self.taken, self.size, self.staying.given)

    def _first_point_worth(self) -> tuple[float, bool]:
        """What a point is worth in the bound: much if the plan has only the points that nobody can avoid.

        Otherwise it is a guess, which moves.
        """
        arrays = self.arrays
        if self.points <= 0.0:
            return self.point_worth, False
        if not len(arrays.dues.to):
            at = self.sweeper(np.zeros(len(units(arrays))), self.point_worth, arrays)
            if at is None or (
                    self.points <= at.points.sum() + points_missed(arrays.dues, at.taken, at.size) + _SAME_POINTS):
                return self.point_worth, False
        return float(((arrays.craft[:, 0] + arrays.spill) * arrays.craft[:, 2]).max(initial=1.0)), True
