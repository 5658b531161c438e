"""The formulas of a link budget: arrays in, arrays out, each with its source.

Losses are positive numbers of dB. Every function broadcasts its arguments as numpy does.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from passplan.geometry.motion import LIGHT_KM_S

Floats = NDArray[np.float64]

BOLTZMANN_DBW_PER_K_HZ = 10.0 * float(np.log10(1.380649e-23))
"""10 log10 of Boltzmann's constant, exact since the SI of 2019: -228.599 dB(W/(K Hz))."""

COSMIC_BACKGROUND_K = 2.7
MEAN_RADIATING_K = 275.0
"""Both of ITU-R P.618-13, section 3."""

SUN_DISC_DEG = 0.53
"""Apparent diameter of the Sun, mean (textbook)."""

# 20 log10(4 pi d f / c) with d in km and f in MHz.
_FREE_SPACE_CONSTANT_DB = 20.0 * float(np.log10(4.0e6 * np.pi / LIGHT_KM_S))


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


def eirp_from_power_dbw(power_w: ArrayLike, gain_dbi: ArrayLike, loss_db: ArrayLike) -> Floats:
    """EIRP [dBW] from the transmitter's power [W], the antenna gain [dBi] and the loss between them [dB].

    Source: definition.
    """
    return np.asarray(_decibel(power_w) + np.asarray(gain_dbi, np.float64) - np.asarray(loss_db, np.float64))


def sky_noise_k(attenuation_db: ArrayLike) -> Floats:
    """Noise temperature of the sky [K] as an antenna sees it through an absorbing path [dB].

    Source: ITU-R P.618-13, section 3: T_mr (1 - 10^(-A/10)) + 2.7 x 10^(-A/10), mean radiating temperature
    T_mr 275 K. Scintillation does not absorb and is no part of A.
    """
    passed = 10.0 ** (-np.asarray(attenuation_db, np.float64) / 10.0)
    return np.asarray(MEAN_RADIATING_K * (1.0 - passed) + COSMIC_BACKGROUND_K * passed)


def system_noise_k(
    antenna_k: ArrayLike, feeder_loss_db: ArrayLike, feeder_temperature_k: ArrayLike, receiver_k: ArrayLike
) -> Floats:
    """System noise temperature [K] at the receiver's input, behind a lossy feeder.

    Source: textbook (Friis): T_a / L + T_f (1 - 1/L) + T_r. The gain that goes with it is that of the
    antenna less the feeder loss.
    """
    passed = 10.0 ** (-np.asarray(feeder_loss_db, np.float64) / 10.0)
    antenna, feeder = np.asarray(antenna_k, np.float64), np.asarray(feeder_temperature_k, np.float64)
    return np.asarray(antenna * passed + feeder * (1.0 - passed) + np.asarray(receiver_k, np.float64))


def sun_noise_k(frequency_mhz: ArrayLike, separation_deg: ArrayLike, beamwidth_deg: ArrayLike) -> Floats:
    """Rise of the antenna's noise temperature [K] by the Sun at an angle [deg] from the beam's axis.

    A Gaussian beam and a uniform disc of 0.53 deg: on axis T_s (1 - exp(-ln 2 (D / w)^2)), off it the beam
    widened by the disc, exp(-4 ln 2 s^2 / (w^2 + D^2 / 2)). T_s = 120 000 f^-0.75 K (f in GHz), the form of
    ITU-R S.1525, from memory, without its factor for polarisation: rather high for a quiet Sun.
    """
    width = np.asarray(beamwidth_deg, np.float64)
    disc_k = 120_000.0 * (np.asarray(frequency_mhz, np.float64) / 1e3) ** -0.75
    on_axis = disc_k * -np.expm1(-np.log(2.0) * (SUN_DISC_DEG / width) ** 2)
    square = np.asarray(separation_deg, np.float64) ** 2 / (width**2 + SUN_DISC_DEG**2 / 2.0)
    return np.asarray(on_axis * np.exp(-4.0 * np.log(2.0) * square))


