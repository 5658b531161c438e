"""What several contacts owe together: at least so much of them all, or points of shortfall.

A guarantee is one, and so is a requested contact that several spacecraft could meet. No single spacecraft knows
whether a due is met, so the schedule program does not count them: the bound prices them, and the search keeps
running totals. Amounts are parts of what is due, so that a total of 1 meets it; what is missing weighs in proportion.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import NamedTuple

import numpy as np

from passplan.planning.arrays import Floats, Integers, offsets_of
from passplan.planning.rules.terms import AtLeast, Wanted
from passplan.planning.search.compiled import compiled, inlined, inner

# A due that is missed by less is met: a matter of rounding (see shortfalls.py).
_MET = 1e-9


class Dues(NamedTuple):
    """Option o gives ``share[e]`` to due ``to[e]`` for e in ``at[o] : at[o + 1]``; missing due d is ``points[d]``.

    Due d is number ``number[d]`` among the guarantees of the terms, or, beyond them, of the wanted contacts.
    """

    at: Integers
    to: Integers
    share: Floats
    points: Floats
    number: Integers


def dues_of(guarantees: Iterable[AtLeast], wanted: Iterable[tuple[int, Wanted]], place: Integers, count: int) -> Dues:
    """Lay out all guarantees, and the wanted contacts given with their numbers, for ``count`` options.

    ``place`` says where an option stands, -1 where nowhere.
    """
    given = [(k, g.options, g.amounts / g.need, g.points) for k, g in enumerate(guarantees)]
    given += [(len(given) + k, w.options, np.ones(len(w.options)), w.points) for k, w in wanted]
    option, to, share = [np.zeros(0, dtype=np.int64)], [np.zeros(0, dtype=np.int64)], [np.zeros(0)]
    for d, (_, options, amounts, _) in enumerate(given):
        kept = (place[options] >= 0) & (amounts > 0.0)
        option.append(place[options[kept]])
        to.append(np.full(int(kept.sum()), d))
        share.append(amounts[kept])
    options, dues, shares = np.concatenate(option), np.concatenate(to), np.concatenate(share)
    order = np.argsort(options, kind="stable")
    return Dues(
        offsets_of(np.bincount(options, minlength=count)), dues[order], shares[order],
        np.array([points for _, _, _, points in given], dtype=float),
        np.array([number for number, _, _, _ in given], dtype=np.int64))


@inner
def give(at: Integers, to: Integers, share: Floats, taken: Integers, size: int, sign: float, given: Floats) -> None:
    """Add what a schedule gives to ``given``, or take it off (-1)."""
    for k in range(size):
        for e in range(at[taken[k]], at[taken[k] + 1]):
            given[to[e]] += sign * share[e]


@compiled
def given_by(dues: Dues, taken: Integers, size: Integers) -> Floats:
    """What a plan gives to each due, shape (d,)."""
    given = np.zeros(len(dues.points))
    for i in range(len(size)):
        give(dues.at, dues.to, dues.share, taken[i], size[i], 1.0, given)
    return given


@inlined
def missed(points: Floats, given: Floats) -> float:
    """Points of all dues, with so much given to each."""
    total = 0.0
    for d in range(len(points)):
        if 1.0 - given[d] > _MET:
            total += points[d] * (1.0 - given[d])
    return total


def points_missed(dues: Dues, taken: Integers, size: Integers, before: Floats | float = 0.0) -> float:
    """Points of all dues of a whole plan, to which ``before`` (d,) is given by others."""
    missing = np.maximum(0.0, 1.0 - before - given_by(dues, taken, size))
    return float(dues.points @ np.where(missing > _MET, missing, 0.0))
