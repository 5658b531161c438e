from __future__ import annotations

import math

import numpy as np
import pytest
from link_bench import RECEIVER, network

from passplan.geometry.pointing import LookAngles
from passplan.inputs.run import Run
from passplan.link import lines
from passplan.link.lines import BudgetLine, budget_lines, link_along

NOON = np.datetime64("2027-03-09T12:00:00", "ms")


@pytest.fixture
def run(monkeypatch: pytest.MonkeyPatch) -> Run:
    """A run whose spacecraft passes overhead: elevation 3, 30, 90 deg at the first three times asked for."""

    def look(_source: object, _site: object, times: np.ndarray, **_: object) -> LookAngles:
        count = len(times)
        elevation, distance = np.array([30.0, 3.0, 90.0])[:count], np.array([909.4, 2_240.0, 500.0])[:count]
        return LookAngles(np.full(count, 120.0), elevation, distance, np.zeros(count))

    monkeypatch.setattr(lines, "look_angles", look)
    bench = network()
    return type(bench)(**{**bench.__dict__, "orbits": {"Plover": None}})


def _terms(found: list[BudgetLine], direction: str) -> dict[str, BudgetLine]:
    return {line.term: line for line in found if line.link.startswith(direction)}


def _number(line: BudgetLine) -> float:
    assert isinstance(line.value, float)
    return line.value


def test_the_downlink_adds_up_line_by_line(run: Run) -> None:
    terms = _terms(budget_lines(run, "Plover", "Dish", NOON), "downlink")
    summed = (
        "EIRP", "pointing loss aboard", "free-space loss", "gas attenuation", "polarisation loss",
        "pointing loss on the ground", "G/T", "Boltzmann's constant",
    )
    cn0 = sum(_number(terms[name]) for name in summed)
    assert _number(terms["C/N0"]) == pytest.approx(cn0, abs=1e-9)
    assert _number(terms["Es/N0"]) == pytest.approx(cn0 + _number(terms["symbol rate"]), abs=1e-9)
    left = _number(terms["Es/N0"]) + _number(terms["implementation loss"]) + _number(terms["required Es/N0"])
    assert _number(terms["margin"]) == pytest.approx(left, abs=1e-9)
    # By hand, as in the budget test: Es/N0 at 30 deg and 909.4 km is 28.12 dB.
    assert _number(terms["Es/N0"]) == pytest.approx(28.12, abs=0.1)
    assert terms["modcod"].value == "32APSK 9/10"
    assert _number(terms["net rate"]) == pytest.approx(50.0 * 4.453027)
    assert _number(terms["Eb/N0"]) == pytest.approx(_number(terms["Es/N0"]) - 10.0 * math.log10(4.453027))


def test_the_command_link_adds_up_too(run: Run) -> None:
    terms = _terms(budget_lines(run, "Plover", "Dish", NOON), "command")
    # By hand at 2 050 MHz and 909.4 km: 48 - 157.86 - 0.07 - 28 + 228.60 - 48.06 = 42.61 dB.
    assert _number(terms["Eb/N0"]) == pytest.approx(42.61, abs=0.1)
    left = _number(terms["Eb/N0"]) - 2.0 - 9.6
    assert _number(terms["margin"]) == pytest.approx(left, abs=1e-9)


def test_every_line_names_its_source_and_no_loss_prints_as_minus_zero(run: Run) -> None:
    found = budget_lines(run, "Plover", "Dish", NOON)
    assert all(line.source for line in found)
    assert not any(isinstance(v := line.value, float) and v == 0.0 and math.copysign(1.0, v) < 0 for line in found)


def test_outside_its_range_a_model_says_so(run: Run, monkeypatch: pytest.MonkeyPatch) -> None:
    def low(_source: object, _site: object, times: np.ndarray, **_: object) -> LookAngles:
        flat = np.ones(len(times))
        return LookAngles(120.0 * flat, -2.0 * flat, 2_800.0 * flat, 0.0 * flat)

    assert "5 deg" not in _terms(budget_lines(run, "Plover", "Dish", NOON), "downlink")["gas attenuation"].source
    monkeypatch.setattr(lines, "look_angles", low)
    terms = _terms(budget_lines(run, "Plover", "Dish", NOON), "downlink")
    assert "below its stated 5 deg" in terms["gas attenuation"].source
    assert "below the horizon" in terms["elevation"].source


def test_where_nothing_holds_the_most_robust_modcod_is_shown(run: Run) -> None:
    weak = {**run.radios, "x": run.radios["x"].model_copy(update={"eirp_dbw": -20.0})}
    terms = _terms(budget_lines(type(run)(**{**run.__dict__, "radios": weak}), "Plover", "Dish", NOON), "downlink")
    assert terms["modcod"].value == "QPSK 1/4"
    assert "does not hold" in terms["modcod"].source
    assert _number(terms["margin"]) < 3.0
    assert _number(terms["net rate"]) == 0.0


def test_nothing_in_common_gives_no_lines(run: Run) -> None:
    bare = network(receivers=(RECEIVER.model_copy(update={"high_mhz": 8_100.0}),), transmitters=())
    bare = type(bare)(**{**bare.__dict__, "orbits": {"Plover": None}})
    assert budget_lines(bare, "Plover", "Dish", NOON) == []
    along = link_along(bare, "Plover", "Dish", np.array([NOON]))
    assert along.empty
    assert "margin_db" in along.columns


def test_along_a_pass(run: Run) -> None:
    times = NOON + np.arange(3) * np.timedelta64(60, "s")
    table = link_along(run, "Plover", "Dish", times)
    down = table[table["direction"] == "downlink"]
    assert list(down["elevation_deg"]) == [30.0, 3.0, 90.0]
    assert down["quality_db"].argmin() == 1
    assert (down["rate_mbps"] > 0.0).all()
    assert list(table.columns[:4]) == ["utc", "direction", "radio", "partner"]
    assert len(table) == 6
    at_noon = _terms(budget_lines(run, "Plover", "Dish", NOON), "downlink")
    assert down["margin_db"].iloc[0] == pytest.approx(_number(at_noon["margin"]))
