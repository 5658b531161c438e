"""Gap, status and clock."""

from __future__ import annotations

import pytest

from passplan.planning.clock import Clock
from passplan.planning.option_table import build_options
from passplan.planning.result import relative_gap, status_of


def test_the_gap_is_relative_to_the_bound() -> None:
    assert relative_gap(95.0, 100.0) == pytest.approx(0.05)
    assert relative_gap(-105.0, -100.0) == pytest.approx(0.05)
    assert relative_gap(0.0, 0.0) == relative_gap(3.0, 2.0) == 0.0
    assert relative_gap(1.0, float("inf")) == relative_gap(-1.0, 0.0) == 1e9


@pytest.mark.parametrize(("gap", "path", "contacts", "status"), [
    (0.0, "exact", 3, "optimal"), (0.0, "greedy", 0, "empty"), (0.004, "search", 3, "within_gap"),
    (0.2, "search", 3, "stopped_by_limit"), (0.2, "greedy", 3, "greedy")])
def test_status_words(gap: float, path: str, contacts: int, status: str) -> None:
    assert status_of(gap, 0.005, path, contacts) == status


def test_the_clock_counts_down_and_keeps_stages() -> None:
    clock = Clock(0.0)
    assert clock.expired()
    assert clock.left_s() == 0.0
    for _ in range(2):
        with clock.stage("work"):
            pass
    assert list(clock.seconds) == ["work"]


def test_options_are_read_only_and_checked() -> None:
    row = {"window": 0, "spacecraft": 0, "antenna": 0, "start_s": 0, "end_s": 60,
           "pieces": [(0, 30, 1.0), (30, 60, 2.0)]}
    options = build_options([row, {**row, "pieces": []}, row])
    assert options.take([2, 1]).piece_offset.tolist() == [0, 2, 2]
    assert options.take([2, 1]).piece_rate_mb_per_s.tolist() == [1.0, 2.0]
    with pytest.raises(ValueError, match="read-only"):
        options.start_s[0] = 5
    with pytest.raises(ValueError, match="ends before it starts"):
        build_options([{**row, "end_s": 0}])
