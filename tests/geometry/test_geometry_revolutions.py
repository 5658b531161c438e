"""Passages of the ascending node, against what orbits do."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from skyfield.api import EarthSatellite, load
from skyfield.framelib import itrs

from passplan.geometry.revolutions import ascending_nodes
from passplan.inputs.load import load_run

ROOT = Path(__file__).parents[2]


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
