"""Where windows may be cut."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.planning.cuts import neighbour_cuts, spread
from passplan.planning.problem import Windows


def test_a_window_makes_way_for_others_of_its_antenna_with_setup_and_of_its_spacecraft_without() -> None:
    windows = Windows(("a", "b", "c"), np.array([0, 1, 0]), np.array([0, 0, 1]), np.array([0, 300, 500]),
                      np.array([600, 900, 800]))
    cuts = neighbour_cuts(windows, [(60, 30), (60, 30), (0, 0)])
    assert cuts[0].ends == {300 - 90, 500}
    assert cuts[0].starts == {900 + 90, 800}
    assert cuts[1].starts == {600 + 90}
    assert cuts[2].starts == {600}


@given(st.integers(0, 50), st.integers(1, 900), st.lists(st.integers(-50, 1_000)), st.lists(st.integers(-50, 1_000)),
       st.integers(0, 6))
@settings(deadline=None, max_examples=100)
def test_cuts_are_inside_in_order_apart_and_few(
    low: int, length: int, matter: list[int], grid: list[int], most: int,
) -> None:
    found = spread(low, low + length, matter, grid, most)
    edges = [low, *found, low + length]
    assert len(found) <= most
    assert set(found) <= set(matter) | set(grid)
    assert all(b - a >= 20 for a, b in pairwise(edges)) or not found


def test_instants_that_matter_come_before_the_grid() -> None:
    assert spread(0, 1_000, [400], [200, 500, 800], 1) == [400]
    assert spread(0, 1_000, [400], [200, 500, 800], 2) == [400, 800] or spread(0, 1_000, [400], [200, 800], 2)[0] == 200
