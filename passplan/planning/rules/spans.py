"""Rows for a spacecraft's use of time: what its options hold inside spans of time adds up to at most so much."""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Floats, Integers, offsets_of
from passplan.planning.rules.terms import Rows

# Rows that are worked out at once; bounds the memory.
_AT_ONCE = 256


def within_spans(
    kind: str, name: str, options: Integers, start_s: Integers, end_s: Integers, per_s: Floats, low_s: Floats,
    high_s: Floats, limit: Floats, at_once: int = 1,
) -> Rows:
    """Of options that hold ``[start_s, end_s)``, ``per_s`` for each second in span r adds up to ``limit[r]``.

    The options are those of one spacecraft, of which no more than ``at_once`` overlap in a plan. So a row that would be
    kept if every second that any of them holds were used so many times, at the highest rate, cannot bind and is left
    out; so is one whose neighbour counts at least as much of everything and allows no more.
    """
    highest = at_once * float(per_s.max(initial=0.0))
    binding = np.flatnonzero(highest * covered_s(start_s, end_s, low_s, high_s) > limit)
    columns, amounts, counts, kept = [], [], [np.zeros(0, dtype=np.int64)], [np.zeros(0, dtype=np.int64)]
    for at in range(0, len(binding), _AT_ONCE):
        rows = binding[at:at + _AT_ONCE]
        inside_s = np.minimum(end_s, high_s[rows, None]) - np.maximum(start_s, low_s[rows, None])
        used = np.maximum(inside_s, 0.0) * per_s
        telling = _telling(used, limit[rows])
        used = used[telling]
        row, column = np.nonzero(used)
        columns.append(options[column])
        amounts.append(used[row, column])
        counts.append(np.bincount(row, minlength=len(used)).astype(np.int64))
        kept.append(rows[telling])
    left = np.concatenate(kept)
    return Rows(
        kind, (name,) * len(left), offsets_of(np.concatenate(counts)),
        np.concatenate([np.zeros(0, dtype=np.int64), *columns]), np.concatenate([np.zeros(0), *amounts]),
        limit[left])


def _telling(used: Floats, limit: Floats) -> Integers:
    """Rows that say something their neighbours do not: looked through forward, then backward."""
    order = list(range(len(used)))
    for _ in range(2):
        kept: list[int] = []
        for r in order:
            if not kept or limit[r] < limit[kept[-1]] or np.any(used[r] > used[kept[-1]]):
                kept.append(r)
        order = kept[::-1]
    return np.array(order, dtype=np.int64)


def covered_s(start_s: Integers, end_s: Integers, low_s: Floats, high_s: Floats) -> Floats:
    """Seconds of each span [low, high) that lie in at least one of the intervals [start, end); shape of the spans."""
    order = np.argsort(start_s, kind="stable")
    begin, reach = start_s[order].astype(float), np.maximum.accumulate(end_s[order]).astype(float)
    opens = np.append(True, begin[1:] > reach[:-1])[:len(begin)]
    first = begin[opens]
    last = reach[np.append(opens[1:], True)[:len(begin)]]
    # Seconds covered up to an edge: piecewise linear in it.
    knots = np.stack([first, last], axis=1).ravel()
    sums = np.stack([np.cumsum(last - first) - (last - first), np.cumsum(last - first)], axis=1).ravel()
    if len(knots) == 0:
        return np.zeros(np.broadcast(low_s, high_s).shape)
    return np.asarray(np.interp(high_s, knots, sums) - np.interp(low_s, knots, sums))
