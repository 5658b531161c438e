from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from link_bench import RECEIVER

from passplan.inputs.ground import Receiver
from passplan.link.atmosphere import Sky, ZenithGas
from passplan.link.budget import (
    beamwidth_deg,
    dish_diameter_m,
    dish_gain_dbi,
    sky_noise_k,
    sun_noise_k,
    system_noise_k,
)
from passplan.link.noise import (
    dish_of,
    figure_drop_db,
    figure_note,
    reference_figure_db_per_k,
    reference_noise_k,
    system_noise_at_k,
)
from passplan.link.weather import NODES_DEG

CLEAR = ZenithGas(0.2, 0.1, 5.0, 2.0)
DRY = Sky(CLEAR, CLEAR)
# 6 dB of rain at every elevation.
WET = Sky(CLEAR, CLEAR, np.vstack((np.full(NODES_DEG.size, 6.0), np.zeros(NODES_DEG.size), np.zeros(NODES_DEG.size))))
ELEVATIONS = np.array([5.0, 30.0, 90.0])
BAND = {"name": "rx", "low_mhz": 8_025.0, "high_mhz": 8_400.0, "polarisations": ("RHCP",)}


def _drop(receiver: Receiver, sky: Sky) -> np.ndarray:
    return figure_drop_db(receiver, ELEVATIONS, system_noise_at_k(receiver, sky, ELEVATIONS))


def test_a_stated_figure_holds_in_clear_sky_and_falls_in_rain_where_the_noise_is_known() -> None:
    known = RECEIVER.model_copy(update={"noise_temperature_k": 150.0})
    assert _drop(RECEIVER, WET) == pytest.approx(np.zeros(3))
    assert _drop(known, DRY) == pytest.approx(np.zeros(3))
    # By hand at the zenith: 0.3 dB of gas is 20.88 K of sky, 6.3 dB 211.17 K; 150 K become 340.3 K: 3.56 dB.
    assert sky_noise_k([0.3, 6.3]) == pytest.approx([20.88, 211.17], abs=0.05)
    assert _drop(known, WET)[2] == pytest.approx(3.56, abs=0.01)


def test_sky_noise_is_not_counted_twice_when_measured_at_elevation() -> None:
    measured = Receiver(**BAND, gain_dbi=50.0, noise_temperature_k=150.0, measured_at_deg=30.0)
    drop = _drop(measured, DRY)
    assert drop[1] == pytest.approx(0.0, abs=1e-12)
    assert drop[0] > 0.0 > drop[2]


def test_built_up_noise_adds_its_parts() -> None:
    built = Receiver(
        **BAND, gain_dbi=50.0, receiver_noise_k=60.0, antenna_noise_k=5.0, spill_over_k=10.0, feeder_loss_db=0.5,
    )
    # By hand with the cosmic background alone: 17.7 / 1.12202 + 290 (1 - 1 / 1.12202) + 60 = 107.31 K.
    assert reference_noise_k(built) == pytest.approx(107.31, abs=0.01)
    assert reference_figure_db_per_k(built) == pytest.approx(49.5 - 10.0 * np.log10(107.31), abs=0.001)
    noise = system_noise_at_k(built, DRY, ELEVATIONS)
    assert noise is not None
    # At the zenith 20.88 K of sky in place of 2.7 K, behind the feeder.
    assert noise[2] == pytest.approx(107.31 + 18.18 / 1.12202, abs=0.05)
    assert noise[0] > noise[1] > noise[2]
    assert system_noise_k(290.0, 3.0, 290.0, 0.0) == pytest.approx(290.0)


def test_a_curve_is_followed_and_its_noise_is_inside() -> None:
    curve = Receiver(**BAND, g_over_t_curve=((5.0, 28.0), (30.0, 30.0), (90.0, 31.0)), noise_temperature_k=120.0)
    assert reference_figure_db_per_k(curve) == 31.0
    assert _drop(curve, DRY) == pytest.approx([3.0, 1.0, 0.0])
    assert np.all(_drop(curve, WET) > _drop(curve, DRY))
    assert "not counted again" in figure_note(curve)
    assert "noise unknown" in figure_note(RECEIVER)


@settings(deadline=None, max_examples=60)
@given(st.floats(0.0, 40.0), st.floats(0.0, 40.0), st.floats(0.0, 5.0))
def test_more_rain_or_a_wet_radome_never_betters_the_figure(one_db: float, other_db: float, radome_db: float) -> None:
    less, more = sorted((one_db, other_db))
    for receiver in (
        Receiver(**BAND, gain_dbi=50.0, receiver_noise_k=60.0),
        Receiver(**BAND, gain_dbi=50.0, noise_temperature_k=150.0),
    ):
        drops = []
        for rain_db, radome in ((less, 0.0), (more, 0.0), (more, radome_db)):
            nodes = np.zeros((3, NODES_DEG.size))
            nodes[0] = rain_db
            noise = system_noise_at_k(receiver, Sky(CLEAR, CLEAR, nodes), ELEVATIONS, radome)
            drops.append(figure_drop_db(receiver, ELEVATIONS, noise))
        assert np.all(drops[0] <= drops[1] + 1e-9)
        assert np.all(drops[1] <= drops[2] + 1e-9)


def test_the_sun_fills_a_wide_beam_less_and_fades_away_from_it() -> None:
    # A beam much narrower than the disc sees the disc itself: 120 000 x 8.2^-0.75 = 24 760 K.
    assert sun_noise_k(8_200.0, 0.0, 0.05) == pytest.approx(24_764.0, rel=1e-3)
    # A beam of 2 deg: 1 - exp(-ln 2 x 0.0702) = 4.75 % of it.
    assert sun_noise_k(8_200.0, 0.0, 2.0) == pytest.approx(0.0475 * 24_764.0, rel=2e-3)
    rise = sun_noise_k(8_200.0, [0.0, 0.5, 1.0, 5.0], 0.5)
    assert np.all(np.diff(rise) < 0.0)
    assert rise[-1] == pytest.approx(0.0, abs=1e-6)


def test_dish_size_beam_and_gain_follow_from_each_other() -> None:
    # 5.4 m at 26.25 GHz: (pi D / lambda)^2 = 63.43 dB, less 2.22 dB for an efficiency of 0.6.
    assert dish_diameter_m(26_250.0, 61.21, 0.6) == pytest.approx(5.4, rel=2e-3)
    assert beamwidth_deg(26_250.0, 5.4) == pytest.approx(0.148, abs=0.001)
    assert dish_of(RECEIVER, 8_200.0) == (None, None)
    assert dish_of(RECEIVER.model_copy(update={"diameter_m": 7.3}), 8_200.0)[1] == pytest.approx(0.3506, abs=1e-3)
    gain = dish_gain_dbi([0.0, 0.175, 5.0, 60.0], 53.0, 0.35)
    # Half power at half the beamwidth; 32 - 25 log10(5) = 14.53 dBi by S.465; -10 dBi behind.
    assert gain == pytest.approx([53.0, 50.0, 14.53, -10.0], abs=0.01)


@settings(deadline=None, max_examples=60)
@given(st.lists(st.floats(0.0, 180.0), min_size=2, max_size=6), st.floats(20.0, 70.0), st.floats(0.05, 10.0))
def test_gain_never_rises_off_the_axis(angles: list[float], peak_dbi: float, width_deg: float) -> None:
    gains = dish_gain_dbi(np.sort(angles), peak_dbi, width_deg)
    assert np.all(np.diff(gains) <= 1e-9)
    assert np.all(gains <= peak_dbi)
