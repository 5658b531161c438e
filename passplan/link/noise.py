"""System noise of a receive chain: what it is stated or built up to be, and what weather and the Sun add.

The four ways in which a receiver says how well it hears, and what each counts:

    stated as                       sky noise in clear sky     with rain and cloud
    G/T, or gain and system noise   inside the figure          the rise over clear sky, if the noise is known
    the same, measured_at_deg       inside, at that elevation  the rise over clear sky at that elevation
    G/T curve                       inside, at each elevation  the rise over clear sky, if the noise is known
    gain, receiver and feeder       added at each elevation    added at each elevation

so that sky noise is never counted twice.
"""

from __future__ import annotations

import numpy as np

from passplan.inputs.ground import Receiver
from passplan.link.atmosphere import Attenuations, Sky
from passplan.link.budget import (
    COSMIC_BACKGROUND_K,
    Floats,
    beamwidth_deg,
    dish_diameter_m,
    figure_of_merit_db_per_k,
    sky_noise_k,
    system_noise_k,
)


def reference_figure_db_per_k(receiver: Receiver) -> float:
    """G/T as stated (of a curve: its value nearest the zenith), or from gain and noise [dB/K].

    Built-up noise is taken here with the cosmic background alone; :func:`figure_drop_db` adds the air.
    """
    if receiver.g_over_t_db_per_k is not None:
        return receiver.g_over_t_db_per_k
    if receiver.g_over_t_curve:
        return receiver.g_over_t_curve[-1][1]
    noise_k = reference_noise_k(receiver)
    if receiver.gain_dbi is None or noise_k is None:
        raise ValueError(f"receiver {receiver.name!r} states neither G/T nor gain and noise temperature")
    return float(figure_of_merit_db_per_k(receiver.gain_dbi - receiver.feeder_loss_db, noise_k))


def reference_noise_k(receiver: Receiver) -> float | None:
    """System noise temperature [K] behind :func:`reference_figure_db_per_k`; None where it is not known."""
    if receiver.receiver_noise_k is None:
        return receiver.noise_temperature_k
    return float(_built_up_k(receiver, np.asarray(COSMIC_BACKGROUND_K)))


def system_noise_at_k(
    receiver: Receiver, sky: Sky, elevation_deg: Floats, wet_radome_db: float = 0.0, air: Attenuations | None = None
) -> Floats | None:
    """System noise temperature [K] at elevations [deg] under a sky; None where it is not known.

    A wet radome radiates like the air behind it (the allowance's own assumption). ``air`` is the sky at
    these elevations, if it is known already.
    """
    sky_k = sky_noise_k((air or sky.at(elevation_deg)).absorbed_db + wet_radome_db)
    if receiver.receiver_noise_k is not None:
        return _built_up_k(receiver, sky_k)
    if receiver.noise_temperature_k is None:
        return None
    measured_deg = elevation_deg if receiver.measured_at_deg is None else np.asarray(receiver.measured_at_deg)
    # A measured figure cannot be bettered by more than the sky noise that it held.
    rise_k = sky_k - sky_noise_k(sky.clear_db(measured_deg))
    return np.asarray(np.maximum(receiver.noise_temperature_k + rise_k, 0.1 * receiver.noise_temperature_k))


def figure_drop_db(receiver: Receiver, elevation_deg: Floats, noise_k: Floats | None) -> Floats:
    """By how much G/T at elevations [deg] is below :func:`reference_figure_db_per_k` [dB].

    ``noise_k`` is that of :func:`system_noise_at_k`.
    """
    drop_db = np.zeros_like(elevation_deg)
    if receiver.g_over_t_curve:
        angles, figures = np.array(receiver.g_over_t_curve).T
        drop_db = reference_figure_db_per_k(receiver) - np.interp(elevation_deg, angles, figures)
    reference_k = reference_noise_k(receiver)
    if noise_k is None or reference_k is None:
        return drop_db
    return np.asarray(drop_db + 10.0 * np.log10(noise_k / reference_k))


def figure_note(receiver: Receiver) -> str:
    """What a receiver's G/T counts, in words, so that nobody counts sky noise twice."""
    if receiver.receiver_noise_k is not None:
        return "antenna, spill-over, feeder, receiver and sky noise added up (ITU-R P.618-13, section 3)"
    if receiver.g_over_t_curve:
        inside = "G/T measured at elevation: its clear-sky noise is inside and not counted again"
    elif receiver.measured_at_deg is not None:
        inside = f"measured at {receiver.measured_at_deg:g} deg: the clear-sky noise there is inside, not counted again"
    else:
        inside = "as stated: clear-sky noise is inside and not counted again"
    return inside if receiver.noise_temperature_k is not None else f"{inside}; noise unknown, so nothing raises it"


def dish_of(receiver: Receiver, frequency_mhz: float) -> tuple[float | None, float | None]:
    """Diameter [m] and half-power beamwidth [deg], stated or from each other or from the gain; None if unknown."""
    diameter_m = receiver.diameter_m
    if diameter_m is None and receiver.gain_dbi is not None:
        diameter_m = dish_diameter_m(frequency_mhz, receiver.gain_dbi, receiver.aperture_efficiency)
    width_deg = receiver.beamwidth_deg
    if width_deg is None and diameter_m is not None:
        width_deg = beamwidth_deg(frequency_mhz, diameter_m)
    return diameter_m, width_deg


def _built_up_k(receiver: Receiver, sky_k: Floats) -> Floats:
    antenna_k = sky_k + receiver.antenna_noise_k + receiver.spill_over_k
    return system_noise_k(
        antenna_k, receiver.feeder_loss_db, receiver.feeder_temperature_k, receiver.receiver_noise_k or 0.0
    )
