"""The formulas of a link budget: arrays in, arrays out, each with its source.

Losses are positive numbers of dB. Every function broadcasts its arguments as numpy does.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]

BOLTZMANN_DBW_PER_K_HZ = 10.0 * float(np.log10(1.380649e-23))
"""10 log10 of Boltzmann's constant, exact since the SI of 2019: -228.599 dB(W/(K Hz))."""

SPEED_OF_LIGHT_KM_S = 299_792.458
"""Exact by the definition of the metre (SI)."""

# 20 log10(4 pi d f / c) with d in km and f in MHz.
_FREE_SPACE_CONSTANT_DB = 20.0 * float(np.log10(4.0e6 * np.pi / SPEED_OF_LIGHT_KM_S))


def free_space_loss_db(frequency_mhz: ArrayLike, range_km: ArrayLike) -> Floats:
    """Basic transmission loss in free space [dB], from frequency [MHz] and distance [km].

    Source: ITU-R P.525, L = 20 log10(4 pi d / lambda); 32.45 + 20 log10 f + 20 log10 d in these units.
    """
    frequency, distance = np.asarray(frequency_mhz, np.float64), np.asarray(range_km, np.float64)
    return np.asarray(_FREE_SPACE_CONSTANT_DB + 20.0 * np.log10(frequency * distance))


def figure_of_merit_db_per_k(gain_dbi: ArrayLike, noise_temperature_k: ArrayLike) -> Floats:
    """G/T [dB/K] from the antenna gain [dBi] and the system noise temperature [K], both at one reference.

    Source: definition, G/T = G - 10 log10 T.
    """
    return np.asarray(np.asarray(gain_dbi, np.float64) - _decibel(noise_temperature_k))


def cn0_dbhz(eirp_dbw: ArrayLike, loss_db: ArrayLike, g_over_t_db_per_k: ArrayLike) -> Floats:
    """Carrier to noise density C/N0 [dBHz] from EIRP [dBW], the sum of all losses [dB] and G/T [dB/K].

    Source: the link equation C/N0 = EIRP - L + G/T - 10 log10 k (CCSDS 401.0-B; any textbook).
    """
    carrier = np.asarray(eirp_dbw, np.float64) - np.asarray(loss_db, np.float64)
    return np.asarray(carrier + np.asarray(g_over_t_db_per_k, np.float64) - BOLTZMANN_DBW_PER_K_HZ)


def density_ratio_db(cn0: ArrayLike, rate_per_s: ArrayLike) -> Floats:
    """Energy over noise density [dB]: Es/N0 for a symbol rate [1/s], Eb/N0 for a net bit rate [1/s].

    Source: definition, E/N0 = C/N0 - 10 log10 rate.
    """
    return np.asarray(np.asarray(cn0, np.float64) - _decibel(rate_per_s))


def ebn0_from_esn0_db(esn0_db: ArrayLike, efficiency_bit_per_symbol: ArrayLike) -> Floats:
    """Eb/N0 [dB] from Es/N0 [dB] and the spectral efficiency [bit per symbol].

    Source: definition, Eb/N0 = Es/N0 - 10 log10(efficiency).
    """
    return np.asarray(np.asarray(esn0_db, np.float64) - _decibel(efficiency_bit_per_symbol))


def net_rate_mbps(symbol_rate_msps: float, efficiency_bit_per_symbol: float) -> float:
    """Net user data rate [Mbit/s] from the symbol rate [10^6 symbol/s] and the net efficiency.

    The efficiency of a modcod table already counts coding and framing, so nothing else comes off.
    Source: definition.
    """
    return symbol_rate_msps * efficiency_bit_per_symbol


def _decibel(value: ArrayLike) -> Floats:
    return np.asarray(10.0 * np.log10(np.asarray(value, np.float64)))
