from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from passplan.inputs.ground import Site
from passplan.link.atmosphere import Weather, ZenithGas, gas_attenuation_db, gas_tables, surface_weather, zenith_gas

GAS = ZenithGas(0.0387, 0.0064, 4.91, 1.70)
SEA_LEVEL = Weather(1_013.25, 288.15, 7.5)


def test_reference_atmosphere_at_sea_level_and_at_height() -> None:
    shore = surface_weather(Site(name="Shore", latitude_deg=0.0, longitude_deg=0.0))
    assert shore == SEA_LEVEL
    # US Standard Atmosphere 1976 at 2 000 m: 275.15 K, 794.95 hPa. Water vapour: 7.5 exp(-1) (P.835).
    ridge = surface_weather(Site(name="Ridge", latitude_deg=0.0, longitude_deg=0.0, height_m=2_000.0))
    assert ridge.temperature_k == pytest.approx(275.15, abs=0.01)
    assert ridge.pressure_hpa == pytest.approx(794.95, abs=0.1)
    assert ridge.water_vapour_g_per_m3 == pytest.approx(2.759, abs=0.001)


def test_the_site_s_own_weather_comes_first() -> None:
    site = Site(
        name="Marsh", latitude_deg=0.0, longitude_deg=0.0, pressure_hpa=990.0, temperature_k=300.0,
        water_vapour_g_per_m3=22.0,
    )
    assert surface_weather(site) == Weather(990.0, 300.0, 22.0)


def test_slant_attenuation_follows_the_cosecant_in_the_stated_range() -> None:
    elevation = np.array([5.0, 30.0, 90.0])
    expected = (0.0387 + 0.0064) / np.sin(np.radians(elevation))
    assert gas_attenuation_db(GAS, elevation) == pytest.approx(expected, rel=1e-12)


def test_no_step_where_the_laws_join() -> None:
    joins = gas_attenuation_db(GAS, [3.0 - 1e-9, 3.0 + 1e-9])
    assert joins[0] == pytest.approx(joins[1], abs=1e-6)
    assert gas_attenuation_db(GAS, -5.0) == gas_attenuation_db(GAS, 0.0)
    assert np.isfinite(gas_attenuation_db(GAS, 0.0))


@settings(deadline=None, max_examples=100)
@given(st.lists(st.floats(-5.0, 90.0), min_size=2, max_size=8))
def test_attenuation_never_rises_with_elevation(elevations: list[float]) -> None:
    slant = gas_attenuation_db(GAS, np.sort(elevations))
    assert np.all(np.diff(slant) <= 1e-12)


def test_arrays_of_gas_broadcast_like_single_figures() -> None:
    elevation = np.array([1.0, 4.0, 60.0])
    arrays = ZenithGas(*(np.full(3, float(value)) for value in (0.0387, 0.0064, 4.91, 1.70)))
    assert gas_attenuation_db(arrays, elevation) == pytest.approx(gas_attenuation_db(GAS, elevation))


def test_below_one_gigahertz_the_figure_at_one_gigahertz_holds() -> None:
    assert zenith_gas(401.0, SEA_LEVEL) == zenith_gas(1_000.0, SEA_LEVEL)


def test_dry_air_has_no_vapour_term() -> None:
    assert zenith_gas(8_200.0, Weather(1_013.25, 288.15, 0.0))[1] == 0.0


def test_tables_are_keyed_by_site_and_frequency() -> None:
    low = Site(name="Low", latitude_deg=0.0, longitude_deg=0.0)
    high = Site(name="High", latitude_deg=0.0, longitude_deg=0.0, height_m=3_000.0)
    tables = gas_tables([(low, 8_200.0), (high, 8_200.0), (low, 26_000.0), (low, 8_200.0)])
    assert set(tables) == {("Low", 8_200.0), ("High", 8_200.0), ("Low", 26_000.0)}
    zenith = {key: gas_attenuation_db(gas, 90.0) for key, gas in tables.items()}
    assert zenith["High", 8_200.0] < zenith["Low", 8_200.0] < zenith["Low", 26_000.0]
