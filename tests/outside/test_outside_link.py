"""The link floor against published figures; the source stands beside each."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from passplan.inputs.modcods import Modcod, builtin_table, shannon_limit_bit_per_symbol
from passplan.link.atmosphere import Weather, ZenithGas, gas_attenuation_db, zenith_gas
from passplan.link.budget import (
    cn0_dbhz,
    density_ratio_db,
    ebn0_from_esn0_db,
    figure_of_merit_db_per_k,
    free_space_loss_db,
)


def test_free_space_loss() -> None:
    # ITU-R P.525: 8 200 MHz over 2 000 km.
    assert free_space_loss_db(8_200.0, 2_000.0) == pytest.approx(176.75, abs=0.01)


def test_a_published_downlink_budget() -> None:
    # EURASIP J. Wireless Com. Network. (2020), article s13638-020-01674-9, Table 1: S band, 3.4 Mbit/s, 5 m dish.
    # EIRP 8.3 dBW, free-space loss 162.2 dB, other losses 10 dB, gain 38.2 dBi, 130 K, implementation loss 6 dB,
    # required Eb/N0 7 dB. Printed there, rounded to 0.1 dB: C/N0 81.8 dBHz, Eb/N0 16.5 dB, margin 3.5 dB.
    cn0 = cn0_dbhz(8.3, 162.2 + 10.0, figure_of_merit_db_per_k(38.2, 130.0))
    ebn0 = density_ratio_db(cn0, 3.4e6)
    assert cn0 == pytest.approx(81.8, abs=0.1)
    assert ebn0 == pytest.approx(16.5, abs=0.1)
    assert ebn0 - 6.0 - 7.0 == pytest.approx(3.5, abs=0.1)


# ETSI EN 302 307-1 V1.4.1, Table 13 (normal frame, no pilots, packet error rate 1e-7): bit per symbol, Es/N0 in dB.
DVB_S2_ROWS = [
    ("QPSK 1/4", 0.490243, -2.35), ("QPSK 1/3", 0.656448, -1.24), ("QPSK 2/5", 0.789412, -0.3),
    ("QPSK 1/2", 0.988858, 1.0), ("QPSK 3/5", 1.188304, 2.23), ("QPSK 2/3", 1.322253, 3.1),
    ("QPSK 3/4", 1.487473, 4.03), ("QPSK 4/5", 1.587196, 4.68), ("QPSK 5/6", 1.654663, 5.18),
    ("QPSK 8/9", 1.766451, 6.2), ("QPSK 9/10", 1.788612, 6.42), ("8PSK 3/5", 1.779991, 5.5),
    ("8PSK 2/3", 1.980636, 6.62), ("8PSK 3/4", 2.228124, 7.91), ("8PSK 5/6", 2.478562, 9.35),
    ("8PSK 8/9", 2.646012, 10.69), ("8PSK 9/10", 2.679207, 10.98), ("16APSK 2/3", 2.637201, 8.97),
    ("16APSK 3/4", 2.966728, 10.21), ("16APSK 4/5", 3.165623, 11.03), ("16APSK 5/6", 3.300184, 11.61),
    ("16APSK 8/9", 3.523143, 12.89), ("16APSK 9/10", 3.567342, 13.13), ("32APSK 3/4", 3.703295, 12.73),
    ("32APSK 4/5", 3.951571, 13.64), ("32APSK 5/6", 4.11954, 14.28), ("32APSK 8/9", 4.397854, 15.69),
    ("32APSK 9/10", 4.453027, 16.05),
]

# ITU-R study group 3, validation examples for P.676-12, slant path: elevation deg, frequency GHz, water vapour g/m3,
# temperature K, pressure hPa, vapour column kg/m2, height km, and the attenuation in dB that must come out.
P676_ROWS = [
    (31.07699124, 14.25, 13.79653679, 283.6108756, 1009.485612, 33.72946527, 0.031382984, 0.226874038),
    (40.232036, 14.25, 18.26241988, 288.0897369, 1007.721474, 36.04810935, 0.046122988, 0.189480858),
    (46.35969261, 14.25, 22.73000178, 293.3696795, 1013.25, 37.95559991, 0.0, 0.176011463),
    (46.35969261, 14.25, 23.75934505, 293.3696795, 1013.25, 43.41046058, 0.0, 0.194697008),
    (31.07699124, 29.0, 14.41253061, 283.6108756, 1009.485612, 35.72555437, 0.031382984, 0.880472547),
    (46.35969261, 29.0, 23.51464505, 293.3696795, 1013.25, 42.21022387, 0.0, 0.733784084),
    (22.27833468, 14.25, 20.73943055, 297.4535413, 1013.25, 49.51318435, 0.0, 0.41148401),
    (52.67898486, 14.25, 22.7920384, 297.5746539, 1012.215224, 59.22233196, 0.00861728, 0.229295863),
    (22.27833468, 29.0, 21.36940337, 297.4535413, 1013.25, 54.63180904, 0.0, 1.795750719),
    (48.24117054, 14.25, 24.71053082, 298.0584989, 988.348774, 70.5913453, 0.209383699, 0.28572246),
    (85.80459566, 14.25, 23.4746267, 299.6054075, 1007.108268, 62.58469725, 0.051251456, 0.191742949),
    (20.14335809, 14.25, 11.72317019, 290.2100933, 743.1872158, 25.92566906, 2.539861878, 0.222223506),
    (85.80459566, 29.0, 24.10541175, 299.6054075, 1007.108268, 64.94637615, 0.051251456, 0.809550126),
    (20.14335809, 29.0, 12.54721426, 290.2100933, 743.1872158, 27.51187059, 2.539861878, 0.741297893),
]


@pytest.fixture(autouse=True)
def _own_cache(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path))


@pytest.mark.parametrize("row", P676_ROWS)
def test_gas_attenuation_validation_examples(row: tuple[float, ...]) -> None:
    elevation, frequency, vapour, kelvin, pressure, column, height, expected = row
    gas = ZenithGas(*zenith_gas(frequency * 1e3, Weather(pressure, kelvin, vapour, column, height)))
    assert gas_attenuation_db(gas, elevation) == pytest.approx(expected, abs=1e-8)


@pytest.mark.parametrize("frequency_mhz", [2_200.0, 8_200.0, 26_000.0])
def test_low_elevations_stay_on_the_safe_side_of_the_layer_by_layer_sum(frequency_mhz: float) -> None:
    # ITU-R P.676-12 Annex 1 (ray through 922 layers of the reference atmosphere), computed by the itur package.
    from itur.models.itu676 import gaseous_attenuation_slant_path

    gas = ZenithGas(*zenith_gas(frequency_mhz, Weather(1_013.25, 288.15, 7.5)))
    for elevation, share in ((1.0, 0.2), (3.0, 0.2), (5.0, 0.12), (10.0, 0.1), (45.0, 0.1)):
        exact = float(
            gaseous_attenuation_slant_path(
                frequency_mhz / 1e3, elevation, 7.5, 1_013.25, 288.15, mode="exact"
            ).value
        )
        ours = float(gas_attenuation_db(gas, elevation))
        assert ours == pytest.approx(exact, rel=share, abs=0.01)
        if elevation < 5.0:
            assert ours > exact


@pytest.mark.parametrize("row", builtin_table("dvb-s2").rows, ids=lambda row: row.name)
def test_no_dvb_s2_modcod_beats_shannon(row: Modcod) -> None:
    # Shannon 1948; rows: ETSI EN 302 307-1 V1.4.1, Table 13.
    assert row.efficiency_bit_per_symbol < shannon_limit_bit_per_symbol(row.required_esn0_db)
    # No reliable link below the ultimate limit Eb/N0 = ln 2 = -1.59 dB.
    ebn0 = float(ebn0_from_esn0_db(row.required_esn0_db, row.efficiency_bit_per_symbol))
    assert ebn0 == pytest.approx(row.required_esn0_db - 10.0 * np.log10(row.efficiency_bit_per_symbol))
    assert ebn0 > -1.59


def test_all_dvb_s2_figures_as_printed() -> None:
    ours = {(row.name, row.efficiency_bit_per_symbol, row.required_esn0_db) for row in builtin_table("dvb-s2").rows}
    assert len(DVB_S2_ROWS) == 28
    assert ours == set(DVB_S2_ROWS)
