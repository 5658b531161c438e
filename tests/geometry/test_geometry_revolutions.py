"""Revolutions from one ascending node to the next."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from passplan.geometry.revolutions import ascending_nodes
from passplan.geometry.timescale import utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.load import load_run

ROOT = Path(__file__).parents[2]
RUN = load_run(ROOT / "configs" / "daily.toml")


@pytest.mark.parametrize("name", ["Ambril-1", "Teasel-5", "Highwater"])
def test_nodes_lie_on_the_equator_going_north_and_reach_around_the_horizon(name: str) -> None:
    source = RUN.orbits[name]
    nodes = ascending_nodes(source, RUN.start_utc, RUN.end_utc)
    position, velocity = states_itrf(source, nodes + float(utc_seconds(RUN.start_utc)))
    assert np.abs(position[:, 2]).max() < 1e-4
    assert velocity[:, 2].min() > 0.0
    assert nodes[0] <= 0.0 < nodes[1]
    assert nodes[-2] < RUN.horizon_s <= nodes[-1]


def test_no_revolution_is_missed() -> None:
    # Ambril-1's mean motion with the secular J2 part of the nodal period (Vallado, Fundamentals of
    # Astrodynamics, eq. for P_omega; value from memory): 95.1 min at 97.5 deg and 520 km.
    nodes = ascending_nodes(RUN.orbits["Ambril-1"], RUN.start_utc, RUN.end_utc)
    assert np.diff(nodes) / 60.0 == pytest.approx(np.full(len(nodes) - 1, 95.09), abs=0.1)


def test_a_later_horizon_sees_the_same_nodes() -> None:
    source, shift = RUN.orbits["Ambril-1"], np.timedelta64(5, "h")
    whole = ascending_nodes(source, RUN.start_utc, RUN.end_utc)
    part = ascending_nodes(source, RUN.start_utc + shift, RUN.end_utc) + 5 * 3600.0
    assert part == pytest.approx(whole[-len(part):], abs=1e-3)
