"""Storage through the day: the line ends where the plan's own account ends, and loses when it loses."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.planning.backlog import backlogs, follow
from passplan.planning.record import PlanRecord
from passplan.planning.value import follow_storage


def test_it_starts_and_ends_as_the_plan_says(short_plan: PlanRecord) -> None:
    for name, store in backlogs(short_plan).items():
        entry = short_plan.summary["storage"][name]
        assert store.fill_mb[0] == entry["start_mb"]
        assert store.fill_mb[-1] == pytest.approx(entry["left_mb"], abs=1e-6 * max(entry["capacity_mb"], 1.0))
        assert store.fill_mb.min() >= 0.0
        assert store.fill_mb.max() <= entry["capacity_mb"] * (1.0 + 1e-12)
        assert bool(store.losing_s) == (entry["lost_mb"] > 0.01)


@given(
    st.floats(0.0, 1.0),
    st.floats(0.0, 2.0),
    st.floats(1.0, 500.0),
    st.lists(st.tuples(st.integers(1, 300), st.integers(1, 200), st.floats(0.0, 5.0)), max_size=6),
)
@settings(deadline=None, max_examples=80)
def test_it_follows_the_objective_own_account(
    share: float, generation: float, capacity: float, raw: list[tuple[int, int, float]]
) -> None:
    pieces, clock = [], 0
    for wait, length, rate in raw:
        pieces.append((clock + wait, clock + wait + length, rate))
        clock += wait + length
    horizon = clock + 100
    _, lost, left = follow_storage(horizon, share * capacity, generation, capacity, pieces)
    store = follow(share * capacity, generation, capacity, pieces, float(horizon))
    assert store.fill_mb[-1] == pytest.approx(left, abs=1e-6)
    assert (np.diff(store.time_s) >= 0.0).all()
    if lost > 2.0 * max(generation, 1e-9) * (len(pieces) + 1):
        assert store.losing_s
