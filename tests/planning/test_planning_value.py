"""The accounts: where the data goes, second by second."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from planning_cases import Judge, problem_of, random_problem

from passplan.planning.value import account, follow_storage


def test_sends_what_is_aboard_and_then_as_it_generates() -> None:
    # 100 MB aboard, 1 MB/s made, sending at 3 MB/s: empty after 50 s, then 1 MB/s for the other 50 s.
    volumes, lost, left = follow_storage(100, 100.0, 1.0, 1e3, [(0, 100, 3.0)])
    assert volumes == [pytest.approx(200.0)]
    assert (lost, left) == (0.0, 0.0)


def test_loses_what_stands_above_the_capacity_before_during_and_after_a_slow_contact() -> None:
    # Full after 10 s; idle to 20 s loses 10; sending 0.5 of 1 MB/s loses 0.5 MB/s for 10 s; idle again 10 s.
    volumes, lost, left = follow_storage(40, 90.0, 1.0, 100.0, [(20, 30, 0.5)])
    assert volumes == [pytest.approx(5.0)]
    assert lost == pytest.approx(10.0 + 5.0 + 10.0)
    assert left == pytest.approx(100.0)


def test_value_is_weight_times_delivered_less_spill_less_cost() -> None:
    problem = problem_of(
        [{"start_s": 0, "end_s": 60, "pieces": [(0, 60, 1.0)], "cost": 4.0}], horizon_s=120, weight=(2.0,),
        generation=(1.0,), capacity=(30.0,), start=(30.0,), spill_cost_per_mb=0.5, worth_per_money=3.0)
    done = account(problem, [0])
    assert done.delivered_mb[0] == pytest.approx(60.0)
    assert done.lost_mb[0] == pytest.approx(60.0)
    assert done.value == pytest.approx(2.0 * 60.0 - 0.5 * 60.0 - 3.0 * 4.0)
    assert done.contact_mb.tolist() == [pytest.approx(60.0)]


def test_overlapping_sending_is_refused() -> None:
    with pytest.raises(ValueError, match="overlaps"):
        follow_storage(100, 10.0, 0.0, 10.0, [(0, 50, 1.0), (40, 60, 1.0)])


_pieces = st.lists(st.tuples(st.integers(0, 400), st.integers(1, 400), st.floats(0.0, 50.0)), max_size=12)


@given(_pieces, st.floats(0.0, 1.0), st.floats(0.0, 5.0), st.floats(0.0, 5e3))
@settings(deadline=None, max_examples=150)
def test_storage_balances(steps: list[tuple[int, int, float]], part: float, generation: float, capacity: float) -> None:
    clock, pieces = 0, []
    for gap, length, rate in steps:
        pieces.append((clock + gap, clock + gap + length, rate))
        clock += gap + length
    volumes, lost, left = follow_storage(clock + 100, part * capacity, generation, capacity, pieces)
    came = part * capacity + generation * (clock + 100)
    assert sum(volumes) + lost + left == pytest.approx(came, rel=1e-9, abs=1e-9)
    assert min([*volumes, lost, left]) >= 0.0
    assert left <= capacity


@pytest.mark.parametrize("seed", range(0, 40, 2))
def test_agrees_with_a_walk_in_steps(seed: int) -> None:
    problem = random_problem(seed)
    judge = Judge(problem)
    for chosen in list(judge.plans())[:40]:
        done = account(problem, chosen)
        assert done.value == pytest.approx(judge.value(chosen), rel=1e-9, abs=1e-9)
        came = done.start_mb + done.generated_mb
        assert np.allclose(done.delivered_mb + done.lost_mb + done.left_mb, came, rtol=1e-9)
