"""Storage maps against the event by event accounts."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from planning_cases import problem_of

from passplan.planning.maps import storage_maps
from passplan.planning.value import follow_storage


@given(
    st.lists(
        st.tuples(st.integers(0, 30), st.integers(1, 60), st.sampled_from([0.0, 0.5, 1.0, 3.0, 20.0])), max_size=6),
    st.sampled_from([0.0, 0.7, 2.0]), st.sampled_from([0.0, 20.0, 100.0, 1e4]), st.floats(0.0, 1.0))
@settings(deadline=None, max_examples=300)
def test_a_map_does_what_its_pieces_do(
    steps: list[tuple[int, int, float]], generation: float, capacity: float, part: float,
) -> None:
    clock, pieces = 100, []
    for gap, length, rate in steps:
        pieces.append((clock + gap, clock + gap + length, rate))
        clock += gap + length
    end_s = clock + 25
    problem = problem_of(
        [{"start_s": 100, "end_s": end_s, "pieces": pieces}], generation=(generation,), capacity=(capacity,),
        start=(0.0,))
    end, sent, lost = storage_maps(problem).apply(0, part * capacity)
    moved = [(a - 100, b - 100, rate) for a, b, rate in pieces]
    volumes, lost_before, left = follow_storage(end_s - 100, part * capacity, generation, capacity, moved)
    assert end == pytest.approx(left, abs=1e-9 * (1.0 + capacity))
    assert sent == pytest.approx(sum(volumes), abs=1e-8 * (1.0 + sum(volumes)))
    assert lost == pytest.approx(lost_before, abs=1e-8 * (1.0 + lost_before))
