from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from link_bench import network, passes

from passplan.geometry.pointing import Samples
from passplan.link.budget import (
    BOLTZMANN_DBW_PER_K_HZ,
    cn0_dbhz,
    density_ratio_db,
    ebn0_from_esn0_db,
    figure_of_merit_db_per_k,
    free_space_loss_db,
    net_rate_mbps,
)
from passplan.link.profiles import link_profiles


def test_boltzmann() -> None:
    # CODATA 2018, exact: 1.380649e-23 J/K.
    assert pytest.approx(-228.5992, abs=5e-5) == BOLTZMANN_DBW_PER_K_HZ


def test_free_space_loss_takes_arrays_and_grows_by_6_db_per_doubling() -> None:
    loss = free_space_loss_db([1_000.0, 2_000.0], [[500.0], [1_000.0]])
    assert loss.shape == (2, 2)
    assert loss[1, 0] - loss[0, 0] == pytest.approx(20.0 * np.log10(2.0))
    assert loss[0, 1] == pytest.approx(loss[1, 0])


def test_gain_and_temperature_make_a_figure_of_merit() -> None:
    # By hand: 50.1 dBi - 10 log10(145 K) = 50.1 - 21.61 = 28.49 dB/K.
    assert figure_of_merit_db_per_k(50.1, 145.0) == pytest.approx(28.486, abs=1e-3)


def test_link_equation_and_ratios() -> None:
    # By hand: 10 - 170 + 20 + 228.60 = 88.60 dBHz; less 60 dBHz (1 Msymbol/s) = 28.60 dB.
    cn0 = cn0_dbhz(10.0, 170.0, 20.0)
    assert cn0 == pytest.approx(88.599, abs=1e-3)
    assert density_ratio_db(cn0, 1e6) == pytest.approx(28.599, abs=1e-3)
    assert net_rate_mbps(50.0, 1.98) == pytest.approx(99.0)


@settings(deadline=None, max_examples=50)
@given(st.floats(-10.0, 30.0), st.floats(0.1, 6.0), st.floats(1e3, 1e9))
def test_energy_per_bit_is_the_same_by_both_ways(esn0: float, efficiency: float, symbols: float) -> None:
    cn0 = esn0 + 10.0 * np.log10(symbols)
    assert ebn0_from_esn0_db(esn0, efficiency) == pytest.approx(density_ratio_db(cn0, symbols * efficiency), abs=1e-9)


@pytest.mark.parametrize(
    ("elevation_deg", "range_km", "esn0_db"),
    [
        # By hand, 8 200 MHz, orbit at 500 km, Earth radius 6 371 km, zenith gas 0.045 dB (P.676 at sea level,
        # 7.5 g/m3): EIRP 15 - pointing 0.5 - free space - gas / sin(el) + G/T 32 + 228.60 - 76.99 (50 Msymbol/s).
        (90.0, 500.0, 33.36),  # free space 32.45 + 78.28 + 53.98 = 164.70; gas 0.05
        (30.0, 909.4, 28.12),  # 32.45 + 78.28 + 59.17 = 169.90; gas 0.09
        (5.0, 2_077.1, 20.51),  # 32.45 + 78.28 + 66.35 = 177.08; gas 0.52
    ],
)
def test_budget_by_hand(elevation_deg: float, range_km: float, esn0_db: float) -> None:
    windows, _ = passes((0.0, 60.0, 500.0, 0.0))
    held = np.full(2, 1.0)
    samples = Samples(
        np.array([0.0, 60.0]), 0.0 * held, elevation_deg * held, range_km * held, 0.0 * held, np.array([0, 2])
    )
    link = link_profiles(network(), windows, samples)[0]
    assert link.downlink is not None
    quality_db = link.downlink.tracks[0].quality_db
    # The profile carries the quality after the implementation loss of 1.5 dB.
    assert quality_db + 1.5 == pytest.approx(esn0_db, abs=0.1)
