"""Maximal sets of mutually overlapping intervals, found in one sweep.

Intervals that pairwise overlap share an instant (Helly's property on the line), so "at most one at a
time" is exactly one row per maximal set. The rows have consecutive ones, so for a single resource the
linear relaxation is already integral (Kovalyov, Ng and Cheng 2007).
"""

from __future__ import annotations

import numpy as np

from passplan.planning.arrays import Integers


def clique_spans(start_s: Integers, end_s: Integers) -> tuple[Integers, Integers, int]:
    """For half-open intervals, the contiguous range of maximal cliques that each belongs to.

    Cliques are numbered in time order. Returns ``first`` and ``last`` (exclusive), shape (m,), and the
    number of cliques. A clique is maximal where a start is followed by an end before the next start; its
    instant is that start.
    """
    if len(start_s) == 0:
        return np.zeros(0, dtype=np.int64), np.zeros(0, dtype=np.int64), 0
    starts = np.unique(start_s)
    # A start opens a maximal clique if some interval ends before or at the next start (or never follows one).
    ended = np.searchsorted(np.sort(end_s), starts, side="right")
    instants = starts[np.append(ended[1:] > ended[:-1], True)]
    first = np.searchsorted(instants, start_s, side="left")
    last = np.searchsorted(instants, end_s, side="left")
    return first.astype(np.int64), last.astype(np.int64), len(instants)
