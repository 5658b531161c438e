"""Rows laid out for compiled code: what each option adds to which row."""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Flags, Floats, Integers, offsets_of
from passplan.planning.rules.terms import Terms


def loads(terms: Terms, place: Integers, count: int) -> tuple[Integers, Integers, Floats, Floats]:
    """Rows of all terms end to end: entries option by option, rows rising within each, and the limits."""
    option, row, amount = [np.zeros(0, dtype=np.int64)], [np.zeros(0, dtype=np.int64)], [np.zeros(0)]
    base = 0
    for rows in terms.rows:
        option.append(place[rows.options])
        row.append(base + np.repeat(np.arange(len(rows)), np.diff(rows.offset)))
        amount.append(rows.amounts)
        base += len(rows)
    options, numbers, amounts = np.concatenate(option), np.concatenate(row), np.concatenate(amount)
    kept = (options >= 0) & (amounts > 0.0)
    options, numbers, amounts = options[kept], numbers[kept], amounts[kept]
    order = np.lexsort((numbers, options))
    limit = np.concatenate([np.zeros(0), *(rows.limit for rows in terms.rows)])
    return offsets_of(np.bincount(options, minlength=count)), numbers[order], amounts[order], limit


def own_loads(
    craft_of: Integers, node: Integers, arrival: Integers, load_at: Integers, load_row: Integers,
) -> Flags:
    """Which entries share their row with an option that one plan of the same spacecraft may hold beside this one."""
    option = np.repeat(np.arange(len(load_at) - 1), np.diff(load_at))
    pair, where = np.unique(
        np.column_stack([load_row, craft_of[option]]), axis=0, return_inverse=True)
    latest = np.full(len(pair), -1, dtype=np.int64)
    soonest = np.full(len(pair), np.iinfo(np.int64).max)
    where = where.reshape(-1)
    np.maximum.at(latest, where, node[option])
    np.minimum.at(soonest, where, arrival[option])
    shared: Flags = (latest >= soonest)[where]
    return shared
