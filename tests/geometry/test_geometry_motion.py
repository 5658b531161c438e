from __future__ import annotations

import numpy as np
import pytest
from geometry_cases import INCLINED, LOW, NORTH, SITES, START, antenna, at_s, windows

from passplan.geometry.motion import (
    POINTING_COLUMNS,
    doppler_hz,
    pointing_rates,
    pointing_table,
    spacecraft_separation_deg,
)
from passplan.geometry.pointing import look_angles
from passplan.geometry.refraction import apparent_deg


def test_doppler_by_hand() -> None:
    # 8 200 MHz approaching at 7 km/s: 8.2e9 x 7 / 299 792.458 = 191.5 kHz upwards.
    assert doppler_hz(np.array([-7.0]), 8_200.0)[0] == pytest.approx(191_466.0, abs=1.0)


def test_rates_are_the_differences_of_the_angles() -> None:
    seconds = np.linspace(0.0, 86_000.0, 300)
    found = pointing_rates(LOW, NORTH, at_s(seconds))
    before, after = (look_angles(LOW, NORTH, at_s(seconds + d)) for d in (-0.5, 0.5))
    turn = (after.azimuth_deg - before.azimuth_deg + 180.0) % 360.0 - 180.0
    np.testing.assert_allclose(found.azimuth_deg_s, turn, atol=2e-4, rtol=2e-3)
    np.testing.assert_allclose(found.elevation_deg_s, after.elevation_deg - before.elevation_deg, atol=2e-5)


def test_a_table_along_windows() -> None:
    table = windows(LOW, antenna())
    rows = pointing_table(table, {"Teal": LOW}, SITES, step_s=30.0, frequency_mhz=2_250.0)
    assert tuple(rows.columns) == (*POINTING_COLUMNS, "doppler_hz")
    assert set(rows["window_id"]) == set(table["window_id"])
    own = rows[rows["window_id"] == table["window_id"][0]]
    assert own["time_utc"].iloc[0] == table["aos_utc"][0] and own["time_utc"].iloc[-1] == table["los_utc"][0]
    # The range falls, then grows: the carrier is high, then low.
    assert own["doppler_hz"].iloc[0] > 0.0 > own["doppler_hz"].iloc[-1]
    bent = pointing_table(table, {"Teal": LOW}, SITES, step_s=30.0, refraction=True)
    np.testing.assert_allclose(bent["elevation_deg"], apparent_deg(rows["elevation_deg"].to_numpy(), 0.39), atol=1e-9)


def test_separation_of_two_spacecraft_is_the_angle_between_their_directions() -> None:
    times = START + np.arange(0, 86_400, 977).astype("timedelta64[s]")
    apart = spacecraft_separation_deg(LOW, INCLINED, NORTH, times)
    lines = []
    for source in (LOW, INCLINED):
        seen = look_angles(source, NORTH, times)
        azimuth, elevation = np.radians(seen.azimuth_deg), np.radians(seen.elevation_deg)
        level = np.cos(elevation)
        lines.append(np.stack([level * np.cos(azimuth), level * np.sin(azimuth), np.sin(elevation)]))
    np.testing.assert_allclose(apart, np.degrees(np.arccos((lines[0] * lines[1]).sum(axis=0))), atol=1e-6)
    assert spacecraft_separation_deg(LOW, LOW, NORTH, times) == pytest.approx(0.0)
