"""Limits on a spacecraft's own contacts: made from the run, kept, explained, and optimal as enumeration has it."""

from __future__ import annotations

import numpy as np
import pytest
from craft_cases import CraftJudge, loosened, random_craft_problem
from planning_cases import some_of
from planning_runs import BOTH, DOWN, START, UP, make_run, make_windows

from passplan.planning.on_air import OnAir
from passplan.planning.plan import Plan, build_problem, make_plan
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits
from passplan.planning.rules import all_terms
from passplan.planning.rules.sending_time import SpanSendingNeed, sending_time
from passplan.planning.rules.spans import covered_s, within_spans
from passplan.planning.rules.terms import Rows
from passplan.planning.unused import REASONS
from passplan.report.usage import REASON_WORDS

PASSES = [("Teasel-1", "Isvarde-A", 600, 1_200), ("Teasel-1", "Isvarde-B", 1_300, 1_900),
          ("Teasel-1", "Isvarde-A", 2_400, 3_000)]
PLENTY = {"storage_mb": 9e4, "start_fill_mb": 8e4}


@pytest.mark.parametrize("block", some_of(range(6), 1))
def test_plans_under_limits_of_spacecraft_equal_the_best_of_all_plans(block: int) -> None:
    for seed in range(25 * block, 25 * block + 25):
        problem = random_craft_problem(seed)
        judge = CraftJudge(problem)
        points, value = judge.best()
        result = find_plan(problem, Limits(gap=0.0))
        assert judge.kept(result.chosen), f"seed {seed}"
        assert sum(s.points for s in result.shortfalls) == pytest.approx(points, abs=1e-9), f"seed {seed}"
        assert result.value == pytest.approx(value, rel=1e-6, abs=1e-6), f"seed {seed}"
        assert result.bound >= result.value


def test_looser_limits_never_make_a_plan_worse() -> None:
    better = 0
    for seed in range(200, 260):
        problem = random_craft_problem(seed)
        tight, loose = (find_plan(p, Limits(gap=0.0)) for p in (problem, loosened(problem)))
        points = [sum(s.points for s in plan.shortfalls) for plan in (tight, loose)]
        assert points[1] <= points[0] + 1e-9, f"seed {seed}"
        if points[1] > points[0] - 1e-9:
            assert loose.value >= tight.value - 1e-6 * (1.0 + abs(tight.value)), f"seed {seed}"
        better += loose.value > tight.value + 1e-6
    assert better > 10


def test_the_limits_bite_in_many_of_those_cases() -> None:
    kinds: dict[str, int] = {}
    for seed in range(150):
        terms = all_terms(random_craft_problem(seed))
        for kind in {term.kind for term in (*terms.rows, *terms.lanes) if len(term.options)}:
            kinds[kind] = kinds.get(kind, 0) + 1
    for kind in ("contact_gap", "cool_down", "contacts_per_orbit", "contacts_per_day", "sending_per_orbit",
                 "sending_per_span", "battery"):
        assert kinds[kind] >= 15, kinds


def planned(links: list[object], craft: dict[str, object], **policy: object) -> Plan:
    run = make_run({"cut_grid_s": 0, "options_per_window": 1, **policy}, craft={**PLENTY, **craft})
    return make_plan(run, make_windows(PASSES[:len(links)]), links)


def test_limits_that_are_off_change_nothing() -> None:
    run = make_run(craft=PLENTY)
    problem, _ = build_problem(run, make_windows(PASSES), [DOWN] * 3)
    assert problem.needs == ()
    terms = all_terms(problem)
    assert {lane.kind for lane in terms.lanes} == {"antenna_busy", "spacecraft_busy"}
    assert sum(map(len, terms.rows)) == 0 and terms.removals == ()


def test_a_gap_keeps_contacts_apart_and_says_so() -> None:
    assert len(planned([DOWN] * 2, {"contact_gap_s": 100}).contacts) == 2
    plan = planned([DOWN] * 2, {"contact_gap_s": 100.5})
    assert plan.unused["reason"].tolist() == ["contact_gap"]
    assert plan.unused["detail"].str.contains("Teasel-1, with 101 s between contacts, is taken").all()


def test_a_transmitter_cools_down_between_contacts_that_send() -> None:
    plan = planned([DOWN] * 3, {"cool_down_s": 300})
    assert plan.unused["reason"].tolist() == ["cool_down"]
    assert len(plan.contacts) == 2
    # A contact for commands alone may stand between them, and does not cool the transmitter any sooner.
    plan = planned([DOWN, UP, DOWN], {"cool_down_s": 1_200}, command_every_h=0.4)
    assert plan.contacts["service"].tolist() == ["downlink", "command", "downlink"]
    assert len(planned([DOWN, UP, DOWN], {"cool_down_s": 1_201}, command_every_h=0.4).contacts) == 2


def test_so_many_contacts_a_day_counted_where_they_start() -> None:
    # Midnight comes after 1250 s: the second pass starts on the next day, if not moved forward too far.
    start = np.datetime64("2027-03-08T23:39:10.000", "ms")
    for shift, kept in ((0, 3), (50, 3), (51, 2)):
        passes = [*PASSES[:2], ("Teasel-2", "Isvarde-A", 60, 500)]
        rows = [(craft, antenna, a - shift, b - shift) for craft, antenna, a, b in passes]
        run = make_run(
            {"cut_grid_s": 0, "options_per_window": 1}, craft={**PLENTY, "contacts_per_day": 1}, start_utc=start,
            end_utc=start + np.timedelta64(7_200, "s"))
        windows = make_windows(rows)
        for edge in ("aos_utc", "los_utc"):
            windows[edge] += start - START
        plan = make_plan(run, windows, [DOWN] * 3)
        assert len(plan.contacts) == kept
        if kept == 2:
            assert plan.unused["reason"].tolist() == ["contacts_per_day"]
            assert "Teasel-1's allowance of contacts per day, 1, is taken" in plan.unused["detail"].iloc[0]


