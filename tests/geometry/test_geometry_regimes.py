from __future__ import annotations

import math

import numpy as np
import pytest
from geometry_cases import REGIMES
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.geometry.regimes import ALWAYS_S, orbit_class, regime, regime_of, regime_of_state, semi_major_axis_km

DAY_S = 86_400.0


@pytest.mark.parametrize(
    ("name", "step_s"),
    [("low", 300.0), ("inclined", 300.0), ("medium", 1_800.0), ("geosynchronous", 1_800.0), ("eccentric", 120.0)],
)
def test_steps_of_the_usual_orbits(name: str, step_s: float) -> None:
    assert regime_of(REGIMES[name].satrec).step_s == step_s


@settings(deadline=None, max_examples=100)
@given(st.floats(0.2, 16.5), st.floats(0.0, 0.95))
def test_steps_divide_the_day_and_shrink_with_eccentricity(rev_per_day: float, eccentricity: float) -> None:
    motion = 2.0 * math.pi * rev_per_day / DAY_S
    found, rounder = regime(motion, eccentricity), regime(motion, 0.5 * eccentricity)
    assert DAY_S % found.step_s == 0.0
    assert found.step_s <= rounder.step_s
    # Seven samples beyond an event keep its stencil in the middle.
    assert found.reach_s >= 7.0 * min(found.step_s, 300.0)


def test_low_orbits_are_followed_for_one_pass_and_others_for_days() -> None:
    assert regime_of(REGIMES["low"].satrec).reach_s <= 3_600.0
    assert regime_of(REGIMES["eccentric"].satrec).reach_s > ALWAYS_S


@pytest.mark.parametrize("name", REGIMES)
def test_a_state_tells_the_regime_as_its_elements_do(name: str) -> None:
    _, position, velocity = REGIMES[name].satrec.sgp4(2_461_473.5, 0.3)
    found, expected = regime_of_state(np.array(position), np.array(velocity)), regime_of(REGIMES[name].satrec)
    assert found.step_s == expected.step_s
    assert found.reach_s == pytest.approx(expected.reach_s, abs=601.0)


def test_a_state_on_an_open_orbit_is_sampled_finely() -> None:
    found = regime_of_state(np.array([7_000.0, 0.0, 0.0]), np.array([0.0, 12.0, 0.0]))
    assert found.step_s == 15.0
    assert found.reach_s > ALWAYS_S


def test_the_semi_major_axis_of_a_half_day_orbit() -> None:
    # GPS interface specification IS-GPS-200: 26 560 km nominal for a period of half a sidereal day.
    assert semi_major_axis_km(2.0 * math.pi / 43_082.0) == pytest.approx(26_560.0, abs=5.0)


@pytest.mark.parametrize(
    ("rev_per_day", "eccentricity", "expected"),
    [
        (15.2, 0.001, "low"),
        (12.0, 0.02, "low"),
        (2.0057, 0.005, "medium"),
        (1.0027, 0.0002, "geosynchronous"),
        (2.006, 0.72, "eccentric"),
    ],
)
def test_orbit_classes(rev_per_day: float, eccentricity: float, expected: str) -> None:
    assert orbit_class(2.0 * math.pi * rev_per_day / DAY_S, eccentricity) == expected
