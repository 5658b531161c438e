"""The battery: rows that say all, shadows of the sample's orbits, and what the user hears of it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from craft_cases import random_craft_problem

from passplan.geometry.eclipse import eclipses
from passplan.inputs.run import Run
from passplan.planning.battery import PowerNeed
from passplan.planning.on_air import OnAir
from passplan.planning.problem import Problem
from passplan.planning.record import PlanRecord
from passplan.planning.rules.energy import energy
from passplan.planning.rules.spans import within_spans
from passplan.planning.rules.terms import Rows
from passplan.planning.steps import plan_run

CRAFT = ("Ambril-1", "Ambril-3")
# An orbit's sunlight leaves some 10 Wh over, enough for three minutes of sending.
LEAN = {"solar_w": 45.0, "base_load_w": 22.0, "load_w": 200.0}


def kept(rows: Rows, chosen: np.ndarray) -> bool:
    row = np.repeat(np.arange(len(rows)), np.diff(rows.offset))
    load = np.bincount(row, weights=rows.amounts * chosen[rows.options], minlength=len(rows))
    return bool(np.all(load <= rows.limit + 1e-7))


def every_pair(problem: Problem, need: PowerNeed) -> Rows:
    """The rows over every pair of instants on a grid that holds all edges of sending, and all edges of light."""
    (on_air,) = problem.needs_of(OnAir)
    mine = np.flatnonzero(problem.options.spacecraft == need.spacecraft)
    times = np.unique(np.concatenate([need.edges_s, np.arange(0.0, problem.horizon_s + 1.0, 30.0)]))
    gained_wh = need.gained_wh(times)
    low, high = np.nonzero(times[:, None] < times)
    taken_wh = np.where(times > 0.0, gained_wh, need.capacity_wh - need.start_wh)
    floor_wh = np.minimum(need.floor_wh, need.idle_at_wh(times))
    allowed_wh = need.capacity_wh - floor_wh[high] + gained_wh[high] - taken_wh[low]
    return within_spans(
        "x", "x", mine, on_air.start_s[mine], on_air.end_s[mine], on_air.load_w[mine] / 3600.0, times[low],
        times[high], np.maximum(allowed_wh, 0.0))


def test_few_pairs_of_instants_say_as_much_as_all() -> None:
    looked = few = many = refused = 0
    for seed in range(80):
        problem = random_craft_problem(seed)
        needs = problem.needs_of(PowerNeed)
        for need, rows in zip(needs, energy(problem).rows, strict=True):
            dense = every_pair(problem, need)
            few, many = few + len(rows), many + len(dense)
            rng = np.random.default_rng(seed)
            for _ in range(10):
                chosen = rng.random(len(problem.options)) < 0.3
                looked += 1
                refused += not kept(rows, chosen)
                # Recoveries lie between the points of the grid: there the few may say more.
                if kept(rows, chosen):
                    assert kept(dense, chosen), f"seed {seed}"
                elif kept(dense, chosen):
                    _, levels = need.idle_wh()
                    assert np.any(levels < need.floor_wh), f"seed {seed}"
    assert looked > 500
    assert refused > 50
    assert few < 0.05 * many


def powered(run: Run, load_w: float = 90.0, **keys: float | None) -> Run:
    """Two spacecraft of the sample with the same battery and as thirsty radios, over six hours."""
    power = {"battery_wh": 60.0, "battery_floor_percent": 60.0, "solar_w": 95.0, "base_load_w": 50.0, **keys}
    spacecraft = {name: run.spacecraft[name].model_copy(update=power) for name in CRAFT}
    radios = {name: radio.model_copy(update={"load_w": load_w} if radio.direction == "downlink" else {})
              for name, radio in run.radios.items()}
    return replace(run, spacecraft=spacecraft, radios=radios, orbits={name: run.orbits[name] for name in CRAFT},
                   requests=(), end_utc=run.start_utc + np.timedelta64(6, "h"))


@pytest.fixture(scope="module")
def tight(short_run: Run) -> PlanRecord:
    return plan_run(powered(short_run, **LEAN))


def test_the_floor_is_kept_and_costs_contacts(short_run: Run, tight: PlanRecord) -> None:
    for name in CRAFT:
        battery = tight.summary["battery"][name]
        assert 36.0 - 1e-6 <= battery["lowest_wh"] < 45.0
        assert battery["capacity_wh"] == 60.0
        assert str(short_run.start_utc) <= battery["lowest_utc"] <= str(short_run.end_utc)
    assert "battery" in set(tight.unused["reason"])
    detail = tight.unused[tight.unused["reason"] == "battery"]["detail"].iloc[0]
    assert "'s energy above the floor of its battery" in detail
    loose = plan_run(powered(short_run, **{**LEAN, "battery_wh": 600.0}))
    assert loose.summary["value"] > 1.02 * tight.summary["value"]
    assert "battery" not in set(loose.unused["reason"])
    assert tight.summary["warnings"] == loose.summary["warnings"]


def test_a_base_load_that_breaks_the_floor_is_said_and_nothing_worsens_it(short_run: Run) -> None:
    run = powered(short_run, solar_w=40.0)
    plan = plan_run(run)
    (first, _) = [line for line in plan.summary["warnings"] if "base load alone" in line]
    assert first.startswith("Ambril-1: its base load alone takes its battery under its floor of 36 Wh by 2027-03-09 ")
    assert len(plan.contacts[plan.contacts["service"] != "command"]) == 0


def test_a_start_under_the_floor_is_said_and_nothing_sent_until_it_has_recovered(short_run: Run) -> None:
    run = powered(short_run, battery_start_percent=20.0)
    plan = plan_run(run)
    (first, _) = [line for line in plan.summary["warnings"] if "its battery starts with" in line]
    assert first == ("Ambril-1: its battery starts with 12 Wh, under its floor of 36 Wh; "
                     "it sends nothing before it has recovered")
    for name in CRAFT:
        # 24 Wh at 45 W take 32 minutes of sunlight, 50 W come off in the dark.
        minutes, charge = 0, 12.0
        dark = eclipses(run.orbits[name], run.start_utc, run.end_utc)
        while charge < 36.0:
            at = run.start_utc + np.timedelta64(minutes * 60 + 30, "s")
            charge += (-50.0 if np.any((dark[:, 0] <= at) & (at < dark[:, 1])) else 45.0) / 60.0
            minutes += 1
        own = plan.contacts[(plan.contacts["spacecraft"] == name) & (plan.contacts["service"] != "command")]
        assert len(own)
        assert own["start_utc"].min() >= run.start_utc + np.timedelta64(minutes - 1, "m")


def test_without_a_battery_there_is_neither_a_row_nor_a_figure(short_run: Run) -> None:
    plan = plan_run(powered(short_run, battery_wh=None))
    assert plan.summary["battery"] == {}
