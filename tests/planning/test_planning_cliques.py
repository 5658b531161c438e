"""Maximal cliques of intervals."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.planning.cliques import clique_spans


@given(st.lists(st.tuples(st.integers(0, 40), st.integers(1, 12)), max_size=14))
@settings(deadline=None, max_examples=200)
def test_two_intervals_overlap_exactly_if_they_share_a_clique_and_every_clique_is_maximal(
    spans: list[tuple[int, int]],
) -> None:
    start_s = np.array([a for a, _ in spans], dtype=np.int64)
    end_s = np.array([a + n for a, n in spans], dtype=np.int64)
    first, last, count = clique_spans(start_s, end_s)
    members = [frozenset(k for k in range(len(spans)) if first[k] <= c < last[k]) for c in range(count)]
    for x in range(len(spans)):
        for y in range(x):
            overlap = start_s[x] < end_s[y] and start_s[y] < end_s[x]
            assert overlap == any(x in m and y in m for m in members)
    assert not any(a < b for a in members for b in members)
    assert all(any(k in m for m in members) for k in range(len(spans)))


def test_touching_intervals_do_not_overlap() -> None:
    first, last, count = clique_spans(np.array([0, 10]), np.array([10, 20]))
    assert (first.tolist(), last.tolist(), count) == ([0, 1], [1, 2], 2)
