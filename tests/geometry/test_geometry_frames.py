from __future__ import annotations

import numpy as np
import pytest
from geometry_cases import LOW, START, at_s
from skyfield.api import EarthSatellite
from skyfield.framelib import ICRS_to_J2000, itrs

from passplan.geometry.frames import inertial_to_itrf
from passplan.geometry.sgp4_states import sgp4_itrf
from passplan.geometry.timescale import skyfield_time, timescale, utc_seconds

UTC_S = utc_seconds(at_s(np.linspace(0.0, 200_000.0, 60), START))


@pytest.mark.parametrize("frame", ["GCRF", "ICRF", "EME2000"])
def test_inertial_states_reach_the_earth_fixed_frame_as_skyfield_turns_them(frame: str) -> None:
    place = EarthSatellite.from_satrec(LOW.satrec, timescale()).at(skyfield_time(UTC_S))
    inertial = [place.xyz.km.T, place.velocity.km_per_s.T]
    if frame == "EME2000":
        inertial = [part @ np.asarray(ICRS_to_J2000).T for part in inertial]
    positions, velocities = inertial_to_itrf(frame, inertial[0], inertial[1], UTC_S)
    expected, rates = place.frame_xyz_and_velocity(itrs)
    # One millimetre: the nutation is joined by straight lines between half hours.
    np.testing.assert_allclose(positions, expected.km.T, atol=1e-6)
    np.testing.assert_allclose(velocities, rates.km_per_s.T, atol=1e-7)


def test_sgp4_states_agree_by_both_ways_round() -> None:
    place = EarthSatellite.from_satrec(LOW.satrec, timescale()).at(skyfield_time(UTC_S))
    positions, velocities = sgp4_itrf(LOW.satrec, UTC_S)
    expected, rates = place.frame_xyz_and_velocity(itrs)
    np.testing.assert_allclose(positions, expected.km.T, atol=1e-5)
    np.testing.assert_allclose(velocities, rates.km_per_s.T, atol=1e-6)


def test_velocities_are_the_rate_of_the_positions() -> None:
    half = 0.05
    before, after = (sgp4_itrf(LOW.satrec, UTC_S + shift)[0] for shift in (-half, half))
    # SGP4's own velocities leave out small terms of its positions: 2 m/s is what they differ by.
    np.testing.assert_allclose(sgp4_itrf(LOW.satrec, UTC_S)[1], (after - before) / (2.0 * half), atol=2e-3)
