"""From windows and links to options."""

from __future__ import annotations

from typing import Any

import pytest
from planning_runs import BOTH, DOWN, UP, SteadyDownlink, closure, make_run, make_windows, request

from passplan.inputs.run import Run
from passplan.link.choice import WindowLink
from passplan.planning.clock import Clock
from passplan.planning.option_table import Options
from passplan.planning.options import OptionSet
from passplan.planning.plan import build_problem

ONE = [("Teasel-1", "Isvarde-A", 600.25, 1_199.75)]


def built(run: Run, rows: list[tuple[str, str, float, float]], link: WindowLink = DOWN) -> tuple[Options, OptionSet]:
    problem, option_set = build_problem(run, make_windows(rows), [link] * len(rows))
    return problem.options, option_set


def spans(options: Options) -> list[tuple[int, int]]:
    return list(zip(options.start_s.tolist(), options.end_s.tolist(), strict=True))


def test_a_window_is_rounded_inward_to_whole_seconds() -> None:
    options, _ = built(make_run({"options_per_window": 1}), ONE)
    assert spans(options) == [(601, 1_199)]
    assert options.piece_start_s.tolist() == [621]
    assert options.piece_rate_mb_per_s.tolist() == [10.0]


def test_parts_are_cut_on_the_grid_and_where_a_neighbour_starts_or_ends() -> None:
    run = make_run({"cut_grid_s": 200, "options_per_window": 60})
    rows = [*ONE, ("Teasel-2", "Isvarde-A", 900, 1_500)]
    first = [span for span, w in zip(spans(built(run, rows)[0]), built(run, rows)[0].window, strict=True) if w == 0]
    # The grid's 800 would be too close to the neighbour's 810.
    assert {b for _, b in first} == {900 - 90, 1_000, 1_199}
    assert {a for a, _ in first} == {601, 800, 1_000}


@pytest.mark.parametrize("most", [1, 3, 7, 12])
def test_no_more_options_than_the_policy_allows(most: int) -> None:
    options, _ = built(make_run({"cut_grid_s": 30, "options_per_window": most}), ONE)
    assert len(options) == most
    assert (601, 1_199) in spans(options)


def test_when_time_is_up_each_window_still_gives_one_option() -> None:
    run, clock = make_run({"cut_grid_s": 60, "options_per_window": 60}), Clock(60.0)
    rows = [*ONE, ("Teasel-2", "Isvarde-A", 900, 1_500)]
    clock.stop()
    problem, _ = build_problem(run, make_windows(rows), [DOWN] * len(rows), clock=clock)
    assert spans(problem.options) == [(601, 1_199), (900, 1_500)]


def test_contacts_keep_clear_of_closures_with_time_to_release_and_to_prepare() -> None:
    run = make_run({"cut_grid_s": 60, "options_per_window": 50}, closures=(closure("Isvarde-A", 850.5, 900.5),))
    options, _ = built(run, ONE)
    assert spans(options)
    assert all(b <= 850 - 30 or a >= 901 + 60 for a, b in spans(options))
    assert {(601, 820), (961, 1_199)} <= set(spans(options))


def test_time_without_signal_is_not_held() -> None:
    link = WindowLink(SteadyDownlink(from_s=700, until_s=1_000), None)
    options, _ = built(make_run({"cut_grid_s": 0}), ONE, link)
    assert spans(options) == [(700, 1_000)]


def test_a_part_that_sends_as_much_makes_the_whole_superfluous_but_not_for_a_request() -> None:
    link = WindowLink(SteadyDownlink(from_s=700, until_s=1_000), None)
    run = make_run({"cut_grid_s": 0}, requests=(request("ask", "Teasel-1", 0, 7_000, min_duration_s=500),))
    assert (601, 1_199) in spans(built(run, ONE, link)[0])


def test_a_request_can_start_and_end_at_the_edges_of_its_span() -> None:
    run = make_run({"cut_grid_s": 0}, requests=(request("ask", "Teasel-1", 700.5, 1_000.5),))
    assert (701, 1_000) in spans(built(run, ONE)[0])


def test_price_goes_by_the_minute() -> None:
    options, _ = built(make_run({"options_per_window": 1}), [("Teasel-1", "Isvarde-B", 600, 780)])
    assert options.cost.tolist() == [pytest.approx(3 * 3.0)]


def test_a_command_contact_counts_from_its_least_length() -> None:
    policy = {"command_min_s": 300, "command_every_h": 6, "cut_grid_s": 180, "options_per_window": 40}
    options, _ = built(make_run(policy), ONE, BOTH)
    assert all(flag == (b - a - 10 >= 300) for (a, b), flag in zip(spans(options), options.command, strict=True))


@pytest.mark.parametrize(("rows", "link", "change", "reason"), [
    ([("Teasel-1", "Isvarde-A", 600, 700)], DOWN, {}, "too_short"),
    (ONE, DOWN, {"closures": (closure("Isvarde-A", 0, 1_100),)}, "closure"),
    (ONE, WindowLink(), {}, "no_margin"),
    (ONE, WindowLink(), {"radios": {}}, "no_radio"),
    (ONE, WindowLink(SteadyDownlink(from_s=1_190), None), {}, "no_margin"),
    (ONE, UP, {}, "not_needed"),
])
def test_a_window_without_options_has_a_reason(
    rows: list[tuple[str, str, float, float]], link: WindowLink, change: dict[str, Any], reason: str,
) -> None:
    run = make_run(craft={"radios": ()} if change.get("radios") == {} else None, **change)
    options, option_set = built(run, rows, link)
    assert len(options) == 0
    assert option_set.excluded[0][0] == reason
    assert option_set.excluded[0][1]