def beamwidth_deg(frequency_mhz: float, diameter_m: float) -> float:
    """Half-power beamwidth [deg] of a dish: 70 wavelengths over the diameter (common practice, no source)."""
    return 70.0 * LIGHT_KM_S / 1e3 / frequency_mhz / diameter_m


def dish_diameter_m(frequency_mhz: float, gain_dbi: float, efficiency: float) -> float:
    """Diameter [m] of the dish of a gain [dBi] and an aperture efficiency: G = eff (pi D / lambda)^2 (textbook)."""
    wavelength_m = LIGHT_KM_S / 1e3 / frequency_mhz
    return float(wavelength_m / np.pi * np.sqrt(10.0 ** (gain_dbi / 10.0) / efficiency))


def dish_gain_dbi(off_axis_deg: ArrayLike, peak_dbi: ArrayLike, beamwidth_deg: ArrayLike) -> Floats:
    """Gain of a dish [dBi] at an angle off its axis [deg].

    The higher of a parabolic main beam, G - 12 (angle / beamwidth)^2 (common practice), and the side-lobe
    envelope of ITU-R S.465-6: 32 - 25 log10(angle) from 1 to 48 deg, -10 beyond; 32 within 1 deg (own choice:
    the envelope is not stated there), and never more than the peak.
    """
    angle, peak = np.abs(np.asarray(off_axis_deg, np.float64)), np.asarray(peak_dbi, np.float64)
    width = np.asarray(beamwidth_deg, np.float64)
    envelope = np.where(angle < 48.0, 32.0 - 25.0 * np.log10(np.maximum(angle, 1.0)), -10.0)
    return np.asarray(np.minimum(peak, np.maximum(peak - 12.0 * (angle / width) ** 2, envelope)))


def off_nadir_deg(elevation_deg: ArrayLike, range_km: ArrayLike, latitude_deg: float, height_m: float) -> Floats:
    """Angle at the spacecraft between Earth's centre and the station [deg], from elevation and slant range.

    Source: plane triangle of station, spacecraft and Earth's centre: tan = R cos(el) / (d + R sin(el)), R the
    distance of the station from the centre (WGS 84). Geodetic and geocentric up differ by up to 0.2 deg,
    which is left out.
    """
    radius_km = earth_radius_km(latitude_deg) + height_m / 1e3
    elevation = np.radians(np.asarray(elevation_deg, np.float64))
    along = np.asarray(range_km, np.float64) + radius_km * np.sin(elevation)
    return np.asarray(np.degrees(np.arctan2(radius_km * np.cos(elevation), along)))


def earth_radius_km(latitude_deg: float) -> float:
    """Distance of the ellipsoid's surface from Earth's centre [km] at a geodetic latitude (WGS 84)."""
    cosine, sine = np.cos(np.radians(latitude_deg)), np.sin(np.radians(latitude_deg))
    major, minor = 6378.137, 6356.752314
    above = (major**2 * cosine) ** 2 + (minor**2 * sine) ** 2
    return float(np.sqrt(above / ((major * cosine) ** 2 + (minor * sine) ** 2)))


def power_flux_density_dbw_per_m2(
    eirp_dbw: ArrayLike, range_km: ArrayLike, symbol_rate_hz: float, bandwidth_hz: float
) -> Floats:
    """Power flux density at the ground [dB(W/m2)] in a reference bandwidth [Hz], without atmosphere.

    Source: EIRP / (4 pi d^2), spread evenly over the symbol rate: what a reference bandwidth below it takes is
    their ratio (definition; the peak of a shaped spectrum).
    """
    spread_db = 10.0 * np.log10(4.0 * np.pi) + 20.0 * np.log10(np.asarray(range_km, np.float64) * 1e3)
    share_db = 10.0 * np.log10(min(1.0, bandwidth_hz / symbol_rate_hz))
    return np.asarray(np.asarray(eirp_dbw, np.float64) - spread_db + share_db)


def _decibel(value: ArrayLike) -> Floats:
    return np.asarray(10.0 * np.log10(np.asarray(value, np.float64)))
