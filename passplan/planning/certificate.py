"""The proof behind a bound, and what it proves: evaluated again by code that shares nothing with the search.

A bound of the search rests on prices. At each priced instant a lane is held by one contact at most, each row is used
up to its limit at most, and a plan misses so many points at most; so no plan is worth more than

    sum over spacecraft of the best (worth - prices and rewards of its contacts - price of a point x its points)
    + all prices of instants + prices of rows x their limits + price of a point x points - all rewards

whatever the prices are, as long as none is negative (Lagrangian duality). What is not a matter of one spacecraft (a
guarantee, a request that several could meet) is rewarded in full where it is met, and in proportion where it is met in
part; where a reward is more than the points that missing it costs, the rest is not taken off. :func:`bound_of` finds
the best of each spacecraft once more, contact by contact with the storage followed event by event as ``value.py`` does,
in plain Python: slow, and short enough to be read. Classes of data count by their layers (see ``layering.py``), which
are worth at least as much.

A bound of the exact model rests on the model; :func:`bound_of` has another solver solve it.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from ortools.math_opt.python import mathopt

from passplan.planning.arrays import Floats, Integers
from passplan.planning.model import PlanModel
from passplan.planning.problem import Problem
from passplan.planning.rules.terms import Recurrence, Terms, Wanted
from passplan.planning.streams import Layer
from passplan.planning.value import follow_storage


@dataclass(frozen=True, eq=False)
class PriceCertificate:
    """Prices of lanes at instants, (k,) each: the lane's index in the terms, the instant [s], the price.

    ``rows``, ``row`` and ``row_price`` (r,) are the index of the ``Rows`` in the terms, the row in it, and the price of
    one unit of its amounts. ``point_price`` is per point of shortfall, ``points`` what plans have at most. ``reward``
    (g + w,) is for meeting each guarantee and each wanted contact, 0 for those counted with their spacecraft.
    """

    lane: Integers
    instant_s: Integers
    price: Floats
    rows: Integers
    row: Integers
    row_price: Floats
    point_price: float
    points: float
    reward: Floats


@dataclass(frozen=True, eq=False)
class ModelCertificate:
    """The program that was solved, the points of shortfall it allows (None: it counts none), and the bound proved."""

    model: PlanModel
    points_limit: float | None
    bound: float


Certificate = PriceCertificate | ModelCertificate
# Start, end and rate of a piece of sending.
_Piece = tuple[int, int, float]


def bound_of(problem: Problem, terms: Terms, certificate: Certificate) -> float:
    """What a certificate proves: no plan of ``problem`` under ``terms`` with as few shortfalls is worth more."""
    if isinstance(certificate, ModelCertificate):
        return _solved_again(certificate) + problem.base_worth
    if min(x.min(initial=0.0) for x in (certificate.price, certificate.row_price, certificate.reward)) < 0.0:
        raise ValueError("a certificate with negative prices proves nothing")
    price = _option_prices(problem, terms, certificate)
    limits = sum(float(terms.rows[k].limit[r]) * p for k, r, p in zip(
        certificate.rows.tolist(), certificate.row.tolist(), certificate.row_price.tolist(), strict=True))
    crafts = range(len(problem.fleet))
    # What is rewarded is not counted with its spacecraft too.
    rewarded = certificate.reward[len(terms.guarantees):] > 0.0
    alone = replace(terms, wanted=tuple(w for w, is_due in zip(terms.wanted, rewarded, strict=True) if not is_due))
    best = math.fsum(_best_of(problem, alone, craft, price, certificate.point_price) for craft in crafts)
    points = np.array([*(g.points for g in terms.guarantees), *(w.points for w in terms.wanted)], dtype=float)
    # Missing a due that is rewarded beyond its points would pay.
    owed = np.maximum(0.0, certificate.reward - certificate.point_price * points) - certificate.reward
    paid = float(certificate.price.sum()) + limits + certificate.point_price * certificate.points + float(owed.sum())
    return float(best + paid + problem.base_worth)


def _solved_again(certificate: ModelCertificate) -> float:
    proto = certificate.model.proto(tier=2, points_limit=certificate.points_limit)
    result = mathopt.solve(mathopt.Model.from_model_proto(proto), mathopt.SolverType.GSCIP)
    return float(result.best_objective_bound())


def _option_prices(problem: Problem, terms: Terms, certificate: PriceCertificate) -> Floats:
    """What each option pays: the prices of the instants of its lanes that it holds, and of its amounts in rows."""
    price = problem.price.copy()
    for k, lane in enumerate(terms.lanes):
        mine = certificate.lane == k
        order = np.argsort(certificate.instant_s[mine], kind="stable")
        instants, prices = certificate.instant_s[mine][order], certificate.price[mine][order]
        for o, a, b in zip(lane.options.tolist(), lane.start_s.tolist(), lane.end_s.tolist(), strict=True):
            low, high = np.searchsorted(instants, [a, b])
            price[o] += prices[low:high].sum()
    for k, rows in enumerate(terms.rows):
        of_row = np.zeros(len(rows))
        of_row[certificate.row[certificate.rows == k]] = certificate.row_price[certificate.rows == k]
        np.add.at(price, rows.options, rows.amounts * np.repeat(of_row, np.diff(rows.offset)))
    reward = certificate.reward.tolist()
    for promise, paid in zip(terms.guarantees, reward, strict=False):
        np.add.at(price, promise.options, -paid * promise.amounts / promise.need)
    for want, paid in zip(terms.wanted, reward[len(terms.guarantees):], strict=True):
        price[want.options] -= paid
    return price


@dataclass(frozen=True)
class _State:
    """A way to stand at an instant: MB by layer, worth, wanted contacts met, cover of the recurrence, last contact."""

    aboard: tuple[float, ...]
    worth: float
    met: frozenset[int]
    cover: float
    last: int


def _best_of(problem: Problem, terms: Terms, craft: int, price: Floats, point_price: float) -> float:
    """The best schedule of one spacecraft at the prices: all ways to stand at every start, without the useless ones."""
    options, fleet = problem.options, problem.fleet
    removed = {int(o) for removal in terms.removals for o in removal.options}
    mine = [o for o in np.flatnonzero(options.spacecraft == craft).tolist() if o not in removed]
    mine.sort(key=lambda o: int(options.start_s[o]))
    after, apart = _order(terms, craft, mine, problem)
    wants = [w for w in terms.wanted if not removed.issuperset(w.options.tolist())
             and np.all(options.spacecraft[w.options] == craft)]
    need = next((r for r in terms.recurrences if r.name == fleet.names[craft] and not r.request), None)
    layers = problem.layers[craft]
    starts = sorted({int(options.start_s[o]) for o in mine})
    waiting: dict[int, list[_State]] = {0: [_State(
        tuple(layer.start_mb for layer in layers), 0.0, frozenset(), float(need.from_s) if need else 0.0, -1)]}

    def run(state: _State, from_s: int, until_s: int, pieces: list[_Piece]) -> tuple[tuple[float, ...], float]:
        """Aboard and worth after a stretch of time with sending in ``pieces``."""
        left, worth = [], state.worth
        for layer, fill in zip(layers, state.aboard, strict=True):
            sent, lost, after = _through(layer, fill, from_s, until_s, pieces)
            worth += layer.weight * sent - layer.spill_cost * lost
            left.append(after)
        return tuple(left), worth

    here: list[_State] = []
    clock = 0
    for now in [*starts, problem.horizon_s]:
        moved = [_State(*run(s, clock, now, []), s.met, s.cover, s.last) for s in here]
        for since in sorted(t for t in waiting if t <= now):
            moved += [_State(*run(s, since, now, []), s.met, s.cover, s.last) for s in waiting.pop(since)]
        here, clock = _useful(moved, now, layers, apart, options.start_s), now
        for o in (o for o in mine if options.start_s[o] == now):
            span = slice(options.piece_offset[o], options.piece_offset[o + 1])
            pieces = list(zip(options.piece_start_s[span].tolist(), options.piece_end_s[span].tolist(),
                              options.piece_rate_mb_per_s[span].tolist(), strict=True))
            end = int(options.end_s[o])
            for state in here:
                if o in apart.get(state.last, ()):
                    continue
                left, worth = run(state, now, end, pieces)
                met = state.met | {k for k, w in enumerate(wants) if o in w.options}
                cover, late = _covered(need, o, now, state.cover)
                waiting.setdefault(max(end, after[o]), []).append(
                    _State(left, worth - float(price[o]) - point_price * late, met, cover, o))
                # Until the spacecraft is free again, what it generates is kept or lost.
                if after[o] > end:
                    last = waiting[after[o]].pop()
                    waiting[after[o]].append(_State(*run(last, end, after[o], []), last.met, last.cover, last.last))
    left_worth = [problem.left_worth_share * layer.weight for layer in layers]
    return max(s.worth + sum(w * mb for w, mb in zip(left_worth, s.aboard, strict=True))
               - point_price * _missed(s, wants, need) for s in here)


def _through(
    layer: Layer, fill: float, from_s: int, until_s: int, pieces: list[_Piece],
) -> tuple[float, float, float]:
    """MB sent and lost over a stretch of time, and what is aboard then."""
    if layer.even:
        sent, lost, left = follow_storage(
            until_s - from_s, fill, float(layer.made_mb[-1] / layer.time_s[-1]), float(layer.room_mb[0]),
            [(a - from_s, b - from_s, rate) for a, b, rate in pieces])
        return sum(sent), lost, left
    edges = sorted({float(from_s), float(until_s), *(float(t) for a, b, _ in pieces for t in (a, b)),
                    *(t for t in layer.time_s.tolist() if from_s < t < until_s)})
    lost = max(0.0, fill - float(layer.room(edges[0])))
    fill, total = fill - lost, 0.0
    for a, b in pairwise(edges):
        rate = sum(r for start_s, end_s, r in pieces if start_s <= a < end_s)
        aboard = fill + float(layer.made(b) - layer.made(a))
        sent_mb = min(aboard, rate * (b - a))
        fill = min(aboard - sent_mb, float(layer.room(b)))
        total, lost = total + sent_mb, lost + aboard - sent_mb - fill
    return total, lost, fill


def _covered(need: Recurrence | None, option: int, now: int, cover: float) -> tuple[float, float]:
    """Until when the recurrence is covered after an option, and the points lost before it."""
    if need is None or option not in need.options:
        return cover, 0.0
    until = float(need.end_s[need.options == option][0]) + need.every_s
    return max(cover, until), max(0.0, min(now, need.until_s) - cover) / need.every_s


def _missed(state: _State, wants: list[Wanted], need: Recurrence | None) -> float:
    points = sum(w.points for k, w in enumerate(wants) if k not in state.met)
    return points + (max(0.0, need.until_s - state.cover) / need.every_s if need else 0.0)


def _order(terms: Terms, craft: int, mine: list[int], problem: Problem) -> tuple[dict[int, int], dict[int, set[int]]]:
    """From when another contact may follow each option, and which later ones share a lane with it all the same."""
    options = problem.options
    after = {o: int(options.end_s[o]) for o in mine}
    apart: dict[int, set[int]] = {}
    for lane in terms.lanes:
        held = {int(o): (int(a), int(b)) for o, a, b in zip(lane.options, lane.start_s, lane.end_s, strict=True)
                if int(o) in after}
        if lane.owner == craft and set(held) == set(mine):
            lead = {int(options.start_s[o]) - a for o, (a, _) in held.items()}
            if len(lead) == 1:
                for o, (_, b) in held.items():
                    after[o] = max(after[o], b + next(iter(lead)))
                continue
        for o, (a, b) in held.items():
            for p, (x, y) in held.items():
                if options.start_s[p] >= options.end_s[o] and a < y and x < b:
                    apart.setdefault(o, set()).add(p)
    return after, apart


def _useful(
    states: list[_State], now: int, layers: Sequence[Layer], apart: dict[int, set[int]], start_s: Integers,
) -> list[_State]:
    """Without states that another one makes useless: met and covered as much, and ahead for every MB of difference."""
    free = [all(start_s[p] < now for p in apart.get(s.last, ())) for s in states]

    def beats(j: int, k: int) -> bool:
        x, y = states[j], states[k]
        if not free[j] or not x.met >= y.met or x.cover < y.cover:
            return False
        lacks = sum(layer.weight * max(0.0, b - a) + layer.spill_cost * max(0.0, a - b)
                    for layer, a, b in zip(layers, x.aboard, y.aboard, strict=True))
        return x.worth - y.worth >= lacks

    # Of two that beat each other, the first one stays.
    return [y for k, y in enumerate(states)
            if not any(j != k and beats(j, k) and not (k < j and beats(k, j)) for j in range(len(states)))]
