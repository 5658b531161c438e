"""Contacts that every plan with as few shortfalls has, and what they rule out.

No plan has fewer points than all spacecraft have together if each could have its way. Where a plan is known that comes
so near to this that it could not miss a wanted contact as well, and only one option meets it, that option is in
every plan that competes; and none that stands in its way is. (Own derivation.) This makes the schedules of its
spacecraft few, and neighbours need not be priced away from it.
"""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Flags, Integers
from passplan.planning.rules.terms import Removal
from passplan.planning.search.dues import points_missed
from passplan.planning.search.fill import free_now
from passplan.planning.search.fleetarrays import ROUNDING, FleetArrays, blended
from passplan.planning.search.holding import enter
from passplan.planning.search.labels import make_work
from passplan.planning.search.prices import units
from passplan.planning.search.schedule import best_schedule, points_of
from passplan.planning.search.sweep import Sweeper

# Points are sums of whole requests and seconds over hours.
_SAME_POINTS = 1e-6


def ruled_out(arrays: FleetArrays, points: float) -> Removal:
    """Options that no plan with at most ``points`` of shortfall can have."""
    forced = _forced(arrays, points)
    crafts = np.searchsorted(arrays.first, forced, side="right") - 1
    taken, size = np.zeros((len(arrays.craft), arrays.most_contacts), dtype=np.int64), np.bincount(
        crafts, minlength=len(arrays.craft)).astype(np.int64)
    for i in np.unique(crafts).tolist():
        taken[i, : size[i]] = forced[crafts == i]
    room = arrays.limit * (1.0 + ROUNDING) + ROUNDING
    holder = np.full(arrays.cliques + 1, -1, dtype=np.int64)
    enter(arrays, taken, size, np.ones(len(room), dtype=bool), holder, room)
    out: Flags = ~free_now(arrays, holder, room)
    for o, i in zip(forced.tolist(), crafts.tolist(), strict=True):
        mine = slice(arrays.first[i], arrays.first[i + 1])
        before, after = arrays.arrival[mine] <= arrays.node[o], arrays.node[mine] >= arrays.arrival[o]
        out[mine] |= ~(before | after)
    out[forced] = False
    return Removal(arrays.option[out], "must_be_kept", "stands in the way of a contact that must be in the plan")


def _forced(arrays: FleetArrays, points: float) -> Integers:
    """Options, as the arrays number them, that every plan with at most ``points`` has."""
    worthless = blended([(arrays, 0.0)])
    alone = Sweeper(worthless)(np.zeros(len(units(arrays))), 1.0)
    if alone is None:
        raise RuntimeError("a sweep without a clock came to no end")
    hopeless = arrays.dues._replace(points=np.where(np.bincount(
        arrays.dues.to, minlength=len(arrays.dues.points)) == 0, arrays.dues.points, 0.0))
    spare = points - float(alone.points.sum()) - points_missed(hopeless, alone.taken, alone.size) + _SAME_POINTS
    work, taken = make_work(), np.empty(arrays.most_contacts, dtype=np.int64)
    no_room, price = np.empty(0), np.zeros(len(arrays.option))
    forced = []
    for i in range(len(arrays.craft)):
        mine = arrays.first[i] + np.arange(arrays.first[i + 1] - arrays.first[i])
        for b in np.flatnonzero(arrays.wants[i] > spare).tolist():
            (meets,) = np.nonzero((arrays.bits[mine] >> b) & 1)
            if len(meets) == 1:
                price[mine[meets[0]]] = np.inf
                _, size = best_schedule(worthless, i, price, 1.0, no_room, work, taken)
                price[mine[meets[0]]] = 0.0
                if size >= 0 and points_of(worthless, i, taken, size) - alone.points[i] > spare:
                    forced.append(int(mine[meets[0]]))
    return np.unique(np.array(forced, dtype=np.int64))