def test_a_contact_is_cut_to_the_longest_sending() -> None:
    run = make_run(craft={**PLENTY, "sending_per_contact_s": 200.7})
    problem, options = build_problem(run, make_windows(PASSES), [DOWN, BOTH, UP])
    down = problem.options.downlink
    length_s = problem.options.end_s - problem.options.start_s
    assert set(problem.options.window[down]) == {0, 1}
    assert length_s[down].max() == 200
    assert not options.excluded.keys() - {2}
    assert len(options.candidates) <= 2 * run.policy.options_per_window
    plan = make_plan(run, make_windows(PASSES[:1]), [DOWN])
    assert plan.contacts["duration_s"].max() == 200
    assert "sending_per_contact" in plan.contacts["cut"].iloc[0]
    short = make_run(craft={"sending_per_contact_s": 100})
    unused = make_plan(short, make_windows(PASSES[:1]), [DOWN]).unused
    assert unused["reason"].tolist() == ["sending_per_contact"]
    assert "may send for 100 s in one contact" in unused["detail"].iloc[0]


def test_sending_in_any_so_many_hours() -> None:
    # Three passes of 600 s from 600, 1300 and 2400 s on: within half an hour two of them, all but the fringes.
    assert len(planned([DOWN] * 3, {"sending_per_span_s": 1_800, "sending_span_h": 0.5}).contacts) == 3
    plan = planned([DOWN] * 3, {"sending_per_span_s": 1_100, "sending_span_h": 0.5})
    assert len(plan.contacts) == 2
    assert "allowance of 1100 s of sending in any 0.5 h is taken" in plan.unused["detail"].iloc[0]


def test_the_rows_over_spans_are_all_that_matter() -> None:
    """Spans that begin at every second say no more than the few that the rule looks at."""
    for seed in range(30):
        problem = random_craft_problem(seed)
        for need in problem.needs_of(SpanSendingNeed):
            (on_air,) = problem.needs_of(OnAir)
            mine = np.flatnonzero(problem.options.spacecraft == need.spacecraft)
            low_s = np.arange(-need.span_s, problem.horizon_s, 1.0)
            every = within_spans(
                "x", "x", mine, on_air.start_s[mine], on_air.end_s[mine], np.ones(len(mine)), low_s,
                low_s + need.span_s, np.full(len(low_s), need.most_s))
            few = next((r for r in sending_time(problem).rows if r.kind == "sending_per_span"), None)
            rng = np.random.default_rng(seed)
            for _ in range(20):
                chosen = rng.random(len(problem.options)) < 0.4
                assert few is not None
                if len(problem.needs_of(SpanSendingNeed)) == 1:
                    assert kept(every, chosen) == kept(few, chosen)


def kept(rows: Rows, chosen: np.ndarray) -> bool:
    row = np.repeat(np.arange(len(rows)), np.diff(rows.offset))
    load = np.bincount(row, weights=rows.amounts * chosen[rows.options], minlength=len(rows))
    return bool(np.all(load <= rows.limit + 1e-9))


def test_rows_that_a_neighbour_implies_are_left_out() -> None:
    options, start_s, end_s = np.arange(3), np.array([0, 0, 500]), np.array([100, 60, 600])
    low_s, high_s = np.array([-50.0, -20.0, 10.0, 0.0]), np.array([200.0, 300.0, 300.0, 550.0])
    limit = np.array([50.0, 50.0, 40.0, 60.0])
    rows = within_spans("x", "x", options, start_s, end_s, np.ones(3), low_s, high_s, limit)
    # The second counts what the first does; the third counts less but allows less, the last counts more.
    assert rows.limit.tolist() == [50.0, 40.0, 60.0]
    assert [rows.amounts[a:b].tolist() for a, b in zip(rows.offset[:-1], rows.offset[1:], strict=True)] == [
        [100.0, 60.0], [90.0, 50.0], [100.0, 60.0, 50.0]]


def test_seconds_that_intervals_cover() -> None:
    low_s, high_s = np.array([0.0, 15.0, 25.0, 100.0]), np.array([100.0, 35.0, 26.0, 200.0])
    found = covered_s(np.array([30, 10, 12]), np.array([40, 20, 15]), low_s, high_s)
    assert found.tolist() == [20.0, 10.0, 0.0, 0.0]
    assert covered_s(np.zeros(0, dtype=np.int64), np.zeros(0, dtype=np.int64), low_s, high_s).tolist() == [0.0] * 4


def test_every_reason_has_words() -> None:
    assert set(REASONS) <= set(REASON_WORDS)


def test_rest_is_counted_in_whole_seconds_rounded_up() -> None:
    run = make_run(craft={"contact_gap_s": 0.2, "cool_down_s": 10.0})
    problem, _ = build_problem(run, make_windows(PASSES), [BOTH] * 3)
    lanes = {lane.kind: lane for lane in all_terms(problem).lanes}
    for kind, behind_s in (("contact_gap", 1), ("cool_down", 10)):
        held_s = lanes[kind].end_s - problem.options.end_s[lanes[kind].options]
        assert np.all(held_s == behind_s)
