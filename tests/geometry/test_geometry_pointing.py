from __future__ import annotations

import numpy as np
import pytest
from geometry_cases import END, INCLINED, LOW, NORTH, REGIMES, SITES, START, at_s, spans_s

from passplan.geometry.pointing import azimuth_of, look_angles, sample_windows
from passplan.geometry.windows import find_windows
from passplan.inputs.ground import Antenna

ANTENNAS = {
    "Tall": Antenna(name="Tall", site="North"),
    "Wide": Antenna(name="Wide", site="South", min_elevation_deg=0.0),
}
ORBITS = {"Teal": LOW, "Wren": INCLINED}


def test_the_range_rate_is_the_rate_of_the_range() -> None:
    seconds = np.arange(0.0, 3_600.0, 60.0)
    found = look_angles(LOW, NORTH, at_s(seconds))
    before, after = (look_angles(LOW, NORTH, at_s(seconds + shift)).range_km for shift in (-0.5, 0.5))
    np.testing.assert_allclose(found.range_rate_km_s, after - before, atol=2e-3)


def test_azimuths_run_clockwise_from_north() -> None:
    found = azimuth_of(np.array([0.0, 1.0, 0.0, -1.0, -1e-20]), np.array([1.0, 0.0, -1.0, 0.0, 1.0]))
    assert found.tolist() == [0.0, 90.0, 180.0, 270.0, 0.0]


def test_one_time_is_enough() -> None:
    assert look_angles(LOW, NORTH, np.array([START])).elevation_deg.shape == (1,)


def test_samples_run_from_aos_to_los_on_the_step_and_agree_with_direct_evaluation() -> None:
    table = find_windows(ORBITS, ANTENNAS, SITES, START, END)
    samples = sample_windows(table, ORBITS, SITES, START, 10.0)
    assert samples.offsets[0] == 0
    assert samples.offsets[-1] == samples.time_s.size
    for i, (aos, los) in enumerate(spans_s(table).tolist()):
        mine = slice(samples.offsets[i], samples.offsets[i + 1])
        time = samples.time_s[mine]
        assert (time[0], time[-1]) == pytest.approx((aos, los))
        np.testing.assert_allclose(np.diff(time)[:-1], 10.0)
        assert 0.0 < time[-1] - time[-2] <= 10.001
        row = table.iloc[i]
        direct = look_angles(ORBITS[row["spacecraft"]], SITES[row["site"]], at_s(time))
        np.testing.assert_allclose(samples.elevation_deg[mine], direct.elevation_deg, atol=2e-5)
        np.testing.assert_allclose(samples.range_km[mine], direct.range_km, atol=1e-2)
        assert samples.elevation_deg[mine].min() > ANTENNAS[row["antenna"]].min_elevation_deg - 1e-3
        assert samples.range_km[mine].min() >= row["min_range_km"] - 1e-3
        assert samples.azimuth_deg[mine][0] == pytest.approx(row["aos_azimuth_deg"], abs=1e-2)
        assert samples.azimuth_deg[mine][-1] == pytest.approx(row["los_azimuth_deg"], abs=1e-2)


def test_no_windows_give_no_samples() -> None:
    table = find_windows({}, ANTENNAS, SITES, START, END)
    samples = sample_windows(table, {}, SITES, START)
    assert samples.time_s.size == 0
    assert samples.offsets.tolist() == [0]


@pytest.mark.parametrize("name", REGIMES)
def test_every_regime_can_be_sampled(name: str) -> None:
    table = find_windows({"Teal": REGIMES[name]}, ANTENNAS, SITES, START, END)
    samples = sample_windows(table, {"Teal": REGIMES[name]}, SITES, START, 60.0)
    assert np.isfinite(samples.azimuth_deg).all()
    assert np.isfinite(samples.range_rate_km_s).all()
