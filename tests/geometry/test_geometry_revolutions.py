"""Revolutions from one ascending node to the next."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from skyfield.api import EarthSatellite, load
from skyfield.framelib import itrs

from passplan.geometry.revolutions import ascending_nodes, revolution_edges_s
from passplan.geometry.timescale import utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.load import load_run

ROOT = Path(__file__).parents[2]
RUN = load_run(ROOT / "configs" / "daily.toml")


@pytest.mark.parametrize("name", ["Ambril-1", "Teasel-5", "Highwater"])
def test_nodes_lie_on_the_equator_going_north_and_reach_around_the_horizon(name: str) -> None:
    source = RUN.orbits[name]
    nodes = revolution_edges_s(source, RUN.start_utc, RUN.end_utc)
    position, velocity = states_itrf(source, nodes + float(utc_seconds(RUN.start_utc)))
    assert np.abs(position[:, 2]).max() < 1e-4
    assert velocity[:, 2].min() > 0.0
    assert nodes[0] <= 0.0 < nodes[1]
    assert nodes[-2] < RUN.horizon_s <= nodes[-1]


def test_no_revolution_is_missed() -> None:
    # Ambril-1's mean motion with the secular J2 part of the nodal period (Vallado, Fundamentals of
    # Astrodynamics, eq. for P_omega; value from memory): 95.1 min at 97.5 deg and 520 km.
    nodes = revolution_edges_s(RUN.orbits["Ambril-1"], RUN.start_utc, RUN.end_utc)
    assert np.diff(nodes) / 60.0 == pytest.approx(np.full(len(nodes) - 1, 95.09), abs=0.1)


def test_a_later_horizon_sees_the_same_nodes() -> None:
    source, shift = RUN.orbits["Ambril-1"], np.timedelta64(5, "h")
    whole = revolution_edges_s(source, RUN.start_utc, RUN.end_utc)
    part = revolution_edges_s(source, RUN.start_utc + shift, RUN.end_utc) + 5 * 3600.0
    assert part == pytest.approx(whole[-len(part):], abs=1e-3)


@pytest.mark.parametrize(("name", "orbits"), [("Ambril-1", 15), ("Teasel-5", 14), ("Highwater", 2)])
def test_nodes_are_an_orbit_apart_and_at_the_equator(name: str, orbits: int) -> None:
    run = load_run(ROOT / "configs" / "daily.toml")
    source = run.orbits[name]
    nodes = ascending_nodes(source, run.start_utc, run.end_utc)
    assert abs(len(nodes) - orbits) <= 1
    # The nodal period is within 0.2 % of the mean motion's: J2 changes it by about that at most.
    apart_s = np.diff(nodes) / np.timedelta64(1, "s")
    assert np.allclose(apart_s, 60.0 * 2.0 * np.pi / source.satrec.no_kozai, rtol=2e-3)
    # By Skyfield, the latitude is nothing there and rises (a millisecond is 7 m).
    scale = load.timescale(builtin=True)
    body = EarthSatellite.from_satrec(source.satrec, scale)
    for shift_ms, sign in ((-2, -1.0), (2, 1.0)):
        instants = [(node + np.timedelta64(shift_ms, "ms")).item() for node in nodes]
        times = scale.utc(2027, 3, 9, [t.hour + 24 * (t.day - 9) for t in instants], [t.minute for t in instants],
                          [t.second + t.microsecond / 1e6 for t in instants])
        north_km = body.at(times).frame_xyz(itrs).km[2]
        assert np.all(sign * north_km > 0.0) and np.all(np.abs(north_km) < 0.05)
