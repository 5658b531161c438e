"""Prices of all that is scarce, one after the other: cliques (c), rows (r) and dues (d).

Each is counted in units of about what a contact uses of it, so that steps of all prices are alike. The price of a due
is not above nothing: meeting it is rewarded.
"""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Floats, Integers
from passplan.planning.search.compiled import compiled
from passplan.planning.search.fleetarrays import FleetArrays


def units(arrays: FleetArrays) -> Floats:
    """What each clique, row and due is counted in for its price, shape (c + r + d,): about what a contact uses."""
    rows = mean_of(arrays.load_row, arrays.load_amount, len(arrays.limit))
    dues = mean_of(arrays.dues.to, arrays.dues.share, len(arrays.dues.points))
    return np.concatenate([np.ones(arrays.cliques), rows, dues])


def mean_of(group: Integers, amounts: Floats, count: int) -> Floats:
    """The mean amount of each group, 1 of one that is empty."""
    total, size = np.bincount(group, weights=amounts, minlength=count), np.bincount(group, minlength=count)
    mean: Floats = np.where(total > 0.0, total / np.maximum(size, 1), 1.0)
    return mean


def limits_of(arrays: FleetArrays) -> Floats:
    """How much of each clique and row there is and of each due is due, in the units of their prices, (c + r + d,)."""
    whole = np.concatenate([np.ones(arrays.cliques), arrays.limit, np.ones(len(arrays.dues.points))])
    return np.asarray(whole / units(arrays))


def widths(arrays: FleetArrays) -> Floats:
    """Among how many of its kind the price of a contact is shared out, shape (c + r + d,)."""
    a = arrays
    cliques = max(1.0, float((a.use_last - a.use_first).sum()) / max(1, len(a.option)))
    loads = np.diff(a.load_at)
    rows = mean_of(a.load_row, np.repeat(loads, loads).astype(float), len(a.limit))
    return np.concatenate([np.full(a.cliques, cliques), rows, np.ones(len(a.dues.points))])


def option_prices(arrays: FleetArrays, price: Floats, *, dues: bool = True) -> Floats:
    """What the cliques and rows of each option cost together, less what dues reward it with, shape (m,)."""
    total = np.zeros(len(arrays.option))
    each = price / units(arrays)
    rows, last = arrays.cliques, arrays.cliques + len(arrays.limit)
    _add_prices(arrays.use_at, arrays.use_first, arrays.use_last, arrays.load_at, arrays.load_row, arrays.load_amount,
                each[:rows], each[rows:last], total)
    if dues:
        owner = np.repeat(np.arange(len(total)), np.diff(arrays.dues.at))
        total += np.bincount(owner, weights=arrays.dues.share * each[last:][arrays.dues.to], minlength=len(total))
    return total


@compiled
def _add_prices(
    use_at: Integers, use_first: Integers, use_last: Integers, load_at: Integers, load_row: Integers,
    load_amount: Floats, clique_price: Floats, row_price: Floats, total: Floats,
) -> None:
    for o in range(len(total)):
        for u in range(use_at[o], use_at[o + 1]):
            for c in range(use_first[u], use_last[u]):
                total[o] += clique_price[c]
        for e in range(load_at[o], load_at[o + 1]):
            total[o] += load_amount[e] * row_price[load_row[e]]
