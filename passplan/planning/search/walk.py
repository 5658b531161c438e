"""What the schedule programs do on their way along the starts, whatever a label holds."""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Flags, Floats, Integers
from passplan.planning.search.compiled import inlined


@inlined
def those_at(node: Integers, price: Floats, option: int, end: int, at: int) -> tuple[int, bool]:
    """The end of the options from ``option`` on that start at a node, and whether any of them can be taken."""
    usable = False
    while option < end and node[option] == at:
        usable = usable or price[option] < np.inf
        option += 1
    return option, usable


@inlined
def past_wants(wants_until: Integers, now: int) -> np.int64:
    """The bits of wanted terms that no option from ``now`` on can meet."""
    past = np.int64(0)
    for b in range(len(wants_until)):
        if 0 <= wants_until[b] < now:
            past |= np.int64(1) << b
    return past


@inlined
def overfills(
    load_at: Integers, load_row: Integers, load_amount: Floats, load_own: Flags, option: int, room: Floats,
    used: Floats, record_option: Integers, record_before: Integers, record: int,
) -> bool:
    """Whether an option and those taken before it add more to some row than there is room for.

    ``used`` is all zeros, and is so again afterwards.
    """
    shares = False
    for e in range(load_at[option], load_at[option + 1]):
        shares = shares or load_own[e]
    if not shares:
        return False
    before = record
    while before >= 0:
        o = record_option[before]
        for e in range(load_at[o], load_at[o + 1]):
            used[load_row[e]] += load_amount[e]
        before = record_before[before]
    over = False
    for e in range(load_at[option], load_at[option + 1]):
        over = over or (load_own[e] and used[load_row[e]] + load_amount[e] > room[load_row[e]])
    while record >= 0:
        o = record_option[record]
        for e in range(load_at[o], load_at[o + 1]):
            used[load_row[e]] = 0.0
        record = record_before[record]
    return over


@inlined
def trace(record_option: Integers, record_before: Integers, record: int, taken: Integers) -> int:
    """Fill ``taken`` with the options that led to a record, in time order; returns how many."""
    size = 0
    while record >= 0:
        taken[size] = record_option[record]
        size += 1
        record = record_before[record]
    for k in range(size // 2):
        taken[k], taken[size - 1 - k] = taken[size - 1 - k], taken[k]
    return size
