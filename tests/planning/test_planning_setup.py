"""Times to prepare and to release that differ by band and service, from the antenna to the plan."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from planning_cases import problem_of
from planning_runs import BOTH, DOWN, UP, closure, make_run, make_windows

from passplan.inputs.fleet import CommandRadio
from passplan.inputs.ground import Antenna, Transmitter
from passplan.inputs.run import Run
from passplan.inputs.setup_times import SetupTime
from passplan.link.choice import WindowLink
from passplan.planning.plan import build_problem
from passplan.planning.portfolio import find_plan
from passplan.planning.problem import Limits, Problem
from passplan.planning.setup import setup_s

X_BAND, S_BAND = 8_200.0, 2_050.0


def antenna(*rows: dict[str, Any]) -> Antenna:
    return Antenna(name="a", site="s", prepare_s=60, release_s=30, setup=tuple(SetupTime(**row) for row in rows))


@pytest.mark.parametrize(("service", "carriers", "expected"), [
    ("downlink", [X_BAND], (200, 30)),
    ("downlink", [26_000.0], (60, 30)),
    ("command", [S_BAND], (60, 90)),
    ("both", [X_BAND, S_BAND], (300, 90)),
    ("both", [26_000.0, 2_300.0], (300, 30)),
])
def test_the_longest_row_that_means_the_contact_counts(
    service: Any, carriers: list[float], expected: tuple[float, float],
) -> None:
    dish = antenna(
        {"low_mhz": 8_000, "high_mhz": 8_400, "prepare_s": 200}, {"service": "both", "prepare_s": 300},
        {"service": "command", "low_mhz": 2_000, "high_mhz": 2_100, "release_s": 90})
    assert setup_s(dish, service, carriers) == expected


def run_with(setup: list[dict[str, Any]], **rest: Any) -> Run:
    """The small run with an antenna A that can command, and whose setup is as said."""
    run = make_run({"cut_grid_s": 0, "command_every_h": 6}, **rest)
    dish = run.antennas["Isvarde-A"].model_copy(update={
        "setup": tuple(SetupTime(**row) for row in setup), "transmitters": ("tx",)})
    return replace(
        run, antennas={**run.antennas, "Isvarde-A": dish},
        spacecraft={name: craft.model_copy(update={"radios": ("x", "s")}) for name, craft in run.spacecraft.items()},
        radios={**run.radios, "s": CommandRadio(
            name="s", direction="command", frequency_mhz=S_BAND, polarisation="RHCP", g_over_t_db_per_k=-20,
            bit_rate_kbps=4)},
        transmitters={"tx": Transmitter(
            name="tx", low_mhz=2_000, high_mhz=2_100, polarisations=("RHCP",), eirp_dbw=40)})


def built(run: Run, rows: list[tuple[str, str, float, float]], links: list[WindowLink]) -> Problem:
    return build_problem(run, make_windows(rows), links)[0]


def test_options_hold_their_antenna_by_what_they_offer() -> None:
    run = run_with([{"service": "both", "prepare_s": 240.5}, {"service": "command", "release_s": 100}])
    rows = [("Teasel-1", "Isvarde-A", 600.0, 1_200.0), ("Teasel-2", "Isvarde-A", 2_600.0, 3_200.0),
            ("Teasel-2", "Isvarde-B", 4_600.0, 5_200.0)]
    options = built(run, rows, [BOTH, UP, DOWN]).options
    held = {(int(w), int(a), int(b)) for w, a, b in zip(
        options.window, options.prepare_s, options.release_s, strict=True)}
    assert held == {(0, 241, 100), (1, 60, 100), (2, 60, 30)}


def test_closures_and_neighbours_are_kept_clear_of_by_the_same_times() -> None:
    run = run_with([{"low_mhz": 8_000, "high_mhz": 8_400, "prepare_s": 240, "release_s": 50}],
                   closures=(closure("Isvarde-A", 0, 700),))
    rows = [("Teasel-1", "Isvarde-A", 600.0, 1_500.0), ("Teasel-2", "Isvarde-A", 1_200.0, 2_000.0)]
    options = built(run, rows, [DOWN, DOWN]).options
    first = options.window == 0
    assert options.start_s[first].min() == 700 + 240
    assert 1_200 - 240 - 50 not in options.end_s[first]  # there is no time left for that cut before it
    assert 1_500 + 240 + 50 in options.start_s[~first]


def test_a_then_b_fits_and_b_then_a_does_not() -> None:
    def plan(first: int, second: int) -> tuple[int, ...]:
        rows = [{"start_s": 0, "end_s": 600, "prepare_s": first}, {"start_s": 700, "end_s": 1_200, "prepare_s": second}]
        problem = problem_of([{**row, "pieces": [(row["start_s"], row["end_s"], 1.0)]} for row in rows])
        return find_plan(problem, Limits(gap=0.0)).chosen

    assert plan(150, 90) == (0, 1)
    assert plan(90, 150) == (0,)


def test_a_run_that_states_no_bands_is_planned_as_before() -> None:
    rows = [("Teasel-1", "Isvarde-A", 600.0, 1_500.0), ("Teasel-2", "Isvarde-A", 1_200.0, 2_000.0)]
    elsewhere = {"service": "command", "low_mhz": 2_200, "high_mhz": 2_300, "prepare_s": 900}
    silent, stated = (built(run_with(setup), rows, [BOTH, DOWN]) for setup in ([], [elsewhere]))
    assert silent.options.start_s.tolist() == built(run_with([]), rows, [BOTH, DOWN]).options.start_s.tolist()
    assert np.all(silent.options.prepare_s == 60)
    assert np.all(stated.options.prepare_s == 60)
