"""What a receive chain makes of a signal: G/T along a contact, with sky noise, radome and the Sun."""

from __future__ import annotations

import numpy as np

from passplan.inputs.ground import Receiver
from passplan.inputs.run import Run
from passplan.link.atmosphere import Sky
from passplan.link.budget import (
    COSMIC_BACKGROUND_K,
    beamwidth_deg,
    dish_diameter_m,
    sky_noise_k,
    sun_noise_k,
    system_noise_k,
)
from passplan.planning.audit.rows import Contact
from passplan.planning.audit.sky import Floats, Sight, lifted_deg
from passplan.planning.audit.sun import separations_deg

# Weather never makes a receiver quieter than this share of the noise that was measured.
_LEAST_SHARE = 0.1


def nominal_db_per_k(receiver: Receiver) -> float:
    """The G/T by which one receiver of an antenna is preferred: as stated, or under the cosmic background alone."""
    if receiver.g_over_t_curve:
        return receiver.g_over_t_curve[-1][1]
    if receiver.g_over_t_db_per_k is not None:
        return receiver.g_over_t_db_per_k
    if receiver.receiver_noise_k is not None:
        noise_k = float(_own_noise(receiver, np.array([COSMIC_BACKGROUND_K]))[0])
        return (receiver.gain_dbi or 0.0) - receiver.feeder_loss_db - 10.0 * float(np.log10(noise_k))
    return (receiver.gain_dbi or 0.0) - 10.0 * float(np.log10(receiver.noise_temperature_k or np.inf))


def figures_db_per_k(
    run: Run, contact: Contact, receiver: Receiver, sky: Sky, seen: Sight, frequency_mhz: float, radome_db: float
) -> tuple[Floats, Floats]:
    """G/T at each instant [dB/K], the least and the greatest that the Sun's place leaves open."""
    height_deg = lifted_deg(run, contact.antenna, seen.elevation_deg)
    sky_k = sky_noise_k(sky.at(height_deg).absorbed_db + radome_db)
    if receiver.receiver_noise_k is not None:
        noise_k = _own_noise(receiver, sky_k)
        gain_db = np.full_like(noise_k, (receiver.gain_dbi or 0.0) - receiver.feeder_loss_db)
    else:
        figure = np.full_like(sky_k, nominal_db_per_k(receiver))
        if receiver.g_over_t_curve:
            points = np.array(receiver.g_over_t_curve)
            figure = np.interp(height_deg, points[:, 0], points[:, 1])
        if receiver.noise_temperature_k is None:
            return figure, figure
        stated_k = receiver.noise_temperature_k
        clear_at = height_deg if receiver.measured_at_deg is None else receiver.measured_at_deg
        noise_k = stated_k + sky_k - sky_noise_k(sky.clear_db(clear_at))
        noise_k = np.maximum(noise_k, _LEAST_SHARE * stated_k)
        gain_db = figure + 10.0 * np.log10(stated_k)
    least = greatest = noise_k
    width_deg = _beam(receiver, frequency_mhz)
    if run.policy.sun_noise and width_deg is not None:
        site = run.sites[run.antennas[contact.antenna].site]
        near, far = separations_deg(site, run.start_utc, seen)
        passed = 10.0 ** (-receiver.feeder_loss_db / 10.0)
        least = noise_k + passed * sun_noise_k(frequency_mhz, far, width_deg)
        greatest = noise_k + passed * sun_noise_k(frequency_mhz, near, width_deg)
    return gain_db - 10.0 * np.log10(greatest), gain_db - 10.0 * np.log10(least)


def diameter_m(receiver: Receiver, frequency_mhz: float) -> float | None:
    """The dish's diameter as stated or from its gain."""
    if receiver.diameter_m is not None or receiver.gain_dbi is None:
        return receiver.diameter_m
    return dish_diameter_m(frequency_mhz, receiver.gain_dbi, receiver.aperture_efficiency)


def _beam(receiver: Receiver, frequency_mhz: float) -> float | None:
    across_m = diameter_m(receiver, frequency_mhz)
    if receiver.beamwidth_deg is not None or across_m is None:
        return receiver.beamwidth_deg
    return beamwidth_deg(frequency_mhz, across_m)


def _own_noise(receiver: Receiver, sky_k: Floats) -> Floats:
    aerial_k = sky_k + receiver.spill_over_k + receiver.antenna_noise_k
    return system_noise_k(
        aerial_k, receiver.feeder_loss_db, receiver.feeder_temperature_k, receiver.receiver_noise_k or 0.0
    )
