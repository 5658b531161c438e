"""Flux density at the ground: the worst angle of arrival by hand, and limits that are exceeded."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from sisters import orbit, sisters

from passplan.geometry.timescale import utc_seconds
from passplan.geometry.trajectory import states_itrf
from passplan.inputs.pfd import PfdLimit
from passplan.link.ground_flux import worst_fluxes


def _limits(low_db: float, high_db: float) -> tuple[PfdLimit, ...]:
    return tuple(PfdLimit(low_mhz=8_000, high_mhz=8_400, arrival_deg=angle, limit_dbw_per_m2=limit, source="the house")
                 for angle, limit in ((5.0, low_db), (25.0, high_db)))


def test_the_worst_angle_by_hand() -> None:
    run = sisters({"Plover": orbit(70.0)})
    times = float(utc_seconds(run.start_utc)) + np.arange(0.0, 43_200.0, 60.0)
    height_km = np.linalg.norm(states_itrf(run.orbits["Plover"], times)[0], axis=1).min() - 6_378.137
    (steered,) = worst_fluxes(replace(run, pfd_limits=_limits(-150.0, -150.0)))
    # 12 dBW over 4 pi d^2, 4 kHz of 50 MHz; a level limit is nearest where the spacecraft is: overhead.
    by_hand = 12.0 - 10.0 * np.log10(4.0 * np.pi) - 20.0 * np.log10(height_km * 1e3) - 10.0 * np.log10(50e6 / 4e3)
    assert steered.arrival_deg == 90.0
    assert steered.density_dbw_per_m2 == pytest.approx(by_hand, abs=0.02)
    assert steered.excess_db == pytest.approx(by_hand + 150.0, abs=0.02)
    assert (steered.unit, steered.source) == ("dBW/m2/4 kHz", "the house")
    # With 30 dB more allowed overhead the worst is where the limit is still low: 5 deg, and 2 000 km away.
    (low,) = worst_fluxes(replace(run, pfd_limits=_limits(-180.0, -150.0)))
    assert low.arrival_deg == 5.0
    radius = 6_378.137 + height_km
    sine = 6_378.137 * np.sin(np.radians(5.0))
    distance_km = np.sqrt(sine**2 + radius**2 - 6_378.137**2) - sine
    assert low.density_dbw_per_m2 == pytest.approx(by_hand - 20.0 * np.log10(distance_km / height_km), abs=0.02)


def test_a_pattern_counts_and_bands_without_a_limit_do_not() -> None:
    run = sisters({"Plover": orbit(70.0)})
    radio = run.radios["x-Plover"].model_copy(update={"pattern": ((0.0, 20.0), (50.0, 0.0), (70.0, 0.0))})
    fixed = replace(run, radios={"x-Plover": radio}, pfd_limits=_limits(-150.0, -150.0))
    (found,) = worst_fluxes(fixed)
    # 20 dB less straight down: the worst is where the antenna aboard shines.
    assert 20.0 < found.arrival_deg < 60.0
    elsewhere = radio.model_copy(update={"frequency_mhz": 9_000.0})
    assert list(worst_fluxes(replace(fixed, radios={"x-Plover": elsewhere}))) == []
